"""How far a relay has come towards its operation while the current changes: ∫ dt/t(I) = 1.

IEC 60255-151:2009, the dynamic operation of inverse-time relays (from memory): in each instant the relay
covers 1/t(I) of its way, t(I) the operate time of that current. A definite delay runs in the same way, at
a speed that does not depend on the current. A relay that falls back below its pickup begins anew: reset
without delay, as numerical relays have it unless told otherwise (common practice).
"""

from __future__ import annotations

from math import inf, isinf


def travelled(travel: float, time: float, lasting: float) -> float:
    """Share of the way, 0 to 1, after ``lasting`` s of a current whose operate time is ``time`` s.

    ``travel`` the share before; ``time`` infinite below the pickup, which resets to 0.
    """
    if isinf(time):
        return 0.0
    return 1.0 if lasting >= until_operation(travel, time) else travel + lasting / time


def until_operation(travel: float, time: float) -> float:
    """Time (s) until a relay that has covered ``travel`` operates; infinite where it rests."""
    return inf if isinf(time) else max(1.0 - travel, 0.0) * time
