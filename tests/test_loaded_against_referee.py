"""Faults on the loaded state, against the referee driven by the voltages behind its sources.

The package superposes; the referee does not: it is given what stands behind each source before the
fault, and loads as impedances, and solves the faulted network whole. That the state before the fault is
what infeeds, generators and loads demand is checked beside it.
"""

from __future__ import annotations

from dataclasses import dataclass, replace
from typing import Any

import numpy as np
from hypothesis import HealthCheck, assume, given, reject, settings
from hypothesis import strategies as st

from seqfault.case.reader import case_from_tree
from seqfault.errors import NoAnswerError, RequestError
from seqfault.faults.network import Network
from seqfault.faults.solution import FaultSolution, FaultState
from tests.conditioning import well_conditioned
from tests.placed import Placed, placed
from tests.referee import TURN, Result
from tests.spots import Trouble
from tests.strategies import (
    PlainGenerator,
    PlainLoad,
    PlainNetwork,
    fractions,
    networks,
    quantity,
    to_case_tree,
    to_referee,
    troubles,
)
from tests.test_places_against_referee import TOLERANCE, asked, differences

ROTATION = np.array([1, complex(TURN) ** 2, complex(TURN)])


@dataclass(frozen=True)
class Holding:
    """What generators feed (W, None where one balances its part) and what sources hold (pu)."""

    fed: dict[str, float | None]
    holds: dict[str, float]


@st.composite
def loaded_networks(draw: Any) -> tuple[PlainNetwork, Holding]:
    """Networks with loads and powers small beside the fault level, so that most states exist."""
    net = draw(networks())
    network = Network(case_from_tree(to_case_tree(net)))
    level = {}
    for bus in network.buses:
        z1 = network.fault(bus, "three-phase").impedance[1]
        level[bus] = net.buses[bus] ** 2 / abs(z1) if np.isfinite(z1) and z1 else 0.0
    live = [bus for bus, k in zip(network.buses, network.model.live, strict=True) if k and level[bus]]
    loads = {}
    for number in range(draw(st.integers(1, 4))):
        bus = draw(st.sampled_from(live))
        p = level[bus] * draw(fractions(0.001, 0.05))
        s = complex(float(f"{p:.5g}"), float(f"{p * draw(fractions(-0.3, 0.7)):.5g}"))
        loads[f"D{number}"] = PlainLoad(bus, s, draw(st.sampled_from(("star", "delta", "star-earthed"))))
    node = dict(zip(network.buses, network.model.node.tolist(), strict=True))
    part = dict(zip(network.buses, network.model.part.tolist(), strict=True))
    supplied = {part[q.bus] for q in net.infeeds.values()}
    held: dict[int, float] = {}
    holding = Holding({}, {})
    for name, item in [*net.infeeds.items(), *net.generators.items()]:
        if node[item.bus] not in held:
            held[node[item.bus]] = draw(fractions(0.97, 1.04))
        holding.holds[name] = held[node[item.bus]]
        if isinstance(item, PlainGenerator):
            holding.fed[name] = float(f"{level[item.bus] * draw(fractions(-0.03, 0.06)):.5g}")
            if part[item.bus] not in supplied:
                supplied.add(part[item.bus])
                holding.fed[name] = None  # the first of a part without an infeed balances it
    return replace(net, loads=loads), holding


def loaded_tree(net: PlainNetwork, holding: Holding) -> dict[str, Any]:
    tree = to_case_tree(net)
    tree["prefault"] = {"state": "loaded"}
    for name in net.infeeds:
        tree["infeeds"][name]["voltage"] = quantity(holding.holds[name], "pu")
    for name in net.generators:
        tree["generators"][name]["holds"] = quantity(holding.holds[name], "pu")
        power = holding.fed[name]
        if power is not None:
            tree["generators"][name]["power"] = quantity(power, "W")
    return tree


class Notebook:
    """Takes down the positive-sequence ohms and farads that machines are put with."""

    def __init__(self, net: PlainNetwork) -> None:
        self.ohms: dict[str, complex] = {}
        self.farads: dict[str, float] = {}
        for table in (net.infeeds, net.generators, net.motors):
            for name, item in table.items():
                item.put(name, self)  # type: ignore[arg-type]  # asks for these methods alone

    def infeed(self, name: str, bus: str, z1: complex, *_: object) -> None:
        self.ohms[name] = z1

    motor = generator = infeed

    def capacitance(self, name: str, bus: str, c: float) -> None:
        self.farads[name] = c


def driven(
    net: PlainNetwork, wanted: list[Trouble], ours: FaultSolution
) -> tuple[Placed, Result, Placed, Result]:
    """The network during the faults and before them, driven by what stands behind its sources."""
    volts = dict(zip(ours.buses, ours.before, strict=True))
    before = ours.terminals_before
    assert before is not None
    flowing: dict[str, complex] = {}
    for k, name in enumerate(before.element):
        if before.side[k] == "from itself" or (before.side[k] == "" and name not in flowing):
            flowing[name] = complex(before.phases[0, k])
    out: list[Any] = []
    calm = [Trouble(t.spot, "three-phase", "abc") for t in wanted]
    for troubles_here in (wanted, calm):
        made = placed(net, troubles_here)
        book = Notebook(made.net)
        referee = to_referee(made.net, tuned_in=net)
        for name, poles in made.joints.items():
            poles.put(name, referee)
        at = {**made.net.infeeds, **made.net.generators, **made.net.motors}
        drive = {}
        for name, z in book.ohms.items():
            v = volts[at[name].bus]
            own = flowing.get(name, 0j) - 2j * np.pi * net.frequency * book.farads.get(name, 0.0) * v
            drive[name] = (v - z * own) * ROTATION
        for name, load in made.net.loads.items():
            v = abs(volts[load.bus])
            if v:
                load.put(name, referee, v)
        shorts = made.shorts(wanted) if troubles_here is wanted else []
        reference = made.bus_of[wanted[0].spot][0]
        out += [made, referee.solve_driven(shorts, drive, reference)]
    return out[0], out[1], out[2], out[3]


def misfits(net: PlainNetwork, holding: Holding, ours: FaultSolution, calm: Result) -> list[str]:
    """How the state before the fault differs from what was demanded, or from the referee's."""
    out = []
    for bus, v in zip(ours.buses, ours.before, strict=True):
        theirs = calm.voltages.get(bus)
        if theirs is None or (bus in calm.live and bus not in calm.joined):
            continue
        if not calm.undetermined[bus].any() and abs(v - theirs[0]) > TOLERANCE * net.buses.get(bus, 1e4):
            out.append(f"before the fault at {bus}: {v} against {theirs[0]}")
    before = ours.terminals_before
    assert before is not None
    size = {bus: abs(v) for bus, v in zip(ours.buses, ours.before, strict=True)}
    power: dict[str, complex] = {}
    for k, name in enumerate(before.element):
        if before.side[k] == "from itself" or (before.side[k] == "" and name not in power):
            v = ours.before[before.bus_index[k]]
            power[name] = 3 * v * np.conj(before.phases[0, k])
    for name, load in net.loads.items():
        if size[load.bus] and abs(power[name] - load.power) > 1e-9 * abs(load.power):
            out.append(f"{name} draws {power[name]}, not {load.power}")
    for name, machine in net.generators.items():
        fed = holding.fed[name]
        if size[machine.bus] and fed is not None and abs(power[name].real + fed) > 1e-6 * abs(fed) + 1:
            out.append(f"{name} feeds {-power[name].real}, not {fed}")
    for name, item in [*net.infeeds.items(), *net.generators.items()]:
        held = size[item.bus] / net.buses[item.bus] * np.sqrt(3)
        if held and abs(held - holding.holds[name]) > 1e-9:
            out.append(f"{name} holds {held}, not {holding.holds[name]}")
    return out


def _tells(state: FaultState) -> bool:
    """Whether what a break carried is more than the rounding of the voltages it is the difference of."""
    if state.through_before is None:
        return True
    carried = float(np.abs(state.through_before).max())
    return carried == 0 or carried > 1e-3


@settings(
    settings.get_profile("anywhere"),
    suppress_health_check=[HealthCheck.too_slow, HealthCheck.data_too_large, HealthCheck.filter_too_much],
)
@given(data=st.data(), drawn=loaded_networks())
def test_loaded_states_agree_with_the_referee(
    drawn: tuple[PlainNetwork, Holding], data: st.DataObject
) -> None:
    net, holding = drawn
    assume(well_conditioned(replace(net, loads={})))
    wanted = data.draw(troubles(net))
    try:
        network = Network(case_from_tree(loaded_tree(net, holding)))
        ours = network.solve([asked(net, trouble) for trouble in wanted])
    except (RequestError, NoAnswerError) as refused:
        if "is joined already" not in str(refused) and "Newton" not in str(refused):
            raise
        reject()
    assume(all(_tells(state) for state in ours.faults))
    made, theirs, _, calm = driven(net, wanted, ours)
    assume({made.bus_of[t.spot][0] for t in wanted} <= theirs.joined)
    wrong = misfits(net, holding, ours, calm) + differences(net, wanted, ours, made, theirs)
    assert not wrong, "\n".join(wrong)
