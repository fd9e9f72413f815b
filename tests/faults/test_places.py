"""Faults along lines, at terminals, several at once: limits, continuity, words."""

from __future__ import annotations

from typing import Any

import numpy as np
import pytest

from seqfault.errors import RequestError
from seqfault.faults.kinds import fault_at
from tests.faults.small import PLANT, changed, network

RING: tuple[tuple[str, Any], ...] = (
    (
        "lines.C2",
        {
            "from": "main", "to": "far", "length": "4 km", "z1": "0.2+j0.1 ohm/km", "z0": "0.8+j0.4 ohm/km",
            "c1": "0.3 uF/km", "c0": "0.3 uF/km",
        },
    ),
)  # fmt: skip
KINDS = ("three-phase", "line-line", "line-line-ground", "line-ground")


def at(solution: Any, element: str, bus: str) -> np.ndarray:
    t = solution.terminals
    rows = [
        k
        for k in range(len(t.element))
        if (t.element[k], t.bus[k]) == (element, bus) and not t.side[k].startswith("from ")
    ]
    assert len(rows) == 1
    return t.phases[:, rows[0]]


@pytest.mark.parametrize("kind", KINDS)
@pytest.mark.parametrize(("place", "bus"), [("C1@0%", "main"), ("C1@100%", "far"), ("T2@far", "far")])
def test_at_an_end_the_fault_is_that_of_the_bus_and_the_flow_there_jumps_by_it(kind, place, bus):
    net = network(PLANT, *RING)
    ours, theirs = net.fault(place, kind, zf=0.3), net.fault(bus, kind, zf=0.3)
    assert ours.current == pytest.approx(theirs.current, rel=1e-9, abs=1e-9)
    for name in net.buses:
        assert ours.at(name) == pytest.approx(theirs.at(name), rel=1e-9, abs=1e-6)
    element = place.partition("@")[0]
    jump = at(ours, element, bus) - at(theirs, element, bus)
    assert jump == pytest.approx(ours.current, rel=1e-9, abs=1e-6)


@pytest.mark.parametrize("kind", KINDS)
def test_currents_and_voltages_run_on_along_a_line_into_those_at_its_ends(kind):
    net = network(PLANT, *RING)
    for end, inner in (("0%", "0.0001%"), ("100%", "99.9999%"), ("37%", "37.0001%")):
        a, b = net.fault(f"C1@{end}", kind), net.fault(f"C1@{inner}", kind)
        assert a.current == pytest.approx(b.current, rel=1e-4, abs=1e-3)
        for name in net.buses:
            assert a.at(name) == pytest.approx(b.at(name), rel=1e-3, abs=1.0)


def test_a_point_in_kilometres_per_cent_and_per_unit_is_one_point():
    net = network(PLANT)
    answers = [net.fault(f"C1@{where}").current[0] for where in ("40%", "0.4pu", "1.2km", "1200 m")]
    assert answers == pytest.approx([answers[0]] * 4, rel=1e-12)


def test_two_sections_are_the_line():
    whole, cut = network(PLANT), network(PLANT).located(["C1@25%"])
    for kind in KINDS:
        a, b = whole.fault("far", kind), cut.fault("far", kind)
        assert a.current == pytest.approx(b.current, rel=2e-5, abs=1e-3)  # its capacitance sits elsewhere


def test_one_of_several_circuits_is_faulted_and_the_others_feed_it():
    two = network(PLANT, ("lines.C1.count", 2)).fault("C1@100%", "line-ground")
    one = network(PLANT, ("lines.C1", {**PLANT["lines"]["C1"]}), ("lines.C2", PLANT["lines"]["C1"]))
    theirs = one.fault("C1@100%", "line-ground")
    assert two.current == pytest.approx(theirs.current, rel=1e-9, abs=1e-9)
    assert at(two, "C1", "far") == pytest.approx(at(theirs, "C1", "far"), rel=1e-9, abs=1e-6)
    assert at(two, "C1, the other one", "far") == pytest.approx(at(theirs, "C2", "far"), rel=1e-9, abs=1e-6)


def test_a_breaker_open_at_the_far_end_is_the_line_open_there():
    net = network(PLANT, *RING)
    ours = net.fault("C1@60%", "line-ground", also=[fault_at("C1@far", "open-three")])
    theirs = network(PLANT, *RING, ("lines.C1.open", ["far"])).fault("C1@60%", "line-ground")
    assert ours.current == pytest.approx(theirs.current, rel=1e-9, abs=1e-9)
    assert at(ours, "C1", "main") == pytest.approx(at(theirs, "C1", "main"), rel=1e-9, abs=1e-9)
    end = network(PLANT, *RING, ("lines.C1.open", ["far"])).fault("C1@far", "line-ground")
    both = net.fault("C1@100%", "line-ground", also=[fault_at("C1@far", "open-three")])
    assert both.current == pytest.approx(end.current, rel=1e-9, abs=1e-9)


def test_three_open_poles_leave_what_is_behind_them_dead():
    solution = network(PLANT).fault("C1@main", "open-three")
    assert np.all(solution.at("far") == 0)
    assert any('"far"' in note and "cut off" in note for note in solution.notes)


def test_an_open_conductor_without_load_changes_nothing_and_says_so():
    solution = network(PLANT).fault("C1@main", "open-one")
    assert solution.faults[0].through == pytest.approx(np.zeros(3))
    assert any("--loaded" in note for note in solution.notes)
    assert network(PLANT).fault("C1@main", "open-one", fallen="main").largest > 100


LOAD: tuple[tuple[str, Any], ...] = (
    ("prefault", {"state": "loaded"}),
    ("loads", {"D1": {"bus": "low", "power": "400 kW", "power_factor": 1, "connection": "star-earthed"}}),
)


def test_both_ends_of_a_broken_conductor():
    """On the source side an earth fault as ever; on the load side the load's own impedance limits it."""
    net = network(PLANT, *LOAD)
    source = net.fault("C1@50%", "open-one", fallen="source")
    load = net.fault("C1@50%", "open-one", fallen="load")
    plain = net.fault("C1@50%", "line-ground")
    assert abs(source.residual) == pytest.approx(abs(plain.residual), rel=0.05)
    assert abs(load.residual) < 0.1 * abs(source.residual)
    assert source.faults[0].bus != load.faults[0].bus
    named = net.fault("C1@50%", "open-one", fallen="main")
    assert named.residual == pytest.approx(source.residual, rel=1e-12)


def test_two_earth_faults_on_an_unearthed_system_meet_through_earth():
    net = network(PLANT, ("neutrals", None), ("transformers.T1.lv.neutral", "isolated"))
    solution = net.fault("main", "line-ground", phases="b", also=[fault_at("far", "line-ground", "c")])
    near, far = solution.faults
    alone = net.fault("main", "line-ground")
    assert abs(near.residual) > 20 * abs(alone.residual)
    assert abs(near.residual + far.residual) < 0.05 * abs(near.residual)


def test_where_the_second_fault_lies_in_another_clock_does_not_matter_to_reciprocity():
    """Bolted phases on both sides of a Dyn11: the answer is one for either order of asking."""
    net = network(PLANT)
    a, b = fault_at("far", "line-line", "ab"), fault_at("low", "line-ground", "c")
    first, second = net.solve([a, b]), net.solve([b, a])
    assert np.abs(first.faults[0].current) == pytest.approx(
        np.abs(second.faults[1].current), rel=1e-9, abs=1e-6
    )
    assert np.abs(first.faults[1].current) == pytest.approx(
        np.abs(second.faults[0].current), rel=1e-9, abs=1e-6
    )


COUPLED: tuple[tuple[str, Any], ...] = (
    *RING,
    ("lines.C2.length", "3 km"),
    ("mutual_couplings.X", {"lines": ["C1", "C2"], "z0": "0.2+j0.15 ohm/km", "length": "1 km",
                            "start": {"C1": "0.5 km", "C2": "2 km"}}),
)  # fmt: skip


def test_a_coupling_with_a_start_acts_on_its_stretch_alone():
    net = network(PLANT, *COUPLED)
    made = net.located(["C1@1km", "C2@2.25km"])
    groups = made.model.lines.coupled
    pairs = {}
    z_base = 11e3**2 / 100e6
    for group in groups:
        z = np.linalg.inv(group.admittance) * z_base
        names = [made.model.lines.names[k] for k in group.line]
        for i, a in enumerate(names):
            for j in range(i):
                if abs(z[i, j]) > 1e-9:
                    pairs[frozenset((a, names[j]))] = z[i, j]
    # C1 is coupled from 0.5 to 1.5 km, cut at 1; C2 from 2 to 3 km, cut at 2.25: the first quarter
    # of the stretch, the second, and the last half.
    whole = 0.2 + 0.15j
    shares = sorted(abs(z / whole) for z in pairs.values())
    assert shares == pytest.approx([0.25, 0.25, 0.5], rel=1e-9)
    assert len(pairs) == 3


@pytest.mark.parametrize(
    ("place", "kind", "more", "words"),
    [
        ("C1@130%", "line-ground", {}, "lies between 0 and 100 %"),
        ("C1@4km", "line-ground", {}, "3 km long"),
        ("C1@grid", "line-ground", {}, 'write "C1@main", "C1@far", "C1@37%"'),
        ("C9@37%", "line-ground", {}, 'no element "C9"'),
        ("C1", "line-ground", {}, 'write "C1@main", "C1@far" or "C1@50%"'),
        ("T1@low", "line-ground", {}, 'write "T1@grid" or "T1@main"'),
        ("main", "open-one", {}, "a pole opens at a terminal or along a line"),
        ("C1@50%", "open-one", {"fallen": "grid"}, 'source or load, or the side: "main" or "far"'),
        ("C1@50%", "open-one", {"zf": 1}, "touches nothing"),
        ("main", "line-ground", {"fallen": "main"}, "breaks no conductor"),
        ("main", "line-ground", {"also": [fault_at("main", "line-line-ground", "ab")]}, "joined already"),
        ("C1@50%", "open-one", {"also": [fault_at("C1@50%", "line-ground", "b")]}, "at this very point"),
    ],
)  # fmt: skip
def test_what_cannot_be_asked_is_told(place, kind, more, words):
    with pytest.raises(RequestError) as refused:
        network(PLANT).fault(place, kind, **more)
    assert words in str(refused.value)


def test_a_line_out_of_service_has_no_points():
    with pytest.raises(RequestError, match="out of service"):
        network(PLANT, *RING, ("lines.C2.out", True)).fault("C2@50%")


def test_names_that_hold_percent_signs_and_colons_are_places_like_others():
    tree = changed(PLANT)
    tree["lines"] = {"50% of: it": tree["lines"]["C1"]}
    solution = network(tree).fault("50% of: it@50%")
    assert abs(solution.residual) > 100


COIL: tuple[tuple[str, Any], ...] = (
    *LOAD[:1],
    ("loads", {"D1": {"bus": "low", "power": "300 kW", "power_factor": 1, "connection": "delta"}}),
    ("neutrals.NER", {"kind": "arc-suppression", "detuning": "+2 %", "loss": "2 %"}),
    ("lines.C2", {**PLANT["lines"]["C1"], "length": "5 km", "open": ["far"]}),
)


def test_an_open_phase_that_drives_a_coil_is_told_with_its_voltage():
    solution = network(PLANT, *COIL).fault("C1@main", "open-one")
    (star,) = [p for p in solution.star_points if p.name == "NER"]
    share = abs(star.voltage) / (11e3 / np.sqrt(3))
    assert share > 3
    assert any(
        "resonance" in note and f"{share:.2f} of the phase voltage" in note for note in solution.notes
    )
    assert any("rises to" in note for note in solution.notes)
    calm = network(PLANT, *LOAD).fault("C1@main", "open-one")
    assert not any("resonance" in note for note in calm.notes)
