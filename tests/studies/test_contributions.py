"""Contributions of all elements against the flows of a fault solved at each bus."""

from __future__ import annotations

from functools import cache
from pathlib import Path

import numpy as np
import pytest

from seqfault import Network, case_from_tree, contributions, levels, read_case
from seqfault.networks import factors
from tests.bench.grid import grid

ROOT = Path(__file__).parents[2]
CASES = (
    "cases/pumps.toml",
    "cases/quarry.toml",
    "cases/ridge.toml",
    "cases/small.toml",
    "tests/cli/plant.toml",
)
KINDS = {"k3": "three-phase", "k2": "line-line", "k2e": "line-line-ground", "k1": "line-ground"}
FAULTED = {"k3": [0], "k2": [1, 2], "k2e": [1, 2], "k1": [0]}
TURN = np.exp(2j * np.pi / 3)
PHASES = np.array([[1, 1, 1], [1, TURN**2, TURN], [1, TURN, TURN**2]])


@cache
def network(name: str | int) -> Network:
    return Network(
        read_case(str(ROOT / name)) if isinstance(name, str) else case_from_tree(grid(450, name))
    )


def agree(net: Network, places: list[int]) -> int:
    found, seen = contributions(net), 0
    for b in places:
        for name, kind in KINDS.items():
            solution = net.fault(net.buses[b], kind)
            flows = solution.terminals
            expected = {
                (flows.element[t], flows.side[t], int(flows.bus_index[t])): flows.sequence[:, t]
                for t in range(len(flows.element))
            }
            top = max(float(np.abs(solution.current).max()), 1e-3)
            for c in range(int(found.start[b]), int(found.start[b + 1])):
                flow = expected[found.element[c], found.side[c], int(found.bus[c])]
                current = np.abs(PHASES @ flow)[FAULTED[name]].max()
                assert getattr(found, name)[c] == pytest.approx(current, abs=1e-8 * top)
                earth = {"k2e": found.earth, "k1": found.k1_earth}
                if name in earth:
                    assert earth[name][c] == pytest.approx(3 * abs(flow[0]), abs=1e-8 * top)
                seen += 1
    return seen


@pytest.mark.parametrize("name", CASES)
def test_every_bus_of_the_cases(name: str) -> None:
    net = network(name)
    assert not net.model.converters.names  # they are left out of the survey, not of a fault
    assert agree(net, list(range(len(net.buses)))) >= 20


@pytest.mark.parametrize("seed", [3, 10])
@pytest.mark.parametrize("dense", [0, 10**9])
def test_buses_of_grids(seed: int, dense: int, monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr(factors, "DENSE", dense)
    network.cache_clear()
    net = network(seed)
    floats = np.flatnonzero(net.sequences[0].free.part[net.model.node] >= 0)
    assert agree(net, [*range(0, 450, 30), *floats[:5].tolist()]) > 100
    network.cache_clear()


def test_elements_with_couplings_and_shared_star_points() -> None:
    net = network("tests/cli/elements.toml")
    assert net.model.lines.coupled
    found = contributions(net)
    # Kirchhoff: the shares of a bus that has a path to earth add to one.
    total = np.add.reduceat(found.share, found.start[:-1], axis=1)
    level = levels(net)
    assert np.abs(total[1, level.live] - 1).max() < 1e-9
    closed = np.isfinite(level.impedance[0])
    assert np.abs(total[0, closed] - 1).max() < 1e-9


@pytest.mark.parametrize("name", [*CASES, "cases/moor.toml", "tests/cli/elements.toml"])
def test_the_selected_inverse_of_small_cases(name: str, monkeypatch: pytest.MonkeyPatch) -> None:
    # Couplings, shared star points, negative star branches, parts without earth: all in these cases.
    ours, theirs = (Network(read_case(str(ROOT / name))) for _ in range(2))
    dense = contributions(theirs)
    monkeypatch.setattr(factors, "DENSE", 0)
    sparse = contributions(ours)
    assert (sparse.start == dense.start).all()
    for current in ("k3", "k2", "k2e", "k1", "earth", "k1_earth"):
        a, b = getattr(sparse, current), getattr(dense, current)
        assert a == pytest.approx(b, rel=1e-8, abs=1e-8 * np.nanmax(b), nan_ok=True)
