"""The package against the independent referee, on random networks over every element.

``pytest --referee-examples 5000`` draws more of them than the default run does.
"""

from __future__ import annotations

import numpy as np
from hypothesis import HealthCheck, assume, given, settings
from hypothesis import strategies as st

from seqfault.case.reader import case_from_tree
from seqfault.faults.network import Network
from seqfault.faults.solution import FaultSolution
from tests.conditioning import well_conditioned
from tests.referee import Result
from tests.strategies import (
    FaultRequest,
    PlainNetwork,
    fault_requests,
    networks,
    to_case_tree,
    to_referee,
)

TOLERANCE = 1e-8


def ask(net: PlainNetwork, request: FaultRequest, base_power: float | None = None) -> FaultSolution:
    tree = to_case_tree(net, prefault=request.prefault, base_power=base_power)
    return Network(case_from_tree(tree)).fault(
        request.bus, request.kind, phases=request.phases, zf=request.zf, zg=request.zg
    )


def judge(net: PlainNetwork, request: FaultRequest) -> Result:
    return to_referee(net).solve(
        request.bus, request.kind, request.phases, request.zf, request.zg, request.prefault
    )


def differences(net: PlainNetwork, ours: FaultSolution, theirs: Result) -> list[str]:
    """Every figure that differs by more than the tolerance times the largest of its kind there.

    Currents are measured against the largest current of the solution at that voltage level, voltages
    against the nominal voltage of their bus.
    """
    out: list[str] = []
    fault_pu = np.abs(ours.current).max() * ours.nominal
    terminals = ours.terminals
    largest_pu = max(
        fault_pu,
        max(
            (float(np.abs(i).max()) * net.buses[bus] for (_, bus), i in theirs.flows.items()),
            default=0.0,
        ),
        1e-2 * max(net.buses.values()),  # ten milliampere at the highest voltage
    )

    def current(label: str, a, b, nominal: float) -> None:
        error = float(np.max(np.abs(np.asarray(a) - np.asarray(b)))) * nominal
        if not error <= TOLERANCE * largest_pu:
            out.append(f"{label}: {a} against {b}")

    current("fault", ours.current, theirs.fault_current, ours.nominal)
    for k, bus in enumerate(ours.buses):
        nominal = net.buses[bus]
        if bus not in theirs.joined and bus in theirs.live:
            # another part's clock is its own; its pre-fault angle means nothing here
            pairs = [(np.abs(ours.voltage[:, k]), np.abs(theirs.voltages[bus]))]
        else:
            pairs = [(ours.voltage[:, k], theirs.voltages[bus])]
        line_ours = ours.voltage[:, k] - np.roll(ours.voltage[:, k], -1)
        line_theirs = theirs.line_voltages(bus)
        for a, b in pairs:
            mark = theirs.undetermined[bus]
            if bus in theirs.live and bool(mark.any()) != bool(ours.undefined[k]):
                out.append(f"{bus}: undetermined {mark} against {ours.undefined[k]}")
            if not mark.any() and np.abs(a - b).max() > TOLERANCE * nominal:
                out.append(f"voltage of {bus}: {a} against {b}")
        known = ~theirs.line_undetermined[bus]
        if (
            bus in theirs.joined
            and np.abs(line_ours - line_theirs)[known].max(initial=0) > TOLERANCE * nominal
        ):
            out.append(f"line voltage of {bus}: {line_ours} against {line_theirs}")
    for k, key in enumerate(zip(terminals.element, terminals.bus, strict=True)):
        current(f"flow {key}", terminals.phases[:, k], theirs.flows[key], net.buses[key[1]])
    for star in ours.star_points:
        nominal = net.buses[star.bus]
        name = star.name.removesuffix(".neutral")  # the referee calls a machine's star point so
        current(f"star {name}", star.current, theirs.star_current[name], nominal)
        unknown = name in theirs.star_undetermined
        if star.voltage is None or unknown:
            continue
        if abs(star.voltage - theirs.star_voltage[name]) > TOLERANCE * nominal:
            out.append(f"star {star.name}: {star.voltage} against {theirs.star_voltage[name]}")
    for line in ours.earthed_lines:
        nominal = max(net.buses.values())
        current(f"earthed {line.name}", line.residual, theirs.through[line.name].sum(), nominal)
    for delta in ours.deltas:
        theirs_delta = theirs.delta_current[f"{delta.element}.{delta.side}"]
        current(f"delta {delta.element}", delta.current, theirs_delta, net.buses[delta.bus])
    return out


@settings(
    settings.get_profile("referee"),
    suppress_health_check=[HealthCheck.too_slow, HealthCheck.data_too_large],
)
@given(data=st.data(), net=networks())
def test_random_networks_agree_with_the_referee(net: PlainNetwork, data: st.DataObject) -> None:
    assume(well_conditioned(net))
    request = data.draw(fault_requests(net))
    ours, theirs = ask(net, request), judge(net, request)
    assert not (wrong := differences(net, ours, theirs)), "\n".join(wrong)
