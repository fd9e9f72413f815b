"""Neutrals against backups, unearthed networks, machines that fade, relays that back up each other."""

from __future__ import annotations

import math
from functools import cached_property

import numpy as np
import pytest

from seqfault.case.reader import case_from_tree
from seqfault.case.records import Case
from seqfault.case.text import parse_text
from seqfault.equations.relay_curves import CURVES, multiple_for, operate_time
from seqfault.faults.network import Network
from seqfault.networks.factors import SequenceFactor
from seqfault.studies.relays import operate_times
from seqfault.studies.settings import study_settings
from seqfault.studies.settings_proposal import propose_settings
from seqfault.studies.settings_sheet import setting_sheet
from seqfault.studies.settings_states import breakers_of, study_states, zone_of
from tests.studies.setting_plants import RING, Referee, case_of, measured
from tests.studies.test_settings_proposal import radial


@pytest.mark.parametrize("curve", CURVES)
@pytest.mark.parametrize("time", [0.1, 0.35, 1.0, 40.0])
def test_the_multiple_for_a_time_is_the_curve_read_backwards(curve: str, time: float) -> None:
    m = multiple_for(curve, time, 0.2)
    if math.isinf(m):
        assert float(operate_time(curve, 1e9, 0.2)) > time
    elif curve == "definite":
        assert (m, time >= 0.2) == (1.0, True)
    else:
        assert float(operate_time(curve, m, 0.2)) == pytest.approx(time, rel=1e-9)
    assert math.isinf(multiple_for(curve, 0.3, 0.01, least=0.5))


def test_a_neutral_lasts_as_its_square_of_current_and_time_say() -> None:
    """I²t of the worst fault stepped one by one: 11 kV/√3 over 20 ohm is rated, for 10 s."""
    study, found = study_settings(radial(), points=3)
    row = next(w for w in found.withstand if w.relay == "board-earth")
    relay = study.relays["board-earth"]
    zone, ends = zone_of("board-earth", study.relays).whole, breakers_of("board-earth", study.relays)
    rated, worst, worst_time = 11000 / math.sqrt(3) / 20, 0.0, 0.0
    for state in study.states:
        referee = Referee(study.case, state.name, 1.4)
        for spot in state.forms.spots:
            if spot.owner not in zone or spot.opened in ends:
                continue
            for kind in ("line-ground", "line-line-ground"):
                for hot in (False, True):
                    for ohm in np.linspace(0, 10, 6):
                        size = measured(referee.solve(spot, kind, float(ohm), "subtransient", hot), relay)
                        time = float(operate_times(relay, size)) + 0.1
                        if size**2 * time > worst:
                            worst, worst_time = size**2 * time, time
    assert row.rated == pytest.approx(rated)
    assert row.current**2 * row.time == pytest.approx(worst, rel=1e-6)
    assert row.time == pytest.approx(worst_time, rel=1e-6)
    assert row.allowed == pytest.approx(10 * (rated / row.current) ** 2)
    assert row.verdict == "pass"
    assert 0 < row.stays <= 50 + 1e-6  # what its own pickup of 50 A lets through at most


SCREEN = ("[lines.S]\n", '[lines.S]\nscreen_current = "1 kA"\n')


def test_a_screen_lasts_as_its_square_of_current_and_time_say() -> None:
    """I²t of the whole earth current of the worst fault on the cable, stepped one by one."""
    study, found = study_settings(radial(SCREEN), points=3)
    assert {(w.line, w.relay) for w in found.screens} == {("S", "board-earth")}
    row, relay = found.screens[0], study.relays["board-earth"]
    ends, worst, worst_time = breakers_of("board-earth", study.relays), 0.0, 0.0
    for state in study.states:
        referee = Referee(study.case, state.name, 1.4)
        for spot in state.forms.spots:
            if spot.owner != "S" or spot.opened in ends:
                continue
            for kind in ("line-ground", "line-line-ground"):
                for hot in (False, True):
                    for ohm in np.linspace(0, 10, 6):
                        solution = referee.solve(spot, kind, float(ohm), "subtransient", hot)
                        time = float(operate_times(relay, measured(solution, relay))) + 0.1
                        size = abs(solution.residual)
                        if size**2 * time > worst:
                            worst, worst_time = size**2 * time, time
    assert row.current**2 * row.time == pytest.approx(worst, rel=1e-6)
    assert row.time == pytest.approx(worst_time, rel=1e-6)
    assert row.allowed == pytest.approx((1000 / row.current) ** 2)
    assert row.verdict == "pass"
    spent = study_settings(radial((SCREEN[0], SCREEN[1].replace("1 kA", "50 A"))), points=2)[1]
    assert [w.verdict for w in spent.screens] == ["fail"]
    assert spent.verdict == "fail"


def test_a_neutral_that_is_spent_before_the_backup_fails() -> None:
    _, found = study_settings(radial(('duration = "10 s"', 'duration = "1 s"')), points=2)
    assert [w.verdict for w in found.withstand] == ["fail"]
    _, found = study_settings(
        radial(("temperature_rise", 'continuous = "10 A"\ntemperature_rise')), points=2
    )
    assert "carries 10 A for ever" in found.withstand[0].reasons[0]
    assert found.withstand[0].verdict == "pass"  # told, not judged


def test_the_sheet_tells_least_and_greatest_of_all_faults() -> None:
    study, found = study_settings(case_of(), points=3)
    rows = {row.relay.name: row for row in setting_sheet(study)}
    for seen in found.sees:
        if seen.duty == "protects":
            assert rows[seen.relay].least.current == pytest.approx(seen.current, rel=1e-9)
    row = rows["X-east"]
    relay = study.relays["X-east"]
    most = 0.0
    for state in study.states:
        if "X-east" not in state.views:
            continue
        referee = Referee(study.case, state.name, 1.6)
        for spot in state.forms.spots:
            if spot.owner == "X" and spot.opened != "X@east":
                for kind in ("line-ground", "line-line-ground"):
                    for hot in (False, True):
                        solution = referee.solve(spot, kind, 0.0, "subtransient", hot)
                        most = max(most, measured(solution, relay))
    assert row.greatest.current == pytest.approx(most, rel=1e-6)  # its fast stage acts in 0.05 s
    assert row.greatest.time == 0.05


UNEARTHED = """\
title = "Pump house, unearthed"
frequency = "50 Hz"
[buses]
grid = "33 kV"
main = "6.6 kV"
pump = "6.6 kV"
[infeeds.utility]
bus = "grid"
three_phase = "400 MVA"
x_over_r = 8
z0 = "open"
[transformers.T1]
vector_group = "Dd0"
rating = "4 MVA"
impedance = "7 %"
x_over_r = 12
hv = { bus = "grid", voltage = "33 kV" }
lv = { bus = "main", voltage = "6.6 kV" }
[lines.F]
from = "main"
to = "pump"
length = "0.8 km"
z1 = "0.2+j0.1 ohm/km"
z0 = "0.9+j0.3 ohm/km"
c1 = "0 uF/km"
c0 = "0 uF/km"
[relays.open-delta]
at = "T1@main"
measures = "neutral-voltage"
vt = "6.6 kV/110 V"
pickup = "20 %"
curve = "definite"
delay = "1 s"
protects = ["main", "pump", "F"]
[relays.F-earth]
at = "F@main"
measures = "residual"
pickup = "1 A"
curve = "definite"
delay = "0.1 s"
protects = ["F"]
[demands]
see = 1.5
least = ["base"]
fault_resistances = ["0 ohm", "1 kohm"]
"""


def unearthed(*changes: tuple[str, str]) -> Case:
    text = UNEARTHED
    for old, new in changes:
        assert old in text, old
        text = text.replace(old, new)
    return case_from_tree(parse_text(text.encode(), "u.toml"), "u.toml")


def test_an_unearthed_network_shows_its_whole_phase_voltage_and_no_current() -> None:
    _, found = study_settings(unearthed(), points=2)
    volts = next(row for row in found.sees if row.relay == "open-delta")
    # V0 is the phase voltage of a line-ground fault, half of it of one of two phases
    assert volts.current == pytest.approx(6600 / math.sqrt(3) / 2, rel=1e-9)
    assert volts.limit is not None
    assert volts.limit.kind == "line-line-ground"
    assert all(math.isinf(reach.resistance) for reach in volts.reach)
    current = next(row for row in found.sees if row.relay == "F-earth")
    assert (current.current, current.verdict) == (0.0, "fail")


def test_with_capacitance_the_displacement_is_that_of_full_solutions() -> None:
    case = unearthed(('c0 = "0 uF/km"', 'c0 = "0.4 uF/km"'))
    study, found = study_settings(case, points=3)
    view = study.states[0].views["open-delta"]
    network = Network(case)
    reach = {r.spot.place: r for r in next(s for s in found.sees if s.relay == "open-delta").reach}["main"]
    ohm = reach.resistance
    zf, zg = (ohm, 0) if reach.limit.kind == "line-ground" else (0, ohm)
    solution = network.fault("main", reach.limit.kind, zf=zf, zg=zg)
    assert measured(solution, view.relay) == pytest.approx(0.2 * 6600 / math.sqrt(3), rel=1e-5)


ISLAND = """\
title = "Works on their own generator"
frequency = "50 Hz"
[buses]
main = "11 kV"
far = "11 kV"
[generators.G]
bus = "main"
rating = "3 MVA"
voltage = "11 kV"
subtransient = "15 %"
transient = "25 %"
synchronous = "220 %"
x2 = "18 %"
x0 = "7 %"
resistance = "1 %"
neutral = "solid"
[lines.F]
from = "main"
to = "far"
length = "2 km"
z1 = "0.3+j0.1 ohm/km"
z0 = "1.1+j0.3 ohm/km"
c1 = "1 nF/km"
c0 = "1 nF/km"
[relays.quick]
at = "F@main"
measures = "residual"
pickup = "200 A"
curve = "definite"
delay = "0.5 s"
protects = ["F"]
[relays.slow]
at = "F@main"
measures = "residual"
pickup = "200 A"
curve = "definite"
delay = "1.5 s"
protects = ["F"]
[demands]
least = ["base"]
"""


def test_the_reactance_is_that_of_the_relays_own_time() -> None:
    """By hand, 3 E/(Z1 + Z2 + Z0): the transient reactance for 0.5 s, the synchronous for 1.5 s."""
    case = case_from_tree(parse_text(ISLAND.encode(), "i.toml"), "i.toml")
    _, found = study_settings(case, points=2)
    base = 11000**2 / 3e6
    rows = {row.relay: row for row in found.sees}
    for name, x1 in (("quick", 0.25), ("slow", 2.20)):
        z1, z2 = (
            complex(0.01, x1) * base + 2 * (0.3 + 0.1j),
            complex(0.01, 0.18) * base + 2 * (0.3 + 0.1j),
        )
        z0 = complex(0.01, 0.07) * base + 2 * (1.1 + 0.3j)
        single = 3 * 11000 / math.sqrt(3) / abs(z1 + z2 + z0)
        double = 3 * 11000 / math.sqrt(3) * abs(z2 / (z1 * z2 + (z1 + z2) * z0))
        assert rows[name].current == pytest.approx(min(single, double), rel=2e-4)  # the cable's capacitance
    assert rows["quick"].limit is not None
    assert rows["slow"].limit is not None
    assert (rows["quick"].limit.machine, rows["slow"].limit.machine) == ("transient", "synchronous")
    reach = {name: rows[name].reach[0].resistance for name in rows}
    assert reach["quick"] > 0
    assert math.isnan(reach["slow"])  # 200 A do not last that long


def test_a_chain_of_three_waits_twice() -> None:
    second = """
[relays.N-second]
at = "N@main"
measures = "core-balance"
ct = "core"
pickup = "10 A"
curve = "definite"
delay = "0.5 s"
protects = ["N"]
backs_up = ["N-earth"]

[demands]
"""
    behind = ('backs_up = ["N-earth", "S-earth"]', 'backs_up = ["N-second", "S-earth"]')
    study = study_states(radial(("[demands]\n", second), behind), 2)
    proposal = propose_settings(study)
    assert proposal.met
    times = {row.relay: row for row in proposal.rows}
    assert times["N-second"].time_binds.startswith("it waits for N-earth: ")
    assert times["board-earth"].time_binds.startswith("it waits for N-second: ")
    assert proposal.proof is not None
    for grade in proposal.proof.grades:
        assert grade.margin >= grade.required - 1e-9


GENERATOR = """
[generators.G]
bus = "main"
rating = "4 MVA"
voltage = "11 kV"
subtransient = "16 %"
transient = "24 %"
synchronous = "190 %"
x2 = "18 %"
x0 = "7 %"
resistance = "1 %"
neutral = "NER-G"

[neutrals.NER-G]
resistance = "60 ohm"
duration = "10 s"

[relays.G-earth]
at = "NER-G"
measures = "neutral"
pickup = "20 A"
curve = "IEC very inverse"
multiplier = 0.5
protects = ["main", "G", "T1.lv"]
backs_up = ["N-earth", "S-earth"]

[demands]
"""
ALONE = '\n[scenarios.island]\nout = ["utility", "grid", "T1"]\n'


def generating(*changes: tuple[str, str]) -> Case:
    wider = ('protects = ["main", "T1.lv"]', 'protects = ["main", "T1.lv", "G"]')
    last = 'three_phase = "200 MVA"\n'
    return radial(("[demands]\n", GENERATOR), wider, (last, last + ALONE), *changes)


def test_a_pickup_comes_down_until_some_relay_sees_every_place() -> None:
    low = ('step = "0.1 In", least = "0.1 In", greatest = "1 In"', 'step = "0.01 In", least = "0.04 In"')
    case = generating(low, ('length = "3.2 km"', 'length = "1.0 km"'))
    proposal = propose_settings(study_states(case, 2))
    assert proposal.met, proposal.contradictions
    row = next(row for row in proposal.rows if row.relay == "G-earth")
    assert 4 < float(row.setting.pickup or 0) < 5.2
    assert proposal.proof is not None
    assert not any(place.guarded for place in proposal.proof.blind_places)


def test_where_it_cannot_come_down_both_conditions_are_told() -> None:
    proposal = propose_settings(study_states(generating(), 2))
    assert proposal.proof is None
    assert "acts on faults that S-earth at 10 A does not see" in proposal.contradictions[0]
    assert "G-earth: no more than" in proposal.contradictions[1]
    assert "no relay would see a line-line-ground fault at" in proposal.contradictions[1]


def test_a_core_beyond_its_class_is_not_proven() -> None:
    direction = (
        'direction = "forward"\ncharacteristic_angle = "-15 deg"\npolarisation = "residual-voltage"\n'
    )
    case = case_of(
        RING,
        (direction, ""),
        ('vt = "11 kV/110 V"\npickup = "20 A"', 'pickup = "20 A"'),
        ('connected_burden = "2.5 ohm"', 'connected_burden = "90 ohm"'),
    )
    _, found = study_settings(case, points=2)
    row = next(r for r in found.still if r.relay == "E-main")
    assert math.isinf(row.error)
    assert row.verdict == "not proven"
    assert "no bound is known" in row.reasons[0]


@pytest.mark.parametrize(("least", "x1"), [("0.05 s", 0.15), ("0.5 s", 0.25), ("1.5 s", 2.20)])
def test_a_proposed_pickup_is_one_that_its_own_delay_still_sees(least: str, x1: float) -> None:
    text = ISLAND.replace("[relays.slow]", "[relays.away]\nout = true")
    steps = f'steps = {{ pickup = "1 A", delay = {{ step = "0.05 s", least = "{least}" }} }}'
    text = text.replace('delay = "0.5 s"\n', f'delay = "5 s"\n{steps}\n')
    text = text.replace('protects = ["F"]', 'protects = ["F", "far"]')
    case = case_from_tree(parse_text(text.encode(), "i.toml"), "i.toml")
    proposal = propose_settings(study_states(case, 2))
    base = 11000**2 / 3e6
    z1, z2 = (complex(0.01, x) * base + 2 * (0.3 + 0.1j) for x in (x1, 0.18))
    z0 = complex(0.01, 0.07) * base + 2 * (1.1 + 0.3j)
    single = 3 * 11000 / math.sqrt(3) / abs(z1 + z2 + z0)
    double = 3 * 11000 / math.sqrt(3) * abs(z2 / (z1 * z2 + (z1 + z2) * z0))
    row = proposal.rows[0]
    assert row.setting.time == float(least.split()[0])
    assert row.setting.pickup == math.floor(min(single, double) / 1.5)
    assert proposal.proof is not None
    assert all(seen.verdict in ("pass", "tight") for seen in proposal.proof.sees)


def test_more_places_and_resistances_cost_no_further_factorisation(monkeypatch: pytest.MonkeyPatch) -> None:
    made = []
    own = SequenceFactor._solver.func

    def counting(self: SequenceFactor) -> object:
        made.append(self)
        return own(self)

    counted = cached_property(counting)
    counted.__set_name__(SequenceFactor, "_solver")
    monkeypatch.setattr(SequenceFactor, "_solver", counted)
    counts = []
    for points, ohms in ((3, '["0 ohm"]'), (9, '["0 ohm", "1 ohm", "2 ohm", "3 ohm", "4 ohm", "5 ohm"]')):
        made.clear()
        study, _ = study_settings(case_of(RING, ('["0 ohm", "12 ohm"]', ohms)), points=points)
        counts.append(len(made))
        assert len(study.states) == 2
    assert counts[0] == counts[1] > 0
    # three sequences, of a state cold and hot and two reactances more; the network, its places, 6 line ends
    assert counts[0] <= 2 * (3 + 1 + 2 * 2) * (1 + 1 + 6)
