"""What must hold of every solution, whatever the network."""

from __future__ import annotations

import numpy as np
import pytest
from hypothesis import HealthCheck, assume, given, settings
from hypothesis import strategies as st

from seqfault.case.reader import case_from_tree
from seqfault.faults.kinds import KINDS
from seqfault.faults.network import Network
from seqfault.faults.solution import FaultSolution
from seqfault.studies.levels import levels
from tests.conditioning import well_conditioned
from tests.strategies import FaultRequest, PlainNetwork, PlainUnit, fault_requests, networks, to_case_tree

SETTINGS = settings(
    max_examples=80, suppress_health_check=[HealthCheck.too_slow, HealthCheck.data_too_large]
)


def solve(net: PlainNetwork, request: FaultRequest, base: float | None = None) -> FaultSolution:
    case = case_from_tree(to_case_tree(net, prefault=request.prefault, base_power=base))
    return Network(case).fault(
        request.bus, request.kind, phases=request.phases, zf=request.zf, zg=request.zg
    )


def size(solution: FaultSolution) -> float:
    """The largest power of any current in the solution, VA: what errors are measured against."""
    flows = np.abs(solution.terminals.sequence) * solution.bus_nominal[solution.terminals.bus_index]
    own = np.abs(solution.current_sequence).max() * solution.nominal
    return float(max(flows.max(initial=0), own, 1e-3 * solution.nominal))


@SETTINGS
@given(data=st.data(), net=networks())
def test_the_base_power_changes_nothing(net: PlainNetwork, data: st.DataObject) -> None:
    assume(well_conditioned(net))
    request = data.draw(fault_requests(net))
    one, ten, hundred = (solve(net, request, base) for base in (1e6, 1e7, 1e8))
    for other in (ten, hundred):
        scale = 1e-9 * size(one)
        assert np.abs(one.current - other.current).max() * one.nominal <= scale
        nominal = one.bus_nominal[one.terminals.bus_index]
        assert (np.abs(one.terminals.phases - other.terminals.phases) * nominal).max(initial=0) <= scale
        known = ~one.undefined
        assert (np.abs(one.voltage - other.voltage) / one.bus_nominal)[:, known].max(initial=0) <= 1e-9
        assert np.array_equal(one.undefined, other.undefined)


@SETTINGS
@given(net=networks())
def test_each_sequence_network_is_reciprocal(net: PlainNetwork) -> None:
    assume(well_conditioned(net))
    sequences = Network(case_from_tree(to_case_tree(net))).sequences
    for s in range(3):
        factor = sequences[s]
        nodes = np.arange(factor.size)
        z = factor.port_impedance(nodes, factor.columns(nodes))
        own = np.sqrt(np.abs(np.diagonal(z)))
        scale = np.maximum(np.outer(own, own), 1e-12)
        assert np.abs((z - z.T) / scale).max() <= 1e-8


@SETTINGS
@given(data=st.data(), net=networks())
def test_currents_add_to_zero_at_every_bus_star_point_and_path_home(
    net: PlainNetwork, data: st.DataObject
) -> None:
    """Kirchhoff's current law on the answers as they are shown, in ampere."""
    request = data.draw(fault_requests(net))
    solution = solve(net, request)
    allowed = 1e-8 * size(solution)
    total = np.zeros((3, len(solution.buses)), complex)
    np.add.at(total, (slice(None), solution.terminals.bus_index), solution.terminals.phases)
    total[:, solution.index[request.bus]] += solution.current
    assert (np.abs(total) * solution.bus_nominal).max() <= allowed
    if solution.fault.kind.earth:
        home = sum(path.current for path in solution.home)
        assert abs(home - solution.residual) * solution.nominal <= allowed
    # a solid star point passes just the residual of its winding
    for star in solution.star_points:
        if star.kind != "solid":
            continue
        element, side = star.name.rsplit(".", 1)
        unit = net.transformers.get(element)
        shared = isinstance(unit, PlainUnit) and unit.auto()  # hv and lv end in one star point
        sides = ("hv", "lv") if shared else (side, "")
        at = [
            k
            for k, name in enumerate(solution.terminals.element)
            if name == element and solution.terminals.side[k] in sides
        ]
        if net.generators.get(element) and net.generators[element].c0:
            continue  # its terminal carries the machine's own capacitance too
        residual = solution.terminals.residual[at].sum()
        assert abs(star.current - residual) * net.buses[star.bus] <= allowed


@SETTINGS
@given(data=st.data(), net=networks())
def test_the_fault_obeys_its_own_conditions(net: PlainNetwork, data: st.DataObject) -> None:
    """Ohm's law of the fault branches and nothing in the sound phases, for every kind."""
    request = data.draw(fault_requests(net))
    solution = solve(net, request)
    v, i = solution.at(request.bus), solution.current
    if solution.undefined[solution.index[request.bus]]:
        v = v - v.mean()
    at = ["abc".index(phase) for phase in request.phases]
    sound = [p for p in range(3) if p not in at]
    assert np.all(i[sound] == 0)
    zf, zg = solution.fault.zf, solution.fault.zg
    drop = abs(zf) + 3 * abs(zg)
    tolerance = 1e-8 * (solution.nominal + drop * np.abs(i).max())
    if solution.fault.kind.earth:
        assert np.abs(v[at] - zf * i[at] - zg * i.sum()).max() <= tolerance
        return
    assert i.sum() == pytest.approx(0, abs=1e-9 * max(float(np.abs(i).max()), 1e-6))
    if request.kind == "line-line":
        assert abs(v[at[0]] - v[at[1]] - zf * i[at[0]]) <= tolerance
    else:
        between = v - zf * i
        assert np.abs(between - between.mean()).max() <= tolerance


@SETTINGS
@given(data=st.data(), net=networks())
def test_turning_the_faulted_phases_turns_the_answer(net: PlainNetwork, data: st.DataObject) -> None:
    """A fault one phase further on is the same fault, a third of a turn later."""
    request = data.draw(fault_requests(net))
    turned = "".join("abc"[("abc".index(phase) + 1) % 3] for phase in request.phases)
    case = case_from_tree(to_case_tree(net, prefault=request.prefault))
    network = Network(case)
    first = network.fault(request.bus, request.kind, phases=request.phases, zf=request.zf, zg=request.zg)
    second = network.fault(request.bus, request.kind, phases=turned, zf=request.zf, zg=request.zg)
    lag = np.exp(-2j * np.pi / 3)
    difference = np.abs(np.roll(first.current, 1) * lag - second.current).max()
    assert difference * first.nominal <= 1e-8 * size(first)


@SETTINGS
@given(net=networks())
def test_the_survey_agrees_with_a_solution_a_bus(net: PlainNetwork) -> None:
    network = Network(case_from_tree(to_case_tree(net)))
    survey = levels(network)
    for k, bus in enumerate(survey.buses):
        three, two = network.fault(bus, "three-phase"), network.fault(bus, "line-line")
        both, one = network.fault(bus, "line-line-ground"), network.fault(bus, "line-ground")
        pairs = (
            (survey.k3[k], np.abs(three.current).max()),
            (survey.k2[k], np.abs(two.current).max()),
            (survey.k2e[k], np.abs(both.current).max()),
            (survey.k2e_earth[k], abs(both.residual)),
            (survey.k1[k], abs(one.residual)),
        )
        for ours, solved in pairs:
            assert ours == pytest.approx(solved, rel=1e-7, abs=1e-9 * max(1.0, survey.k3[k]))


def test_every_kind_is_drawn() -> None:
    from tests.strategies import FAULT_PHASES

    assert set(FAULT_PHASES) == {name for name, kind in KINDS.items() if not kind.series}
