"""The closed forms in a neutral's ohms against the network solved with that neutral in place."""

from __future__ import annotations

from typing import Any

import numpy as np
import pytest
from hypothesis import HealthCheck, assume, given, settings
from hypothesis import strategies as st

from seqfault.case.reader import case_from_tree
from seqfault.errors import CaseError, NoAnswerError
from seqfault.faults.network import Network
from seqfault.faults.neutral_faults import EarthFaults, earth_faults
from seqfault.faults.neutral_ports import KINDS, NeutralPorts, neutral_ports, open_zero_sequence
from tests.conditioning import well_conditioned
from tests.faults.small import PLANT, changed, network
from tests.strategies import PlainNetwork, networks, spread, to_case_tree

OPEN = complex(np.inf)


def ports_of(net: Network, name: str, place: str) -> NeutralPorts:
    star = net.model.stars.names.index(name)
    zero = open_zero_sequence(net.model, (star,))
    return neutral_ports(net.sequences, zero, net.model.index[place], star)


def in_its_place(tree: dict[str, Any], name: str, ohms: complex) -> dict[str, Any]:
    """``tree`` with another device as neutral ``name``: ohms, open (out of service) or solid."""
    out = changed(tree)
    if ohms == 0:
        del out["neutrals"][name]
        for table in ("transformers", "generators", "earthing_transformers"):
            for record in out.get(table, {}).values():
                for at in (record, *(record.get(side, {}) for side in ("hv", "lv", "tv"))):
                    if at.get("neutral") == name:
                        at["neutral"] = "solid"
        return out
    record = {"resistance": f"{ohms.real!r} ohm", "reactance": f"{ohms.imag!r} ohm"}
    out["neutrals"][name] = {"resistance": "1 ohm", "out": True} if np.isinf(ohms) else record
    return out


def misfits(net: Network, faults: EarthFaults, n: int, name: str, place: str) -> list[str]:
    """What column ``n`` of ``faults`` and the solutions of ``net`` have different."""
    out = []
    for k, kind in enumerate(KINDS):
        s = net.fault(place, kind)
        at = s.index[place]
        largest = max(float(np.abs(s.current).max()), 1e-2)
        factors = s.earth_fault_factor
        assert factors is not None
        pairs: list[tuple[str, complex, complex, float]] = [
            ("3I0", faults.earth[k, n], s.residual, largest),
            ("phase", faults.phase[k, n], float(np.abs(s.current).max()), largest),
        ]
        if not s.undefined[at]:
            pairs.append(("factor", faults.factor[k, n], float(factors[at]), 1.0))
        for star in s.star_points:
            if star.name == name and star.voltage is not None:
                scale = max(largest, abs(star.current))
                pairs.append(("neutral", faults.neutral[k, n], star.current, scale))
                nominal = float(net.model.nominal[net.model.index[star.bus]])
                pairs.append(("star", faults.star[k, n], star.voltage, nominal))
        out += [f"{kind} {w}: {a} against {b}" for w, a, b, scale in pairs if abs(a - b) > 1e-9 * scale]
    return out


@settings(
    max_examples=120,
    deadline=None,
    suppress_health_check=[HealthCheck.too_slow, HealthCheck.data_too_large, HealthCheck.filter_too_much],
)
@given(data=st.data(), net=networks())
def test_closed_forms_agree_with_drawn_networks(net: PlainNetwork, data: st.DataObject) -> None:
    assume(well_conditioned(net))
    plain = sorted(n for n, r in net.neutrals.items() if r.detuning is None and net.star_points(n))
    assume(plain)
    name = data.draw(st.sampled_from(plain))
    tree = to_case_tree(net)
    built = Network(case_from_tree(tree))
    live = [bus for k, bus in enumerate(built.buses) if built.model.live[k]]
    near = sorted({bus for bus in net.star_points(name) if bus in live})
    place = data.draw(st.sampled_from(near + live))
    resistor, reactor = data.draw(spread(1e-2, 1e5)), data.draw(spread(1e-1, 1e4))
    ohms = np.array([0, resistor, reactor * 1j, OPEN])
    assume(name in built.model.stars.names)
    try:
        faults = earth_faults(ports_of(built, name, place), ohms)
        others = [Network(case_from_tree(in_its_place(tree, name, complex(z)))) for z in ohms]
    except (NoAnswerError, CaseError):  # series resonance of drawn reactances
        assume(False)
        raise
    for n, other in enumerate(others):
        assert not (wrong := misfits(other, faults, n, name, place)), f"{ohms[n]}: {wrong}"


@pytest.mark.parametrize("place", ["main", "far"])
def test_solid_and_open_are_the_solid_and_the_isolated_star_point(place: str) -> None:
    ports = ports_of(network(PLANT), "NER", place)
    faults = earth_faults(ports, np.array([0, OPEN, 1e9, 1e15], complex))
    solid = network(PLANT, ("transformers.T1.lv.neutral", "solid"), ("neutrals", None))
    isolated = network(PLANT, ("transformers.T1.lv.neutral", "isolated"), ("neutrals", None))
    assert misfits(solid, faults, 0, "T1.lv", place) == []
    assert misfits(isolated, faults, 1, "T1.lv", place) == []
    assert faults.neutral[:, 1].tolist() == [0, 0]
    assert faults.star[:, 0].tolist() == [0, 0]
    assert faults.earth[:, 2] == pytest.approx(faults.earth[:, 1], rel=1e-5)
    assert faults.earth[:, 3] == pytest.approx(faults.earth[:, 1], rel=1e-11)


def test_an_open_neutral_without_capacitance_leaves_exactly_nothing() -> None:
    tree = changed(PLANT, ("lines.C1.c0", None), ("lines.C1.c1", None))
    faults = earth_faults(ports_of(network(tree), "NER", "main"), np.array([OPEN, 16]))
    assert faults.earth[:, 0].tolist() == [0, 0]
    assert np.isinf(faults.z0[0])
    assert np.isfinite(faults.z0[1])
    assert faults.factor[0, 0] == pytest.approx(np.sqrt(3), rel=1e-12)
    assert faults.factor[1, 0] == pytest.approx(1.5, rel=1e-12)


@pytest.mark.parametrize("more", [{}, {"N2": {"resistance": "1 ohm"}}])
def test_capacitances_are_not_drowned_beside_another_free_potential(more: dict[str, Any]) -> None:
    """Two free potentials, one bound by some nanofarad, the other by a neutral or by nothing at all."""
    half = {"bus": "B2", "rating": "50 kVA", "subtransient": "8 %", "x0": "4 %"}
    star = {"vector_group": "Yy0y0", "rating": "100 kVA", "magnetic_circuit": "five-limb",
            "impedance": {"hv_lv": "0.8+j9 %", "hv_tv": "0.8+j9 %", "lv_tv": "0.8+j12 %"}}  # fmt: skip
    tree: dict[str, Any] = {
        "title": "two potentials", "frequency": "50 Hz",
        "buses": {"B1": "110 kV", "B2": "400 V", "B3": "400 V", "B4": "400 V"},
        "infeeds": {"Q": {"bus": "B1", "z1": "90+j90 ohm", "z0": "open"}},
        "generators": {
            "G1": {"bus": "B2", "rating": "100 kVA", "subtransient": "28 %", "x0": "11 %", "neutral": "N1"},
            "G2": half | {"neutral": "N2" if more else "isolated"},
        },
        "transformers": {
            "T2": star | {"hv": {"bus": "B1", "voltage": "110 kV"}, "lv": {"bus": "B3", "voltage": "400 V"},
                          "tv": {"bus": "B2", "voltage": "400 V"}},
            "T3": {"vector_group": "YNyn0", "rating": "100 kVA", "impedance": "12 %", "x_over_r": 1,
                   "magnetic_circuit": "five-limb",
                   "hv": {"bus": "B1", "voltage": "110 kV", "neutral": "N1"},
                   "lv": {"bus": "B3", "voltage": "400 V", "neutral": "N1"}},
        },
        "neutrals": {"N1": {"resistance": "32 ohm"}, **more},
        "lines": {"L1": {"from": "B3", "to": "B4", "length": "20 m", "z1": "0.7+j0.7 ohm/km",
                         "z0": "0.7+j0.7 ohm/km", "c1": "6.4 nF/km", "c0": "2 nF/km"}},
    }  # fmt: skip
    ohms = np.array([0.3, 30.0], complex)
    faults = earth_faults(ports_of(network(tree), "N1", "B2"), ohms)
    for n, z in enumerate(ohms):
        solved = Network(case_from_tree(in_its_place(tree, "N1", complex(z)))).fault("B2")
        assert abs(faults.earth[0, n] - solved.residual) < 1e-11 * abs(solved.residual)
        assert solved.balance < 1e-3


def test_a_neutral_has_no_say_behind_a_delta() -> None:
    for place in ("grid", "low"):
        ports = ports_of(network(PLANT), "NER", place)
        assert not ports.coupled
        faults = earth_faults(ports, np.array([0, 16, OPEN], complex))
        assert np.ptp(np.abs(faults.earth), axis=1) == pytest.approx([0, 0], abs=1e-9)
        assert misfits(network(PLANT), faults, 1, "no star point", place) == []


def test_converters_are_settled_for_every_ohm() -> None:
    more = {"bus": "far", "rating": "3 MVA", "fault_current": 1.2}
    tree = changed(PLANT, ("converters.PV", more), ("neutrals.NER", {"resistance": "1 ohm"}))
    ohms = np.array([0.0, 0.2, 1.0, 40.0], complex)
    faults = earth_faults(ports_of(network(tree), "NER", "far"), ohms)
    for n, z in enumerate(ohms[1:], 1):
        other = Network(case_from_tree(in_its_place(tree, "NER", complex(z))))
        assert misfits(other, faults, n, "NER", "far") == []
