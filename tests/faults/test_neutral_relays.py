"""What relays see in closed form against full solutions, on random networks and by hand."""

from __future__ import annotations

import numpy as np
import pytest
from hypothesis import HealthCheck, assume, given, settings
from hypothesis import strategies as st

from seqfault.case.reader import case_from_tree
from seqfault.errors import RequestError, SeqfaultError
from seqfault.faults.network import Network
from seqfault.faults.neutral_ports import KINDS
from seqfault.faults.neutral_relays import RelayView, relay_currents
from seqfault.studies.neutral_relays import relay_views, seen_by
from seqfault.studies.neutral_states import neutral_states
from seqfault.studies.neutral_target import find_target
from tests.conditioning import well_conditioned
from tests.faults.small import PLANT, changed
from tests.strategies import PlainNetwork, networks, to_case_tree

RELAYED = changed(
    PLANT,
    ("current_transformers", {"CB": {"ratio": "100/1 A", "connection": "core-balance"}}),
    (
        "relays",
        {
            "R1": {
                "at": "C1@main", "measures": "core-balance", "ct": "CB", "pickup": "20 A",
                "curve": "definite", "delay": "0.3 s",
            },
            "RP": {
                "at": "C1@main", "measures": "phase", "pickup": "400 A", "curve": "definite",
                "delay": "1 s",
            },
        },
    ),
)  # fmt: skip


@settings(
    settings.get_profile("anywhere"),
    suppress_health_check=[HealthCheck.too_slow, HealthCheck.data_too_large, HealthCheck.filter_too_much],
)
@given(data=st.data(), net=networks())
def test_every_terminal_and_star_point_is_seen_as_the_full_solution_has_it(
    net: PlainNetwork, data: st.DataObject
) -> None:
    assume(well_conditioned(net))
    used = [name for name in net.neutrals if net.star_points(name)]
    assume(used)
    name, bus = data.draw(st.sampled_from(used)), data.draw(st.sampled_from(sorted(net.buses)))
    network = Network(case_from_tree(to_case_tree(net)))
    assume(network.model.live[network.model.index[bus]])
    try:
        solutions = [network.fault(bus, kind) for kind in KINDS]
    except SeqfaultError:
        assume(False)
    t, stars = solutions[0].terminals, solutions[0].star_points
    views = [
        RelayView(f"r{k}", t.element[k], t.bus[k], "", 1.0)
        for k in range(len(t.element))
        if t.kind[k] not in ("tie", "converter")
    ]
    views += [RelayView(f"s{k}", "", "", point.name, 1.0) for k, point in enumerate(stars)]
    try:
        (state,) = neutral_states([network], name, bus, relays=views).states
    except RequestError:
        assume(False)
    for kind, solution in enumerate(solutions):
        t = solution.terminals
        largest = max(
            solution.largest * solution.nominal,
            float((np.abs(t.phases) * solution.bus_nominal[t.bus_index]).max(initial=0)),
            1e-2 * max(net.buses.values()),
        )
        for relay in state.relays:
            view = relay.view
            got = relay_currents(state.ports, relay, np.array([state.ohms]))[kind, 0]
            if view.star:
                point = next(p for p in solution.star_points if p.name == view.star)
                wanted, nominal = point.current, net.buses[point.bus]
            else:
                rows = zip(t.element, t.bus, strict=True)
                k = next(k for k, key in enumerate(rows) if key == (view.element, view.bus))
                wanted, nominal = t.residual[k] / t.count[k], net.buses[view.bus]
            assert abs(got - wanted) * nominal <= 1e-7 * largest, (view, KINDS[kind])


def test_relays_of_a_case_are_views_and_those_that_see_no_earth_current_are_told() -> None:
    views, notes = relay_views(case_from_tree(RELAYED))
    assert [view.name for view in views] == ["R1"]
    assert views[0].pickup == 20
    assert "RP" in notes[0]


@pytest.mark.parametrize("times", [2.0, 9.5])
def test_ohms_for_a_relay_put_into_the_case_give_the_multiple(times: float) -> None:
    case = case_from_tree(RELAYED)
    views, _ = relay_views(case)
    states = neutral_states([Network(case)], "NER", "far", relays=views)
    target = find_target(states, None, None, [("R1", times)])
    assert target.binds == "relay R1"
    tree = changed(RELAYED, ("neutrals.NER", {"resistance": f"{target.ohms!r} ohm"}))
    network = Network(case_from_tree(tree))
    seen = []
    for kind in KINDS:
        t = network.fault("far", kind).terminals
        k = next(k for k in range(len(t.element)) if (t.element[k], t.bus[k]) == ("C1", "main"))
        seen.append(abs(t.residual[k]))
    assert min(seen) == pytest.approx(times * 20, rel=1e-9)
    assert seen_by(states, np.array([target.ohms]))[0].multiple[0] == pytest.approx(times, rel=1e-9)


def test_conditions_are_solved_together_and_the_one_that_binds_is_named() -> None:
    case = case_from_tree(RELAYED)
    states = neutral_states([Network(case)], "NER", "far", relays=relay_views(case)[0])
    alone = find_target(states, 150.0, None)
    both = find_target(states, 150.0, None, [("R1", 10)])
    assert not both.met
    assert both.binds == "relay R1"
    assert both.ohms < alone.ohms
    easy = find_target(states, 150.0, None, [("R1", 1)])
    assert easy.met
    assert easy.ohms == alone.ohms
    with pytest.raises(RequestError, match="did you mean"):
        find_target(states, None, None, [("R11", 2)])
