"""The pickups that make the sum of operate times least, and then the highest of those.

Exhaustive where there are few, else one relay after the other from several starts.
"""

from __future__ import annotations

import math
from collections.abc import Mapping
from itertools import product

import msgspec

from seqfault.studies.settings_times import Conflict, Found, Task, times_for

EXHAUSTIVE = 4000
"""Sets of pickups that are all tried; with more, one relay after the other from several starts."""


class Reason(msgspec.Struct, frozen=True):
    """The conflict told where nothing is found: the one that came nearest."""

    text: str = ""
    gap: float = math.inf

    def beside(self, conflict: Conflict) -> Reason:
        """This reason, or that of ``conflict``."""
        if self.text and self.gap <= conflict.gap:
            return self
        return Reason(str(conflict), conflict.gap)


def search(task: Task) -> tuple[Found | None, bool, str]:
    """The best settings, whether all pickups were tried, and where there are none a reason."""
    names = [name for name, window in task.windows.items() if len(window.pickups) > 1]
    timed = [n for n in names if task.relays[n].curve != "definite"]
    tries = {name: task.windows[name].tried() for name in timed}
    count = math.prod(len(each) for each in tries.values())
    best: Found | None = None
    reason = Reason()
    if count <= EXHAUSTIVE:
        for some in product(*tries.values()):
            best, reason = _better(task, dict(zip(timed, some, strict=True)), best, reason)
    else:
        for start in (0.0, 1.0, 0.5):
            own = {n: each[round(start * (len(each) - 1))] for n, each in tries.items()}
            best, reason = _descend(task, own, tries, best, reason)
    if best is not None:
        whole = count <= EXHAUSTIVE and all(len(tries[n]) == len(task.windows[n].pickups) for n in timed)
        if not whole:
            own = {n: float(best.settings[n].pickup or 0) for n in timed}
            near = {n: task.windows[n].near(pickup) for n, pickup in own.items()}
            best, reason = _descend(task, own, near, best, reason)
        return best, whole, ""
    return None, count <= EXHAUSTIVE, reason.text


def _better(
    task: Task, pickups: Mapping[str, float], best: Found | None, reason: Reason
) -> tuple[Found | None, Reason]:
    try:
        found = times_for(task, pickups)
    except Conflict as conflict:
        return best, reason.beside(conflict)
    return (found if best is None or _rank(task, found) < _rank(task, best) else best), reason


def _rank(task: Task, found: Found) -> tuple[float, float]:
    """The sum of times, then the pickups as shares of what they may be, the higher the better."""
    high = sum(
        (found.settings[n].pickup or 0) / (w.pickups[-1] if w.pickups else 1)
        for n, w in task.windows.items()
    )
    return round(found.total, 9), -round(high, 9)


def _descend(
    task: Task,
    own: dict[str, float],
    tries: Mapping[str, tuple[float, ...]],
    best: Found | None,
    reason: Reason,
) -> tuple[Found | None, Reason]:
    """One relay after the other, while anything gets better."""
    here: Found | None = None
    here, reason = _better(task, own, None, reason)
    for _ in range(12):
        before = here
        for name, pickups in tries.items():
            for pickup in pickups:
                trial = {**own, name: pickup}
                here, reason = _better(task, trial, here, reason)
            if here is not None:
                own = {n: float(here.settings[n].pickup or 0) for n in own}
        if here is before:
            break
    if here is not None and (best is None or _rank(task, here) < _rank(task, best)):
        best = here
    return best, reason
