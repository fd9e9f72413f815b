"""Earth faults through a resistance: against phase coordinates solved by numpy, and against a bisection."""

from __future__ import annotations

import numpy as np
import pytest

from seqfault.equations.fault_resistance import (
    at_resistance,
    displacement_without_path,
    greatest_resistance,
    sequence_forms,
)
from seqfault.equations.symmetrical import TO_PHASES, TO_SEQUENCE

rng = np.random.default_rng(5)


def drawn(n: int) -> tuple[np.ndarray, ...]:  # type: ignore[type-arg]  # complex
    return tuple(rng.uniform(0, 3, n) + 1j * rng.uniform(-1, 5, n) for _ in range(3))


def by_phases(z: np.ndarray, kind: int, r: float) -> np.ndarray:  # type: ignore[type-arg]  # complex
    """Sequence currents of a fault solved in phase coordinates: (Eᵀ Z E + Z_f) i = Eᵀ v."""
    phases = TO_PHASES @ np.diag(z) @ TO_SEQUENCE
    v = TO_PHASES[:, 1]
    at = np.array([[1.0, 0, 0]]).T if kind == 0 else np.array([[0, 1.0, 0], [0, 0, 1.0]]).T
    fault = r * np.ones((at.shape[1], at.shape[1]))
    i = np.linalg.solve(at.T @ phases @ at + fault, at.T @ v)
    return np.asarray(TO_SEQUENCE @ (at @ i))


@pytest.mark.parametrize("r", [0.0, 0.7, 40.0])
def test_forms_are_the_faults_in_phase_coordinates(r: float) -> None:
    z = drawn(12)
    top, bottom = sequence_forms(*z)
    for kind in (0, 1):
        for n in range(12):
            wanted = by_phases(np.array([each[n] for each in z]), kind, r)
            got = [complex(at_resistance(top[kind, s, n], bottom[kind, n], [r])[0]) for s in range(3)]
            assert got == pytest.approx(wanted.tolist(), rel=1e-10)


def test_without_a_path_two_phases_draw_what_a_line_line_fault_does() -> None:
    _, z1, z2 = drawn(4)
    top, bottom = sequence_forms(np.full(4, np.inf, complex), z1, z2)
    current = at_resistance(top, bottom[:, None], [0.0, 55.0])
    assert not current[0].any()
    assert not current[1, 0].any()
    assert current[1, 1, :, 1] == pytest.approx(1 / (z1 + z2))
    assert current[1, 2, :, 1] == pytest.approx(-1 / (z1 + z2))
    # -E, and V0 = V1 = V2 of a line-line fault: E Z2/(Z1 + Z2)
    assert displacement_without_path(z1, z2)[0] == pytest.approx(-1)
    assert displacement_without_path(z1, z2)[1] == pytest.approx(z2 / (z1 + z2))


def test_the_greatest_resistance_is_that_of_a_fine_search() -> None:
    n = 400
    top = rng.normal(size=(n, 2)) + 1j * rng.normal(size=(n, 2))
    bottom = rng.normal(size=(n, 2)) + 1j * rng.normal(size=(n, 2))
    towards = rng.normal(size=(n, 2)) + 1j * rng.normal(size=(n, 2))
    top[::3, 1] = 0
    r = np.concatenate([[0.0], np.geomspace(1e-4, 1e4, 40001)])
    for by in (None, towards):
        found = greatest_resistance(top, bottom, 0.9, by)
        met = np.abs(at_resistance(top, bottom, r)) >= 0.9
        if by is not None:
            met &= (at_resistance(top, bottom, r) * at_resistance(by, bottom, r).conj()).real >= 0
        for k in range(n):
            last = np.flatnonzero(met[k])
            if not len(last):  # at most between two samples
                continue
            at = r[last[-1]]
            if at == r[-1]:
                assert found[k] >= at
            else:
                assert found[k] >= at * (1 - 1e-9)
                beyond = r[r > found[k] * (1 + 1e-9)]
                assert not met[k, len(r) - len(beyond) :].any()


def test_what_never_or_always_reaches_the_pickup() -> None:
    one = np.array([[1.0 + 0j, 0]])
    assert np.isnan(greatest_resistance(one, np.array([[2.0 + 0j, 3]]), 1.0)[0])
    assert greatest_resistance(one, np.array([[1.0 + 0j, 3]]), 1.0)[0] == 0
    assert greatest_resistance(one, np.array([[1.0 + 0j, 3]]), 0.1)[0] == pytest.approx(3)
    assert np.isinf(greatest_resistance(one, np.array([[1.0 + 0j, 0]]), 0.5)[0])
    assert np.isnan(greatest_resistance(0 * one, np.array([[1.0 + 0j, 0]]), 0.5)[0])
    assert np.isnan(greatest_resistance(one, np.array([[1.0 + 0j, 3]]), 0.1, -one)[0])
    assert np.isnan(greatest_resistance(one, np.array([[1.0 + 0j, 3]]), 0.1, 0 * one)[0])
