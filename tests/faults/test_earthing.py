"""Systems without an earth, with hardly one, and the limits between them."""

from __future__ import annotations

import numpy as np
import pytest

from seqfault.equations.earthing import charging_current
from tests.faults.small import PLANT, changed, network

ISOLATED = changed(
    PLANT,
    ("neutrals", None),
    ("transformers.T1.lv.neutral", "isolated"),
    ("lines.C1.c0", None),
    ("lines.C1.c1", None),
)
PHASE = 11e3 / np.sqrt(3)


def test_an_isolated_system_without_capacitance_carries_exactly_nothing():
    solution = network(ISOLATED).fault("main", "line-ground")
    assert np.all(solution.current == 0)
    assert solution.residual == 0
    size = np.abs(solution.at("main"))
    assert size[1:] == pytest.approx(np.sqrt(3) * PHASE, rel=1e-12)
    assert size[0] == pytest.approx(0, abs=1e-9)
    k = solution.index["main"]
    assert abs(3 * solution.voltage_sequence[0, k]) == pytest.approx(3 * PHASE, rel=1e-12)
    assert solution.notes == (
        'nothing joins the network of "main" to earth, not even a capacitance: no earth current flows;'
        " in a real network the charging current of its cables and machines does",
    )
    assert not solution.undefined[k]
    assert np.isinf(solution.impedance[0])


def test_two_phases_to_earth_of_an_isolated_system_send_exactly_nothing_home():
    solution = network(ISOLATED).fault("main", "line-line-ground")
    assert solution.residual == 0
    assert np.abs(solution.current[1]) == pytest.approx(np.abs(solution.current[2]), rel=1e-12)


def test_a_fault_clear_of_earth_leaves_the_potential_of_an_isolated_system_undefined():
    solution = network(ISOLATED).fault("main", "line-line")
    assert [bus for bus, loose in zip(solution.buses, solution.undefined, strict=True) if loose] == [
        "main",
        "far",
    ]
    assert solution.undefined_notes[0] == 'potential of "main": nothing fixes it'
    assert solution.star_points[0].voltage is None  # the isolated star point goes with it


@pytest.mark.parametrize("base", ["1 MVA", "10 MVA", "100 MVA", "10 GVA"])
def test_small_capacitances_on_strong_cables_keep_their_digits(base):
    """A metre of cable with a nanofarad: the charging current is far below the cable's rounding."""
    tree = changed(
        ISOLATED,
        ("base_power", base),
        ("lines.C1", {"from": "main", "to": "far", "z1": "1e-5+j1e-5 ohm", "z0": "3e-5+j3e-5 ohm",
                      "c1": "1 nF", "c0": "1 nF"}),
    )  # fmt: skip
    solution = network(tree).fault("far", "line-ground")
    assert abs(solution.residual) == pytest.approx(charging_current(1e-9, 50, 11e3), rel=1e-6)
    reference = network(changed(tree, ("base_power", "33 MVA"))).fault("far", "line-ground")
    assert solution.residual == pytest.approx(reference.residual, rel=1e-9)


def test_a_growing_resistor_tends_to_isolated_and_a_shrinking_one_to_solid():
    isolated = network(PLANT, ("transformers.T1.lv.neutral", "isolated"), ("neutrals", None))
    solid = network(PLANT, ("transformers.T1.lv.neutral", "solid"), ("neutrals", None))
    for resistance, limit in (("1e12 ohm", isolated), ("1e-7 ohm", solid)):
        near = network(PLANT, ("neutrals.NER", {"resistance": resistance}))
        for kind in ("line-ground", "line-line-ground"):
            a, b = near.fault("far", kind), limit.fault("far", kind)
            assert a.current == pytest.approx(b.current, rel=1e-6, abs=1e-6)
            assert a.voltage == pytest.approx(b.voltage, rel=1e-6, abs=1e-3)


def test_exact_resonance_of_a_lossless_reactor_carries_exactly_nothing():
    """X_N = 1/(3 ω C0) (method of IEC 60909-0 for resonant earthing; common practice)."""
    omega, c0 = 2 * np.pi * 50, 1e-6
    tree = changed(
        PLANT,
        ("lines.C1", {"from": "main", "to": "far", "z1": "j0.1 ohm", "z0": "j0.3 ohm"}),
        ("motors.M", {"bus": "main", "rating": "1 MVA", "locked_rotor": 5, "x_over_r": 6, "c0": "1 uF"}),
        ("transformers.T1.z0", "j10 %"),
    )  # fmt: skip
    # The capacitance sees the transformer's own reactance in series with three times the reactor.
    own = 0.10 * 11e3**2 / 12.5e6
    reactor = (1 / (omega * c0) - own) / 3
    solution = network(tree, ("neutrals.NER", {"reactance": f"{reactor!r} ohm"})).fault(
        "main", "line-ground"
    )
    assert abs(solution.residual) < 1e-9
    assert np.abs(solution.at("main"))[1:] == pytest.approx(np.sqrt(3) * PHASE, rel=1e-9)


def test_the_current_through_a_resistor_gets_home_by_resistor_and_capacitance():
    solution = network(PLANT).fault("far", "line-ground")
    paths = {path.path: path.current for path in solution.home}
    assert list(paths) == ["NER", "capacitance 11 kV"]
    assert sum(paths.values()) == pytest.approx(solution.residual, rel=1e-9)
    assert abs(paths["NER"]) == pytest.approx(400, rel=0.1)
    # the two are about a right angle apart: sizes must not be added
    angle = np.degrees(np.angle(paths["capacitance 11 kV"] / paths["NER"]))
    assert angle == pytest.approx(90, abs=4)


def test_a_delta_keeps_the_earth_current_of_one_side_from_the_other():
    solution = network(PLANT).fault("low", "line-ground")
    far = [*zip(solution.terminals.element, solution.terminals.bus, strict=True)].index(("T2", "far"))
    assert abs(solution.residual) > 10e3
    assert abs(solution.terminals.residual[far]) < 1e-9 * abs(solution.residual)
    assert [path.path for path in solution.home] == ["T2.lv"]
    delta = next(d for d in solution.deltas if d.element == "T2")
    # I0 of the star side times the turns ratio of the legs, U_lv/√3 over U_hv
    expected = abs(solution.residual) / 3 * (400 / np.sqrt(3)) / 11e3
    assert abs(delta.current) == pytest.approx(expected, rel=1e-9)


def test_a_dead_bus_says_so_and_carries_nothing():
    tree = changed(PLANT, ("buses.spare", "11 kV"), ("buses.end", "11 kV"), ("lines.C2", {
        "from": "spare", "to": "end", "z1": "j1 ohm", "z0": "j3 ohm"}))  # fmt: skip
    dead = network(tree)
    assert any("no infeed or generator" in w and '"spare"' in w for w in dead.model.warnings)
    for kind in ("three-phase", "line-ground", "line-line-ground", "line-line"):
        solution = dead.fault("spare", kind)
        assert np.all(solution.current == 0)
        assert np.all(solution.terminals.sequence == 0)
        assert "is dead in this state" in solution.notes[0]
    alive = dead.fault("main", "line-ground")
    assert np.all(alive.at("spare") == 0)
