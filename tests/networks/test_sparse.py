"""The sparse path against the dense one, and that small networks do without scipy."""

from __future__ import annotations

import subprocess
import sys
from functools import cache
from pathlib import Path

import numpy as np
import pytest
from hypothesis import HealthCheck, assume, given, settings
from hypothesis import strategies as st

from seqfault.case.reader import case_from_tree
from seqfault.errors import SeqfaultError
from seqfault.faults.network import Network
from seqfault.faults.solution import FaultSolution
from seqfault.networks import factors
from seqfault.networks.assembly import Stamps
from seqfault.networks.connectivity import FreeSpace
from seqfault.networks.factors import SequenceFactor
from tests.bench.grid import degree, grid
from tests.conditioning import well_conditioned
from tests.strategies import PlainNetwork, fault_requests, networks, to_case_tree

CASES = Path(__file__).parents[2] / "cases"
EVER_DENSE = 10**9
TOLERANCE = 1e-8


def solved_with(dense: int, tree: dict, ask) -> tuple[FaultSolution, Network] | str:
    """A network factorised with ``DENSE`` at ``dense``, and its answer; or the kind of refusal."""
    with pytest.MonkeyPatch.context() as patch:
        patch.setattr(factors, "DENSE", dense)
        network = Network(case_from_tree(tree))
        try:
            return ask(network), network
        except SeqfaultError as error:
            return type(error).__name__


def same_solution(ours: FaultSolution, theirs: FaultSolution) -> None:
    """Currents agree to the tolerance times the largest there, voltages to that of their nominal."""
    largest = np.abs(ours.terminals.sequence * ours.bus_nominal[ours.terminals.bus_index]).max(initial=0)
    fault = np.abs(ours.current_sequence).max() * ours.nominal
    limit = TOLERANCE * max(largest, fault, 1e-3 * ours.nominal)

    def close(a, b, nominal) -> None:
        assert (np.abs(np.asarray(a) - np.asarray(b)) * nominal).max(initial=0) <= limit

    close(ours.current_sequence, theirs.current_sequence, ours.nominal)
    flows = [solution.terminals.sequence for solution in (ours, theirs)]
    close(*flows, ours.bus_nominal[ours.terminals.bus_index])
    assert (ours.undefined == theirs.undefined).all()
    apart = np.abs(ours.voltage_sequence - theirs.voltage_sequence)[:, ~ours.undefined]
    assert (apart <= TOLERANCE * ours.bus_nominal[~ours.undefined]).all()
    bounded = np.isfinite(ours.impedance)
    assert (bounded == np.isfinite(theirs.impedance)).all()
    assert ours.impedance[bounded] == pytest.approx(theirs.impedance[bounded], rel=1e-8)
    nominal = dict(zip(ours.buses, ours.bus_nominal, strict=True))
    for a, b in zip(ours.star_points, theirs.star_points, strict=True):
        close(a.current, b.current, nominal[a.bus])
        assert (a.voltage is None) == (b.voltage is None)
        assert a.voltage is None or abs(a.voltage - b.voltage) <= TOLERANCE * nominal[a.bus]
    for a, b in zip(ours.deltas, theirs.deltas, strict=True):
        close(a.current, b.current, nominal[a.bus])
    assert [path.path for path in ours.home] == [path.path for path in theirs.home]
    close([p.current for p in ours.home], [p.current for p in theirs.home], ours.nominal)


def same_driving_points(ours: Network, theirs: Network) -> None:
    for s in range(3):
        (a, open_a), (b, open_b) = (each.sequences[s].driving_point() for each in (ours, theirs))
        assert (open_a == open_b).all()
        # Below 1e-6 of the largest, zeros and what is left of them are alike.
        floor = 1e-6 * np.abs(b[~open_b]).max(initial=0)
        assert (np.abs(a - b)[~open_b] <= 1e-8 * np.maximum(np.abs(b[~open_b]), floor)).all()


@settings(max_examples=40, suppress_health_check=[HealthCheck.too_slow, HealthCheck.data_too_large])
@given(data=st.data(), net=networks())
def test_drawn_networks(net: PlainNetwork, data: st.DataObject) -> None:
    assume(well_conditioned(net))
    request = data.draw(fault_requests(net))
    tree = to_case_tree(net, prefault=request.prefault)

    def ask(network: Network) -> FaultSolution:
        return network.fault(request.bus, request.kind, phases=request.phases, zf=request.zf, zg=request.zg)

    ours, theirs = (solved_with(dense, tree, ask) for dense in (0, EVER_DENSE))
    if isinstance(ours, str) or isinstance(theirs, str):
        assert ours == theirs
        return
    same_solution(ours[0], theirs[0])
    same_driving_points(ours[1], theirs[1])


@cache
def both(buses: int, seed: int) -> tuple[Network, Network]:
    """A synthetic grid, its networks factorised sparsely and densely."""

    def factorised(network: Network) -> None:
        for s in range(3):
            network.sequences[s].columns(np.zeros(1, np.int64))  # it factorises when first solved

    ours, theirs = (solved_with(dense, grid(buses, seed), factorised) for dense in (0, EVER_DENSE))
    assert not isinstance(ours, str)
    assert not isinstance(theirs, str)
    return ours[1], theirs[1]


GRIDS = ((500, 3), (500, 10), (700, 3))


@pytest.mark.parametrize(("buses", "seed"), GRIDS)
def test_synthetic_grids_have_what_they_are_for(buses: int, seed: int) -> None:
    tree = grid(buses, seed)
    assert len(tree["buses"]) == buses
    assert tree == grid(buses, seed)
    assert degree(tree) == pytest.approx(2.6, abs=0.15)
    sources = sum(len(tree[table]) for table in ("infeeds", "generators", "motors"))
    assert sources / buses == pytest.approx(0.07, abs=0.02)
    network = both(buses, seed)[0]
    zero, model = network.sequences[0], network.model
    assert model.live.all()
    assert len(zero.free.dimension) > 5
    assert (zero.slacks == 0).any()  # a floating part with capacitance
    assert (zero.slacks == 1).any()  # and one with none
    assert model.nodes > buses  # neutrals through resistors
    assert len(np.unique(model.winding_sets[1].ratio)) > 3


@pytest.mark.parametrize(("buses", "seed"), GRIDS)
def test_synthetic_grids_at_every_bus(buses: int, seed: int) -> None:
    same_driving_points(*both(buses, seed))


@pytest.mark.parametrize("kind", ["line-ground", "line-line-ground", "three-phase"])
@pytest.mark.parametrize(("buses", "seed"), GRIDS)
def test_faults_on_synthetic_grids(buses: int, seed: int, kind: str) -> None:
    ours, theirs = both(buses, seed)
    part = ours.sequences[0].free.part
    floats = np.flatnonzero(part[:buses] >= 0)
    for place in (0, buses - 1, floats[0], floats[-1]):
        name = ours.buses[place]
        same_solution(ours.fault(name, kind, zf=0.2), theirs.fault(name, kind, zf=0.2))


def program(buses: int) -> str:
    """Prints whether scipy was imported by a fault and a survey of a case."""
    return f"""
import sys
from tests.bench.grid import grid
import seqfault
for case in (seqfault.read_case({str(CASES / "quarry.toml")!r}), seqfault.case_from_tree(grid({buses}))):
    network = seqfault.Network(case)
    network.fault(network.buses[0], "line-ground")
    seqfault.levels(network)
print(sorted({{name.split(".")[0] for name in sys.modules}} & {{"scipy"}}))
"""


@pytest.mark.parametrize(("buses", "found"), [(250, []), (400, ["scipy"])])
def test_small_networks_import_no_scipy(buses: int, found: list[str]) -> None:
    # 250 buses and their star points stay below the limit, 400 do not.
    assert buses < factors.DENSE or found
    run = subprocess.run(
        [sys.executable, "-c", program(buses)],
        cwd=CASES.parent,
        capture_output=True,
        text=True,
        check=True,
    )
    assert run.stdout.strip() == repr(found)


def lossless(legs: tuple[float, ...], size: int, seed: int) -> Stamps:
    """Star points with ``legs`` (reactances) between the buses of a random lossless network.

    The buses have six neighbours, so that elimination by degree begins at the star points.
    """
    chance = np.random.default_rng(seed)
    stars = size // 10
    edges = [
        (k, int(chance.integers(max(0, k - 12), k)), chance.uniform(0.1, 1))
        for k in range(1, size)
        for _ in range(3)
    ]
    for star in range(size, size + stars):
        ends = chance.choice(size, len(legs), replace=False)
        edges += [(star, int(end), leg) for end, leg in zip(ends, legs, strict=True)]
    i, j = (np.array([edge[end] for edge in edges]) for end in (0, 1))
    y = 1 / (1j * np.array([edge[2] for edge in edges]))
    ground = np.arange(0, size, 7)
    row, column = np.concatenate([i, j, i, j, ground]), np.concatenate([i, j, j, i, ground])
    value = np.concatenate([y, y, -y, -y, 1 / (0.5j * np.ones(len(ground)))])
    return Stamps(size + stars, row, column, value, np.zeros(size + stars, complex))


def nothing_free(size: int) -> FreeSpace:
    none = np.zeros(0, np.int64)
    return FreeSpace(np.full(size, -1), np.zeros((size, 1)), none, none)


def matrix(stamps: Stamps) -> np.ndarray:
    y = np.zeros((stamps.size, stamps.size), complex)
    np.add.at(y, (stamps.row, stamps.column), stamps.value)
    return y + np.diag(stamps.weak)


ROUNDED = (0.11, 0.23, -1 / (1 / 0.11 + 1 / 0.23))


# x, x, −x/2 and the like: the star point's own entry is zero, or what rounding leaves of it.
@pytest.mark.parametrize("legs", [(0.25, 0.25, -0.125), ROUNDED, (0.1, 0.1, -0.0500000001)])
def test_a_star_point_with_no_admittance_of_its_own(legs, monkeypatch) -> None:
    stamps = lossless(legs, 400, seed=5)
    y = matrix(stamps)
    stars = np.arange(400, stamps.size)
    own = np.abs(y[stars, stars]) / np.abs(y[stars]).sum(axis=1)
    assert own.max() < 1e-8
    monkeypatch.setattr(factors, "DENSE", 0)
    factor = SequenceFactor(stamps, nothing_free(stamps.size))
    nodes = np.array([0, 17, 203, *stars[:5], *stars[-5:]])
    inverse = np.linalg.inv(y)
    columns = factor.columns(nodes)
    assert np.abs(columns - inverse[:, nodes]).max() <= 1e-10 * np.abs(inverse).max()
    diagonal, infinite = factor.driving_point()
    assert not infinite.any()
    assert np.abs(diagonal - inverse.diagonal()).max() <= 1e-10 * np.abs(inverse).max()


def test_that_star_point_is_a_trap_without_pivots() -> None:
    # The test above would pass with any factors if its data were harmless.
    from scipy.sparse import csc_array
    from scipy.sparse.linalg import splu

    y = matrix(lossless(ROUNDED, 400, seed=5))
    bold = splu(
        csc_array(y), permc_spec="MMD_AT_PLUS_A", diag_pivot_thresh=0, options={"SymmetricMode": True}
    )
    unit = np.eye(len(y), dtype=complex)
    wrong = np.abs(bold.solve(unit) - np.linalg.inv(y)).max() / np.abs(np.linalg.inv(y)).max()
    assert wrong > 1e-2
