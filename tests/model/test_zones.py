"""Which buses hang together, and the clocks round loops of transformers."""

from __future__ import annotations

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from seqfault.model import zones
from seqfault.model.zones import components, displacements, live_buses


def clocks(zone: list[int], units: list[tuple[int, int, int]]) -> tuple[list[int], list[str]]:
    """``units`` are (hv zone, lv zone, clock), named T0, T1, …"""
    hv, lv, clock = (np.array([unit[k] for unit in units], np.int64) for k in range(3))
    names = [f"T{k}" for k in range(len(units))]
    at, complaints = displacements(np.array(zone, np.int64), hv, lv, clock, names)
    return at.tolist(), complaints


def test_no_bus_at_all() -> None:
    assert clocks([], []) == ([], [])


def test_clocks_add_down_and_subtract_up() -> None:
    assert clocks([0, 1, 1, 2], [(0, 1, 11), (1, 2, 5)]) == ([0, 11, 11, 4], [])
    assert clocks([0, 1], [(1, 0, 11)]) == ([0, 1], [])


def test_each_part_begins_at_noon() -> None:
    assert clocks([0, 1, 2, 3], [(0, 1, 5), (3, 2, 1)]) == ([0, 5, 0, 11], [])


def test_parallel_units_of_one_clock_agree() -> None:
    assert clocks([0, 1], [(0, 1, 11), (0, 1, 11), (0, 1, 11)]) == ([0, 11], [])


def test_a_ring_that_closes() -> None:
    # 1 + 11 + 0 down one side, the last one up again
    assert clocks([0, 1, 2], [(0, 1, 1), (1, 2, 11), (0, 2, 0)]) == ([0, 1, 0], [])


@pytest.mark.parametrize(("clock", "text"), [(1, "leave 2 of 12 (60 degrees)"), (5, "reversed polarity")])
def test_parallel_units_that_misfit(clock: int, text: str) -> None:
    _, (complaint,) = clocks([0, 1], [(0, 1, 11), (0, 1, clock)])
    assert complaint.startswith('transformers "T0", "T1": ')
    assert text in complaint


def test_a_long_loop_names_its_units_and_no_others() -> None:
    # T3 hangs from the loop T0 T1 T2 T4, T5 is elsewhere.
    units = [(0, 1, 1), (1, 2, 1), (2, 3, 1), (1, 4, 5), (0, 3, 0), (5, 6, 1)]
    _, (complaint,) = clocks([0, 1, 2, 3, 4, 5, 6], units)
    assert "leave 3 of 12" in complaint
    assert sorted(name for name in ("T0", "T1", "T2", "T3", "T4", "T5") if name in complaint) == [
        "T0",
        "T1",
        "T2",
        "T4",
    ]


def test_every_misfit_is_told() -> None:
    units = [(0, 1, 11), (0, 1, 1), (2, 3, 0), (2, 3, 6), (0, 1, 11)]
    _, complaints = clocks([0, 1, 2, 3], units)
    assert len(complaints) == 2


def test_a_unit_across_one_zone_must_have_no_clock() -> None:
    # Both its sides are joined by lines.
    assert clocks([0, 0], [(0, 0, 0)]) == ([0, 0], [])
    _, (complaint,) = clocks([0, 0], [(0, 0, 11)])
    assert 'transformers "T0": ' in complaint


edges = st.lists(st.tuples(st.integers(0, 19), st.integers(0, 19)), max_size=30)


@given(edges)
def test_components_small_and_large_agree(pairs: list[tuple[int, int]]) -> None:
    first, second = (np.array([pair[k] for pair in pairs], np.int64) for k in (0, 1))
    small = components(20, first, second)
    with pytest.MonkeyPatch.context() as patch:
        patch.setattr(zones, "LARGE", 0)
        large = components(20, first, second)
    assert small.tolist() == large.tolist()
    assert (small[first] == small[second]).all()
    # Labels count up by the first node of each.
    assert [label for k, label in enumerate(small) if label not in small[:k]] == list(
        range(small.max() + 1)
    )


def test_components_of_nothing() -> None:
    none = np.zeros(0, np.int64)
    assert components(0, none, none).tolist() == []
    assert components(3, none, none).tolist() == [0, 1, 2]


def test_live_parts_are_those_with_a_source() -> None:
    part = np.array([0, 1, 0, 2, 1])
    assert live_buses(part, np.array([2])).tolist() == [True, False, True, False, False]
    assert not live_buses(part, np.zeros(0, np.int64)).any()
