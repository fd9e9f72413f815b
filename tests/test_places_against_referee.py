"""Faults along lines, at terminals, through open poles and several at once, against the referee.

``pytest --referee-examples 5000`` draws more of them than the default run does.
"""

from __future__ import annotations

from itertools import permutations

import numpy as np
from hypothesis import HealthCheck, assume, given, reject, settings
from hypothesis import strategies as st

from seqfault.case.reader import case_from_tree
from seqfault.errors import RequestError
from seqfault.faults.kinds import Fault, fault_at
from seqfault.faults.network import Network
from seqfault.faults.solution import FaultSolution
from tests.conditioning import well_conditioned
from tests.placed import Placed, Trouble, placed
from tests.referee import Result
from tests.strategies import PlainNetwork, networks, to_case_tree, to_referee, troubles

TOLERANCE = 1e-8


def asked(net: PlainNetwork, trouble: Trouble) -> Fault:
    fallen = ""
    if trouble.fallen is not None:
        spot = trouble.spot
        line = net.lines.get(spot.element)
        names = (spot.bus, spot.element)
        if spot.fraction is not None and line is not None:
            names = (line.bus_i, line.bus_j)
        fallen = names[trouble.fallen]
    return fault_at(trouble.spot.text(), trouble.kind, trouble.phases, trouble.zf, trouble.zg, fallen)


def solve(net: PlainNetwork, wanted: list[Trouble], prefault: float = 1.0) -> FaultSolution:
    network = Network(case_from_tree(to_case_tree(net, prefault=prefault)))
    return network.solve([asked(net, trouble) for trouble in wanted])


def judge(net: PlainNetwork, wanted: list[Trouble], prefault: float = 1.0) -> tuple[Placed, Result]:
    made = placed(net, wanted)
    referee = to_referee(made.net, tuned_in=net)
    for name, poles in made.joints.items():
        poles.put(name, referee)
    first = made.bus_of[wanted[0].spot][0]
    return made, referee.solve_many(made.shorts(wanted), prefault, reference=first)


def differences(
    net: PlainNetwork, wanted: list[Trouble], ours: FaultSolution, made: Placed, theirs: Result
) -> list[str]:
    """Every figure that differs by more than the tolerance times the largest of its kind there."""
    out: list[str] = []
    largest = max(
        1e-2 * max(net.buses.values()),
        ours.largest * ours.nominal,
        *(float(np.abs(i).max()) * made.net.buses[bus] for (_, bus), i in theirs.flows.items()),
    )

    def current(label: str, a, b, nominal: float) -> None:
        error = float(np.max(np.abs(np.asarray(a) - np.asarray(b)))) * nominal
        if not error <= TOLERANCE * largest:
            out.append(f"{label}: {a} against {b}")

    number = 0
    for trouble, state in zip(wanted, ours.faults, strict=True):
        if trouble.opens and trouble.fallen is None:
            current("to earth", state.current, np.zeros(3), state.nominal)
            continue
        current("fault", state.current, theirs.fault_currents[number], state.nominal)
        number += 1
    for trouble, state in zip(wanted, ours.faults, strict=True):
        if trouble.opens:
            near, _ = made.bus_of[trouble.spot]
            joint = next(n for n, p in made.joints.items() if p.bus_j == made.bus_of[trouble.spot][1])
            current("through", state.through, theirs.flows[joint, near], state.nominal)
    for k, bus in enumerate(ours.buses):
        nominal, mark = made.net.buses[bus], theirs.undetermined[bus]
        a, b = ours.voltage[:, k], theirs.voltages[bus]
        if bus not in theirs.joined and bus in theirs.live:
            a, b = np.abs(a), np.abs(b)
        if bus in theirs.live and bool(mark.any()) != bool(ours.undefined[k]):
            out.append(f"{bus}: undetermined {mark} against {ours.undefined[k]}")
        if not mark.any() and np.abs(a - b).max() > TOLERANCE * nominal:
            out.append(f"voltage of {bus}: {a} against {b}")
    sums: dict[tuple[str, str], list] = {}
    t = ours.terminals
    for k in range(len(t.element)):
        sums.setdefault((t.element[k], t.bus[k]), []).append(t.phases[:, k])
    expected: dict[tuple[str, str], list] = {}
    for (element, bus), flow in theirs.flows.items():
        whose = made.whose.get(element, element)
        loose = element in net.ties and (element, bus) not in sums  # open, or in a loop of ties
        loose |= element in net.lines and net.lines[element].earthed
        if whose is not None and not loose:
            expected.setdefault((whose, bus), []).append(flow)
    for key, flows in expected.items():
        nominal = made.net.buses[key[1]]
        mine = sums.get(key, [])
        if len(mine) != len(flows):
            out.append(f"flows of {key}: {len(mine)} rows against {len(flows)}")
            continue
        best = min(
            (max(float(np.abs(a - b).max()) for a, b in zip(mine, order, strict=True)), k)
            for k, order in enumerate(permutations(flows))
        )
        if not best[0] * nominal <= TOLERANCE * largest:
            out.append(f"flows of {key}: {mine} against {flows}")
    for star in ours.star_points:
        nominal = made.net.buses[star.bus]
        name = star.name.removesuffix(".neutral")
        current(f"star {name}", star.current, theirs.star_current[name], nominal)
        if star.voltage is None or name in theirs.star_undetermined:
            continue
        if abs(star.voltage - theirs.star_voltage[name]) > TOLERANCE * nominal:
            out.append(f"star {star.name}: {star.voltage} against {theirs.star_voltage[name]}")
    for line in ours.earthed_lines:
        coupled = theirs.through[line.name].sum()
        current(f"earthed {line.name}", line.residual, coupled, net.buses[net.lines[line.name].bus_i])
    for delta in ours.deltas:
        theirs_delta = theirs.delta_current[f"{delta.element}.{delta.side}"]
        current(f"delta {delta.element}", delta.current, theirs_delta, made.net.buses[delta.bus])
    return out


@settings(
    settings.get_profile("anywhere"),
    suppress_health_check=[HealthCheck.too_slow, HealthCheck.data_too_large],
)
@given(data=st.data(), net=networks())
def test_faults_anywhere_agree_with_the_referee(net: PlainNetwork, data: st.DataObject) -> None:
    assume(well_conditioned(net))
    wanted = data.draw(troubles(net))
    try:
        ours = solve(net, wanted)
    except RequestError as refused:
        if "is joined already" not in str(refused):
            raise
        reject()
    made, theirs = judge(net, wanted)
    assume({made.bus_of[t.spot][0] for t in wanted} <= theirs.joined)  # else no angle is known between them
    assert not (wrong := differences(net, wanted, ours, made, theirs)), "\n".join(wrong)
