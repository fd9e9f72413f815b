"""Symmetrical components.

Source: C. L. Fortescue, "Method of Symmetrical Co-ordinates Applied to the Solution of Polyphase
Networks", Trans. AIEE 37 (1918); in the notation of IEC 60909-0, sequence axis in the order 0, 1, 2.
"""

from __future__ import annotations

import numpy as np
import numpy.typing as npt

Complex = npt.NDArray[np.complex128]

_HALF_ROOT3 = np.sqrt(3.0) / 2.0
A = complex(-0.5, _HALF_ROOT3)
"""The operator a: a turn by 120 degrees."""

TO_PHASES: Complex = np.array(
    [[1, 1, 1], [1, A.conjugate(), A], [1, A, A.conjugate()]], dtype=np.complex128
)
"""Columns 0, 1, 2; rows a, b, c."""

TO_SEQUENCE: Complex = TO_PHASES.conj() / 3.0

# cos and sin of 30 degrees times the clock number, exact where they are 0, 1/2 or 1.
_COS = np.array([1, _HALF_ROOT3, 0.5, 0, -0.5, -_HALF_ROOT3, -1, -_HALF_ROOT3, -0.5, 0, 0.5, _HALF_ROOT3])
_TURNS: Complex = _COS - 1j * np.roll(_COS, 3)


def to_phases(sequence: Complex) -> Complex:
    """Phase values a, b, c of the components 0, 1, 2; both along the first axis, any unit."""
    return np.tensordot(TO_PHASES, sequence, axes=1)


def to_sequence(phases: Complex) -> Complex:
    """Components 0, 1, 2 of the phase values a, b, c; both along the first axis, any unit."""
    return np.tensordot(TO_SEQUENCE, phases, axes=1)


def clock_turn(clock: npt.ArrayLike) -> Complex:
    """The factor e^(-j 30 degrees × clock) by which a side of that clock lags (IEC 60076-1).

    Positive-sequence quantities are multiplied by it, negative-sequence ones by its conjugate.
    """
    return np.asarray(_TURNS[np.asarray(clock) % 12])


def turn_sequence(sequence: Complex, clock: npt.ArrayLike) -> Complex:
    """Components 0, 1, 2 (first axis) turned by the clock numbers of the last axis."""
    turn = clock_turn(clock)
    return np.stack([sequence[0], sequence[1] * turn, sequence[2] * turn.conj()])
