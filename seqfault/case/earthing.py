"""Rules for neutrals, and for what is joined to them."""

from __future__ import annotations

from seqfault.case.records import Case, Neutral
from seqfault.case.subject import ROOT3, Subject, real, said, voltage_cure
from seqfault.case.wording import amount, quoted

_LET_THROUGH = (0.05, 20e3)  # A, common practice


def check_neutral(subject: Subject, neutral: Neutral, users: tuple[float, ...]) -> None:
    """Tell what is wrong or doubtful; ``users`` are the rated voltages (V) of its star points."""
    fields = ("parallel_resistance", "current", "voltage", "duration", "continuous")
    sound = subject.positive({field: getattr(neutral, field) for field in fields})
    sound &= subject.positive({"temperature_rise": neutral.temperature_rise})
    sound &= subject.positive({"resistance": neutral.resistance, "reactance": neutral.reactance}, zero=True)
    sound &= _one_way(subject, neutral)
    if not users:
        subject.warn("", "no star point is joined to it")
    impedance = _ohms(neutral) if sound else None
    voltage, current = real(neutral.voltage), real(neutral.current)
    if sound and voltage and current:
        stated = voltage / ROOT3 / current
        if impedance and abs(stated - impedance) > 0.05 * impedance:
            subject.error(
                "current",
                f"{said(neutral.current)} at {said(neutral.voltage)} makes {stated:.4g} ohm, "
                f"and the ohms given make {impedance:.4g}; correct one of the two",
            )
        impedance = impedance or stated
    _against_users(subject, neutral, users, impedance)


def _one_way(subject: Subject, neutral: Neutral) -> bool:
    """Tell whether ohms are stated, or a current with its voltage."""
    series = [part for part in (neutral.resistance, neutral.reactance) if part is not None]
    if series and not any(part.value for part in series):
        subject.error("", '0 ohm to earth is written neutral = "solid" at the star point')
        return False
    if neutral.current is not None and neutral.voltage is None:
        subject.error("voltage", "this is missing; current needs it, line to line")
        return False
    if neutral.voltage is not None and neutral.current is None and not series:
        subject.error("current", "this is missing; voltage alone gives no ohms")
        return False
    if not series and neutral.parallel_resistance is not None:
        subject.error("parallel_resistance", "it stands beside a reactance; alone it is written resistance")
        return False
    if not series and neutral.current is None:
        subject.error("", "its ohms are missing; give resistance, reactance, or current with voltage")
        return False
    return True


def _ohms(neutral: Neutral) -> float | None:
    """Return the magnitude of what the ohm fields make, or None where there are none."""
    series = complex(real(neutral.resistance) or 0, real(neutral.reactance) or 0)
    beside = real(neutral.parallel_resistance)
    if not series:
        return None
    return abs(series * beside / (series + beside)) if beside else abs(series)


def _against_users(
    subject: Subject, neutral: Neutral, users: tuple[float, ...], impedance: float | None
) -> None:
    if not users:
        return
    highest = max(users)
    if impedance:
        let_through = highest / ROOT3 / impedance
        text = (
            f"it lets through {amount(let_through, 'A')} at {amount(highest, 'V')}, "
            "outside the usual 0.05 A to 20 kA"
        )
        subject.usual("", let_through, _LET_THROUGH, text, 1e3)
    voltage = real(neutral.voltage)
    if voltage and all(max(voltage / user, user / voltage) > 1.3 for user in users):
        subject.warn(
            "voltage",
            f"{said(neutral.voltage)} is {voltage / highest:.3g} times the "
            f"{amount(highest, 'V')} of its star point{voltage_cure(voltage / highest)}",
        )


def star_points(case: Case) -> dict[str, tuple[float, ...]]:
    """Return the rated line-to-line voltages (V) of the star points on each neutral."""
    users: dict[str, tuple[float, ...]] = {}

    def join(name: str | None, voltage: float | None) -> None:
        if name is not None and voltage and voltage > 0:
            users[name] = (*users.get(name, ()), voltage)

    for unit in case.transformers.values():
        join(unit.hv.neutral, real(unit.hv.voltage))
        join(unit.lv.neutral, real(unit.lv.voltage))
    for machine in case.generators.values():
        bus = case.buses.get(machine.bus)
        join(machine.neutral, real(machine.voltage or (bus.voltage if bus else None)))
    return users


def star_point_named(case: Case, name: str) -> str | None:
    """Return what to say when a neutral has the name that a star point of a unit has already."""
    unit, _, side = name.rpartition(".")
    if side in ("hv", "lv") and unit in case.transformers:
        return f"this is how the {side} star point of transformer {quoted(unit)} is named"
    return None
