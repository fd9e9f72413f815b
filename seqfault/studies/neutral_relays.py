"""The earth-fault relays of a case as the study of a neutral looks at them."""

from __future__ import annotations

import msgspec
import numpy as np

from seqfault.case.records import Case
from seqfault.faults.neutral_relays import RelayView
from seqfault.model.elements import Complex, Floats
from seqfault.studies.neutral_states import NeutralStates
from seqfault.studies.protection import protection

EARTH = ("residual", "core-balance", "neutral")
"""What relays measure whose current is three times a zero-sequence current."""


class Seen(msgspec.Struct, frozen=True, eq=False):
    """What one relay sees over ohms (n,): least ``current`` A over kinds and states, and its ``state``."""

    view: RelayView
    current: Floats
    state: tuple[str, ...]

    @property
    def multiple(self) -> Floats:
        """Times its pickup (n,)."""
        return np.asarray(self.current / self.view.pickup)


def relay_views(case: Case) -> tuple[tuple[RelayView, ...], tuple[str, ...]]:
    """The relays of ``case`` that look at earth currents, and sentences on those that do not count."""
    guarded = protection(case)
    if guarded is None:
        return (), ()
    views, others = [], []
    for relay in guarded.relays.values():
        if relay.measures not in EARTH or relay.pickup.primary is None:
            others.append(relay.name)
            continue
        views.append(RelayView(relay.name, relay.element, relay.bus, relay.star, relay.pickup.primary))
    if not others:
        return tuple(views), ()
    shown = ", ".join(others[:6]) + (f" and {len(others) - 6} more" if len(others) > 6 else "")
    text = f"relays without a column, since they measure no earth current or have no pickup: {shown}"
    return tuple(views), (text,)


def seen_by(neutral: NeutralStates, ohms: Complex) -> tuple[Seen, ...]:
    """What every relay sees of faults at the place for ``ohms`` (n,), states without it left out."""
    out = []
    for view in neutral.relays:
        here = [s for s in neutral.states if any(r.view.name == view.name for r in s.relays)]
        if not here:
            continue
        values = np.stack([s.seen(view.name, ohms) for s in here])
        least = values.argmin(axis=0)
        names = tuple(here[k].name for k in least.tolist())
        out.append(Seen(view, values.min(axis=0), names))
    return tuple(out)
