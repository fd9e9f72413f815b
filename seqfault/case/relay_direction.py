"""Rules for the voltage a relay measures, for its direction and what polarises it."""

from __future__ import annotations

import math

from seqfault.case.protection import Relay
from seqfault.case.quantities import Quantity
from seqfault.case.relay_places import no_star_point
from seqfault.case.relay_sites import Places, StarUser
from seqfault.case.subject import ROOT3, Subject, real
from seqfault.case.wording import Spelling, amount, listed
from seqfault.errors import quoted

POLARISATIONS = ("residual-voltage", "negative-sequence-voltage", "phase-voltage")
"""Words of ``polarisation``; any other text names a star point, whose current polarises."""


def check_vt(subject: Subject, relay: Relay, users: tuple[StarUser, ...] | None) -> None:
    """Doubt a voltage transformer that is of no use, or of another voltage than its bus."""
    if relay.vt is None:
        return
    if relay.direction is None and relay.measures != "neutral-voltage":
        subject.warn("vt", "it serves a direction or neutral-voltage, and this relay has neither")
    if users is None:
        rated = Quantity(relay.vt.primary, "voltage", relay.vt.text)
        subject.rated_voltage("vt", rated, relay.at.partition("@")[2])
        return
    for user in users[:1]:
        bus = subject.site.case.buses.get(user.bus)
        nominal = real(bus.voltage) if bus is not None else None
        if nominal and nominal > 0 and not 0.9 <= relay.vt.primary * ROOT3 / nominal <= 1.1:
            subject.warn(
                "vt",
                f"{quoted(relay.vt.text)} is {relay.vt.primary * ROOT3 / nominal:.3g} times the phase "
                f"voltage {amount(nominal / ROOT3, 'V')}, which is what can stand on this star point",
            )


def check_direction(subject: Subject, relay: Relay, places: Places) -> None:
    """Tell what is wrong about a direction and what polarises it."""
    if relay.direction is None:
        for field in ("characteristic_angle", "polarisation"):
            if getattr(relay, field) is not None:
                subject.error(field, "it goes with a direction, and that is not given")
        return
    if relay.measures in ("neutral", "neutral-voltage"):
        subject.error("direction", f"{relay.measures} has none; forward is from a bus into an element")
        return
    if relay.characteristic_angle is None:
        subject.error(
            "characteristic_angle",
            "this is missing; a direction needs it, the current ahead of the polarising quantity, as in "
            '"-15 deg" (common practice: -15 resistance-earthed, -45 to -60 solidly earthed, '
            "+90 unearthed, 0 with a coil)",
        )
    else:
        angle = real(relay.characteristic_angle) or 0.0
        if abs(angle) > math.pi * (1 + 1e-9):
            subject.error(
                "characteristic_angle",
                f"{quoted(relay.characteristic_angle.text)}: this lies between -180 and 180 deg",
            )
    by = relay.polarisation
    if by is not None and by not in POLARISATIONS:
        if by not in places.stars and by not in subject.site.case.neutrals:
            close = Spelling([*POLARISATIONS, *places.stars]).hint(by)
            if by in places.own:
                no_star_point(subject, "polarisation", by, places)
            elif by.rpartition(".")[0] not in subject.site.broken and by not in subject.site.broken:
                subject.error(
                    "polarisation",
                    f"{quoted(by)}: {listed(map(quoted, POLARISATIONS))} is wanted, or the name of a "
                    f"star point whose current polarises{close if 'did you mean' in close else ''}",
                )
        elif relay.measures == "phase":
            subject.error("polarisation", f"{quoted(by)}: a star point's current says nothing of a phase")
        return
    if relay.vt is None:
        what = f"polarisation = {quoted(by)} needs it" if by else "a direction needs it"
        subject.error(
            "vt",
            f'this is missing; {what}, as in "11 kV/110 V"'
            + ("" if by else ", or polarisation = the name of a star point whose current polarises"),
        )
