"""The margin in time between two relays that stand in line.

Common practice of graded overcurrent protection: the relay behind must still wait when its own time comes
out short, the other's long, both see the current through current transformers that err, and the breaker
in front has yet to clear.
"""

from __future__ import annotations

from typing import Any

RELAY_ERROR = 0.05
"""Of the operate time, of each of the two relays (class 5 of IEC 60255-151; common practice)."""
CT_ERROR = 0.10
"""Of the operate time, by the errors of the current transformers (common practice)."""
BREAKER = 0.10
"""s to clear, from the trip of the relay in front (common practice)."""
OVERSHOOT = 0.02
"""s that the relay behind runs on after the current has gone (common practice, static relays)."""
SAFETY = 0.03
"""s (common practice)."""


def grading_margin(
    time: Any,
    relay_error: float = RELAY_ERROR,
    ct_error: float = CT_ERROR,
    breaker: float = BREAKER,
    overshoot: float = OVERSHOOT,
    safety: float = SAFETY,
) -> Any:
    """Margin (s) behind a relay that operates in ``time`` (s): (2 e_R + e_CT) t + t_B + t_O + t_S.

    Errors are fractions of the time; ``breaker``, ``overshoot`` and ``safety`` in s; ``time`` a number
    or an array. Common practice: with the usual terms 0.25 s behind 0.5 s.
    """
    return (2 * relay_error + ct_error) * time + breaker + overshoot + safety
