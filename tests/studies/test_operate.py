"""What relays do about a fault: against full solutions, published formulas, and replays in fine steps."""

from __future__ import annotations

import math
from pathlib import Path

import numpy as np
import pytest

from seqfault.case.reader import case_from_tree, read_case
from seqfault.case.records import Case
from seqfault.case.scenarios import in_state
from seqfault.case.text import parse_text
from seqfault.equations.relay_travel import travelled, until_operation
from seqfault.errors import RequestError
from seqfault.faults.kinds import fault_at
from seqfault.faults.network import Network
from seqfault.faults.solution import FaultSolution
from seqfault.studies.breakers import unfolded
from seqfault.studies.operate import Operation, operate, said_of
from seqfault.studies.relay_readings import Reading
from seqfault.studies.relays import Relay
from seqfault.studies.replay import Replay, replay
from seqfault.studies.replay_said import feeding, overrun, replay_assumed, unsure
from tests.studies.setting_plants import RING, case_of, measured

RADIAL = Path(__file__).with_name("radial.toml")
CURVES = {  # constants of IEC 60255-151, curves A and B, and of IEEE C37.112 very inverse; from memory
    "IEC standard inverse": (0.14, 0.02, 0.0),
    "IEC very inverse": (13.5, 1.0, 0.0),
    "IEEE very inverse": (19.61, 2.0, 0.491),
}


def by_formula(relay: Relay, value: float) -> tuple[float, float]:
    """Times of the main and the fast stage, written out once more."""
    pickup = relay.pickup.primary
    assert pickup is not None
    m = value / pickup
    fast = math.inf
    if relay.fast is not None and relay.fast.primary is not None and value > relay.fast.primary:
        fast = relay.fast_delay or 0.0
    if m <= 1:
        return math.inf, fast
    if relay.curve == "definite":
        assert relay.delay is not None
        return relay.delay, fast
    k, alpha, c = CURVES[relay.curve]
    assert relay.multiplier is not None
    return max(relay.multiplier * (k / (m**alpha - 1) + c), relay.minimum_time or 0.0), fast


def reading(found: Operation, name: str) -> Reading:
    return next(each for each in found.readings if each.relay.name == name)


def radial(*changes: tuple[str, str]) -> Case:
    text = RADIAL.read_text(encoding="utf-8")
    for old, new in changes:
        assert old in text, old
        text = text.replace(old, new, 1)
    return case_from_tree(parse_text(text.encode(), "radial.toml"), "radial.toml")


@pytest.mark.parametrize("place", ["W@30%", "E@50%", "X@east", "main", "low", "grid", "west"])
@pytest.mark.parametrize("kind", ["line-ground", "line-line-ground", "line-line", "three-phase"])
def test_every_relay_sees_what_full_solutions_give_and_acts_by_the_formulas(place: str, kind: str) -> None:
    network = Network(case_of())
    found = operate(network, [fault_at(place, kind)])
    solution = network.fault(place, kind)
    times = []
    for each in found.readings:
        if each.relay.name.endswith("(2)"):
            continue
        wanted = measured(solution, each.relay)
        top = solution.largest if each.relay.unit == "A" else 6351
        if wanted > 1e-8 * top:
            assert each.value == pytest.approx(wanted, rel=1e-9)
        else:  # nothing, or its direction forbids it
            assert each.value <= 1e-8 * top or each.why in ("wrong way", "below pickup")
            assert not each.acts
        main, fast = by_formula(each.relay, wanted)
        assert (each.main, each.fast) == (pytest.approx(main, rel=1e-6), pytest.approx(fast)), each
        assert each.acts == (not each.why)
        times.append(each.time)
    acting = [each.time for each in found.acting]
    assert acting == sorted(acting)
    assert len(acting) == sum(map(math.isfinite, times)) + sum(
        each.relay.name.endswith("(2)") for each in found.acting
    )


def test_circuits_of_one_record_taken_apart_are_the_same_network() -> None:
    case = case_of()
    apart = unfolded(case)
    assert set(apart.lines) == {"E", "W", "W (2)", "X"}
    assert apart.relays["W-phase (2)"].at == "W (2)@main"
    for place in ("west", "W@30%", "W@west"):
        for kind in ("line-ground", "line-line-ground"):
            one, two = Network(case).fault(place, kind), Network(apart).fault(place, kind)
            assert np.allclose(one.current, two.current, rtol=1e-9, atol=1e-9 * one.largest)
    twin = reading(operate(Network(case), [fault_at("west")]), "W-phase (2)")
    assert twin.value == pytest.approx(
        reading(operate(Network(case), [fault_at("west")]), "W-phase").value, rel=1e-9
    )
    assert unfolded(radial()) == radial()


FOUR = """\
title = "Four boards in a row"
frequency = "50 Hz"
[buses]
A = "11 kV"
B = "11 kV"
C = "11 kV"
D = "11 kV"
end = "11 kV"
[infeeds.grid]
bus = "A"
z1 = "{0:.12g} ohm"
z0 = "open"
"""


def four() -> Case:
    """Three-phase faults of 6, 5, 3 and 2 kA at A to D: Subir Ray, Ex. 14.2; reactances alone."""
    ohms = [11000 / math.sqrt(3) / ampere for ampere in (6000, 5000, 3000, 2000)]
    text = FOUR.format(1).replace('"1 ohm"', f'"j{ohms[0]:.12g} ohm"')
    names = "ABCD"
    lines = [(f"L{names[k]}", names[k], names[k + 1], ohms[k + 1] - ohms[k]) for k in range(3)]
    lines.append(("LD", "D", "end", 1.0))
    for name, start, end, x in lines:
        text += f'[lines.{name}]\nfrom = "{start}"\nto = "{end}"\n'
        text += f'z1 = "j{x:.12g} ohm"\nz0 = "j{3 * x:.12g} ohm"\n'
    settings = (("A", 400, 0.6864), ("B", 300, 0.5072), ("C", 200, 0.2889), ("D", 100, 0.1))
    for name, ratio, multiplier in settings:
        text += (
            f'[current_transformers.ct{name}]\nratio = "{ratio}/1 A"\nconnection = "residual"\n'
            f'[relays.R{name}]\nat = "L{name}@{name}"\nmeasures = "phase"\nct = "ct{name}"\n'
            'pickup = "1 In"\n'
            f'curve = "IEC standard inverse"\nmultiplier = {multiplier}\nprotects = ["L{name}"]\n'
            'breaker_time = "0.1 s"\n'
        )
    return case_from_tree(parse_text(text.encode(), "four.toml"), "four.toml")


def test_the_published_grading_of_four_relays() -> None:
    """Subir Ray, Ex. 14.2: 0.2267 s at D, 0.5 s more at each next one, each at its own fault current."""
    network = Network(four())
    for k, (place, current) in enumerate((("D", 2000), ("C", 3000), ("B", 5000), ("A", 6000))):
        found = operate(network, [fault_at(f"L{place}@{place}", "three-phase")])
        own = reading(found, f"R{place}")
        assert own.value == pytest.approx(current, rel=1e-9)
        assert own.time == pytest.approx(0.2267 + 0.5 * k, abs=1e-3)
        assert found.acting[0] == own
        assert len(found.acting) == 4 - k  # those behind see it too, those beyond do not
        if place == "B":
            assert own.multiple == pytest.approx(16.67, abs=5e-3)  # the book's PSM
    assert "no accuracy" not in " ".join(said_of(found))


@pytest.mark.parametrize(
    ("times", "curve", "seconds"),
    [  # usual tables of IEC 60255-151, multiplier 1 (from memory)
        (2, "IEC standard inverse", 10.03),
        (5, "IEC standard inverse", 4.28),
        (10, "IEC standard inverse", 2.97),
        (5, "IEC very inverse", 3.38),
        (10, "IEC extremely inverse", 0.81),
        (20, "IEC extremely inverse", 0.20),
    ],
)
def test_published_points_of_the_curves(times: float, curve: str, seconds: float) -> None:
    current = abs(Network(radial()).fault("N@50%").terminals.residual).max()
    case = radial()
    seen = reading(operate(Network(case), [fault_at("N@50%")]), "N-earth").value
    assert seen == pytest.approx(current, rel=1e-3)
    case = radial(
        ('pickup = "10 A"', f'pickup = "{seen / times:.12g} A"'),
        ('curve = "IEC standard inverse"\nmultiplier = 0.2', f'curve = "{curve}"\nmultiplier = 1'),
        ("steps = { pickup", "# steps = { pickup"),
    )
    found = reading(operate(Network(case), [fault_at("N@50%")]), "N-earth")
    assert found.multiple == pytest.approx(times)
    assert found.time == pytest.approx(seconds, abs=6e-3)


# ---- replay ------------------------------------------------------------------------------------------


def opened_case(case: Case, breakers: set[str]) -> Case:
    """``case`` with breakers open, by its own switching: line ends, and elements out."""
    ends = [b for b in breakers if b.partition("@")[0] in case.lines]
    out = {b.partition("@")[0] for b in breakers if b not in ends}
    return in_state(case, "base", out, ends)


def stepped(
    case: Case, place: str, kind: str, trips: dict[str, str], until: float, step: float
) -> list[tuple[float, str, float]]:
    """Breakers as they open, by the clock: time, breaker, greatest phase current left."""
    network = Network(case)
    relays = [r.relay for r in operate(network, [fault_at(place, kind)]).readings]
    breakers: set[str] = set()
    solution: FaultSolution = network.fault(place, kind)
    ways = {relay.name: [0.0, 0.0] for relay in relays}
    due: dict[str, float] = {}
    operated: set[str] = set()
    out = []
    times = {r.name: by_formula(r, measured(solution, r)) for r in relays}
    for k in range(round(until / step)):
        now = (k + 1) * step
        for relay in relays:
            name = relay.name
            if name in operated:
                continue
            own = ways[name]
            for stage in (0, 1):
                time = times[name][stage]
                own[stage] = 0.0 if math.isinf(time) else own[stage] + (step / time if time else 1.0)
            if max(own) >= 1:
                operated.add(name)
                due.setdefault(trips.get(name, relay.at), now + relay.breaker_time)
        opening = {b for b, time in due.items() if time <= now} - breakers
        if opening:
            breakers |= opening
            solution = Network(opened_case(case, breakers)).fault(place, kind)
            stars = {star.name for star in solution.star_points}

            def sees(r: Relay, stars: set[str] = stars, gone: frozenset[str] = frozenset(breakers)) -> bool:
                return r.at not in gone and (not r.star or r.star in stars)

            times = {
                r.name: by_formula(r, measured(solution, r)) if sees(r) else (math.inf, math.inf)
                for r in relays
            }
            out += [(now, b, float(np.abs(solution.current).max())) for b in sorted(opening)]
    return out


SINGLE = ("count = 2\n", "")
"""One circuit in W, so that no relay stands for two."""


@pytest.mark.parametrize(
    ("place", "kind"),
    [
        ("E@50%", "line-ground"),
        ("X@40%", "line-ground"),
        ("E@10%", "line-line-ground"),
        ("W@30%", "line-ground"),
    ],
)
def test_a_replay_is_what_fine_steps_of_time_give(place: str, kind: str) -> None:
    case = case_of(RING, SINGLE)
    found = replay(Network(case), [fault_at(place, kind)])
    step = 2e-4
    until = (found.cleared or max(e.time for e in found.events)) + 5 * step
    trips = {"T1-neutral": "T1@main"}
    wanted = stepped(case, place, kind, trips, until, step)
    got = [(e.time, e.breaker, e.left.phase) for e in found.events if e.what == "opens" and not e.late]
    assert len(got) == len(wanted) >= 2
    for (time, breaker, left), (at, name, current) in zip(got, wanted, strict=True):
        assert breaker == name
        assert time == pytest.approx(at, abs=3 * step)
        assert left == pytest.approx(current, rel=1e-6, abs=1e-3)
    assert (found.cleared is not None) == (wanted[-1][2] < 1e-3)


def test_relays_keep_the_way_they_have_come_when_the_current_changes() -> None:
    """By hand, one change: S-earth runs 0.2 s with one current, the rest with the other."""
    travel = travelled(0.0, 1.0, 0.25)
    assert travel == pytest.approx(0.25)
    assert until_operation(travel, 4.0) == pytest.approx(3.0)  # 0.25 + 3/4 = 1: ∫ dt/t(I) = 1
    assert travelled(travel, math.inf, 0.1) == 0.0
    assert until_operation(0.0, math.inf) == math.inf
    assert travelled(0.0, 0.0, 0.0) == 1.0
    assert until_operation(0.0, 0.0) == 0.0
    rng = np.random.default_rng(7)
    for _ in range(50):
        pieces = [(rng.uniform(0.05, 0.4), rng.uniform(0.3, 3.0)) for _ in range(12)]
        way = clock = 0.0
        for lasting, time in pieces:
            if until_operation(way, time) <= lasting:
                clock += until_operation(way, time)
                break
            way, clock = travelled(way, time, lasting), clock + lasting
        fine, steps = 0.0, 0
        ends = np.cumsum([lasting for lasting, _ in pieces])
        while fine < 1 and steps * 1e-4 < ends[-1]:
            k = int(np.searchsorted(ends, steps * 1e-4, side="right"))
            fine += 1e-4 / pieces[min(k, 11)][1]
            steps += 1
        assert clock == pytest.approx(steps * 1e-4, abs=1e-2 if fine < 1 else 2e-3)


def test_a_stuck_breaker_leaves_the_fault_to_the_backup() -> None:
    network = Network(radial())
    sound = replay(network, [fault_at("N@50%")])
    stuck = replay(network, [fault_at("N@50%")], stuck=["N@main"])
    assert sound.cleared == pytest.approx(reading(sound.first, "N-earth").cleared)
    assert stuck.cleared == pytest.approx(reading(sound.first, "board-earth").cleared)
    assert [e.what for e in stuck.events] == ["stays closed", "operates", "opens"]
    (way,) = sound.ways
    backup = reading(sound.first, "board-earth").time
    assert sound.cleared is not None
    assert way.share == pytest.approx(sound.cleared / backup)
    assert way.lacking == pytest.approx(backup - sound.cleared)


def test_a_fault_between_winding_and_breaker_is_not_cleared_until_the_other_side_trips() -> None:
    network = Network(radial())
    found = replay(network, [fault_at("T1@main")])
    assert found.cleared is None
    assert found.left.phase == pytest.approx(
        Network(radial(), None).fault("T1@main", also=[]).largest, rel=0.01
    )
    assert found.opened.keys() == {"T1@main"}
    said = replay(network, [fault_at("T1@main")], [("board-earth", "T1@grid")])
    assert said.cleared == pytest.approx(reading(found.first, "board-earth").cleared)
    both = replay(network, [fault_at("T1@main")], [("board-earth", "T1@grid"), ("board-earth", "T1@main")])
    assert set(both.opened) == {"T1@grid", "T1@main"}
    assert both.cleared == said.cleared


def test_no_relay_sees() -> None:
    found = replay(Network(case_of()), [fault_at("low")])
    assert (found.cleared, found.events) == (None, ())
    assert found.left.phase == pytest.approx(Network(case_of()).fault("low").largest)
    whys = {each.relay.name: each.why for each in found.last}
    assert whys["T1-neutral"] == "blind"
    assert whys["W-phase"] == "below pickup"


def test_relays_on_what_is_out_open_or_dead() -> None:
    off = operate(Network(in_state(case_of(), "base", ["E"])), [fault_at("main")])
    assert (reading(off, "E-main").why, reading(off, "E-main").because) == ("blind", '"E" is out')
    half = operate(Network(in_state(case_of(), "base", [], ["X@east"])), [fault_at("main")])
    assert "switched off" in reading(half, "X-east").because
    alone = operate(Network(in_state(radial(), "base", [], ["N@main"])), [fault_at("main")])
    assert reading(alone, "N-earth").why == "blind"
    out = operate(Network(in_state(radial(), "base", ["N-earth"])), [fault_at("N@50%")])
    assert reading(out, "N-earth").why == "out of service"
    dead = replay(Network(in_state(radial(), "base", ["utility"])), [fault_at("main")])
    assert (dead.dead, dead.cleared, dead.events) == (True, 0.0, ())


def test_a_relay_whose_breaker_is_open_already() -> None:
    network = Network(in_state(case_of(RING, SINGLE), "base", [], ["X@west"]))
    found = replay(network, [fault_at("E@50%")], [("E-east", "X@west")])
    events = [e for e in found.events if e.breaker == "X@west"]
    assert all(e.what == "opens no more" for e in events)
    assert "X@west" not in found.opened


def test_settings_that_are_open_act_never_and_say_so() -> None:
    case = radial(('pickup = "10 A"   # as found\n', ""), ('delay = "0.2 s"\n', ""))
    found = operate(Network(case), [fault_at("N@50%")])
    assert reading(found, "N-earth").why == "pickup not set"
    assert reading(operate(Network(case), [fault_at("S@50%")]), "S-earth").why == "time not set"


def test_a_relay_without_delay_operates_at_once_and_ties_are_opened() -> None:
    text = RADIAL.read_text(encoding="utf-8")
    text = text.replace('south = "11 kV"', 'south = "11 kV"\nannex = "11 kV"')
    text += (
        '\n[ties.K]\nfrom = "south"\nto = "annex"\nclosed = true\n'
        '[relays.K-earth]\nat = "K@south"\nmeasures = "core-balance"\nct = "core"\npickup = "5 A"\n'
        'curve = "definite"\ndelay = "0 s"\nprotects = ["annex"]\nbreaker_time = "0.06 s"\n'
    )
    network = Network(case_from_tree(parse_text(text.encode(), "x.toml"), "x.toml"))
    found = replay(network, [fault_at("annex")])
    assert [(e.time, e.what, e.breaker) for e in found.events] == [
        (0.0, "operates", "K@south"),
        (pytest.approx(0.06), "opens", "K@south"),
    ]
    assert found.cleared == pytest.approx(0.06)
    assert found.left.phase == 0
    assert reading(found.first, "K-earth").value == pytest.approx(abs(network.fault("annex").residual))


def test_what_trips_before_the_fault_is_cleared_opens_all_the_same() -> None:
    case = radial(("multiplier = 0.3", "multiplier = 0.11"))
    found = replay(Network(case), [fault_at("N@50%")])
    early = reading(found.first, "board-earth")
    assert found.cleared is not None
    assert early.time < found.cleared
    last = found.events[-1]
    assert (last.breaker, last.late) == ("T1@main", True)
    assert last.time == pytest.approx(early.cleared)


def test_a_near_miss_is_told() -> None:
    first = replay(Network(case_of()), [fault_at("E@50%")])
    assert [way.relay for way in overrun(first)] == ["X-east"]  # it lacks half a millisecond of 20


def test_a_broken_conductor_that_lies_on_earth() -> None:
    network = Network(radial())
    found = replay(network, [fault_at("N@50%", "open-one", fallen="source")])
    assert found.cleared == pytest.approx(reading(found.first, "N-earth").cleared)
    with pytest.raises(RequestError, match="lies at the breaker that opens"):
        replay(network, [fault_at("N@main", "open-one", fallen="source")], [("board-earth", "N@main")])
    hanging = replay(network, [fault_at("N@50%", "open-one")])
    assert hanging.cleared is None  # on a flat profile nothing shows, and nobody acts


def test_two_faults_at_once_are_cleared_when_the_last_is() -> None:
    found = replay(Network(radial()), [fault_at("N@50%"), fault_at("S@50%", phases="b")])
    assert set(found.opened) == {"N@main", "S@main"}
    assert found.cleared == pytest.approx(max(found.opened.values()))


def test_three_circuits_are_tripped_each_by_its_own_relay() -> None:
    case = case_of(RING, ("count = 2", "count = 3"), ('pickup = "60 A"', 'pickup = "15 A"'))
    found = operate(Network(case), [fault_at("main")])
    assert {"W-sequence", "W-sequence (2)", "W-sequence (3)"} <= {r.relay.name for r in found.readings}
    stated = operate(Network(case), [fault_at("main")], [("board", "W@main")])
    assert stated.trips.of["board"] == ("W@main", "W (2)@main", "W (3)@main")


def test_units_of_one_record_that_share_a_resistor_are_tripped_together() -> None:
    case = radial(('vector_group = "Dyn11"\n', 'vector_group = "Dyn11"\ncount = 2\n'))
    found = replay(Network(case), [fault_at("main")])
    assert found.first.trips.of["board-earth"] == ("T1@main", "T1 (2)@main")
    assert set(found.opened) == {"T1@main", "T1 (2)@main"}
    assert found.cleared is not None
    whole = {star.name: star for star in Network(case).fault("main").star_points}["NER"]
    assert reading(found.first, "board-earth").value == pytest.approx(abs(whole.current), rel=1e-9)


def test_units_of_one_record_with_star_points_of_their_own_have_a_relay_each() -> None:
    case = radial(
        ('vector_group = "Dyn11"\n', 'vector_group = "Dyn11"\ncount = 2\n'),
        ('neutral = "NER"', 'neutral = "solid"'),
        ('at = "NER"', 'at = "T1.lv"'),
    )
    found = replay(Network(case), [fault_at("main")])
    assert found.first.trips.of["board-earth (2)"] == ("T1 (2)@main",)
    whole = {star.name: star for star in Network(case).fault("main").star_points}["T1.lv"]
    for name in ("board-earth", "board-earth (2)"):
        assert reading(found.first, name).value == pytest.approx(abs(whole.current) / 2, rel=1e-9)
    assert found.cleared == pytest.approx(reading(found.first, "board-earth").cleared)


@pytest.mark.parametrize(
    ("stated", "stuck", "said"),
    [
        ([("nobody", "N@main")], [], "no relay is called"),
        ([("N-earth", "N@south")], [], 'write "N@main" or "N@north"'),
        ([("N-earth", "M@main")], [], "there is no element"),
        ([], ["N"], 'write "N@main" or "N@north"'),
    ],
)
def test_breakers_that_are_not_there(stated: list[tuple[str, str]], stuck: list[str], said: str) -> None:
    with pytest.raises(RequestError, match=said):
        replay(Network(radial()), [fault_at("main")], stated, stuck)


def test_a_case_without_relays() -> None:
    case = read_case(Path(__file__).parents[1] / "cli" / "plant.toml")
    with pytest.raises(RequestError, match="has no relays"):
        operate(Network(case), [fault_at("main")])


def test_a_current_beyond_the_class_is_told() -> None:
    found = operate(Network(case_of()), [fault_at("W@1%", "three-phase")])
    phase = reading(found, "W-phase")
    limit = found.protection.transformers["ring"].limit
    assert limit is not None
    assert (phase.beyond is not None) == (phase.value > limit)
    core = operate(
        Network(radial(('pickup = "10 A"', 'pickup = "1 In"'), ("10P10", "10P5"))), [fault_at("N@50%")]
    )
    assert reading(core, "N-earth").beyond == pytest.approx(reading(core, "N-earth").value)
    assert "250 A at most" in " ".join(said_of(core))


def test_cleared_is_never_claimed_while_anything_feeds() -> None:
    """Whatever trips: a cleared fault has no path to a source left by the case's own switching."""
    case = case_of(RING, SINGLE)
    network = Network(case)
    some = 0
    for place in ("E@50%", "X@40%", "west", "east", "main", "W@west", "low", "T1@main"):
        found: Replay = replay(network, [fault_at(place, "line-line-ground")])
        now = {b for b, t in found.opened.items() if found.cleared is None or t <= found.cleared}
        if any(b.partition("@")[0] == "T1" for b in now) and place == "T1@main":
            continue  # the case itself cannot open one side of a transformer
        solution = Network(opened_case(case, now)).fault(place, "line-line-ground")
        fed = bool(solution.prefault > 0)
        assert fed == (found.cleared is None), place
        some += not fed
    assert some


def test_what_motors_feed_alone_is_no_fault_that_stands() -> None:
    """A three-phase fault at a board with a motor, cut off from all else."""
    network = Network(case_of(RING, SINGLE))
    trips = [("W-phase", "E@east"), ("W-phase", "X@east")]
    found = replay(network, [fault_at("east", "three-phase")], trips)
    motor = 5.5 * 800e3 / (math.sqrt(3) * 11e3)  # locked rotor at full voltage: it feeds the fault at first
    fed = [k for k, name in enumerate(found.first.solution.terminals.element) if name == "M"]
    assert abs(found.first.solution.terminals.phases[0, fed[0]]) == pytest.approx(motor, rel=0.01)
    assert found.cleared == pytest.approx(reading(found.first, "W-phase").cleared)
    assert set(found.opened) == {"E@east", "X@east"}
    assert found.left.phase == 0
    assert any("motors feed alone" in text for text in replay_assumed(found))


def test_converters_that_are_cut_off_stop() -> None:
    text = RADIAL.read_text(encoding="utf-8") + (
        '[converters.C]\nbus = "north"\nrating = "1 MVA"\nfault_current = 1.2\n'
        '[relays.C-phase]\nat = "N@main"\nmeasures = "phase"\npickup = "90 A"\ncurve = "definite"\n'
        'delay = "0.1 s"\nbreaker_time = "0.05 s"\n'
    )
    network = Network(case_from_tree(parse_text(text.encode(), "c.toml"), "c.toml"))
    found = replay(network, [fault_at("north", "three-phase")])
    assert found.first.solution.largest > 0
    assert found.cleared == pytest.approx(0.15)
    assert found.left.phase == 0
    assert any("converters that breakers cut off" in text for text in replay_assumed(found))
    other = replay(network, [fault_at("S@50%")])  # here it stays with the board
    assert other.cleared == pytest.approx(0.3)


def test_load_before_the_fault_is_what_relays_see_too() -> None:
    load = '[loads.L]\nbus = "south"\npower = "2 MW"\npower_factor = 0.9\nconnection = "delta"\n'
    relay = (
        '[relays.S-phase]\nat = "S@main"\nmeasures = "phase"\npickup = "150 A"\ncurve = "definite"\n'
        'delay = "1 s"\n[prefault]\nstate = "loaded"\n'
    )
    text = RADIAL.read_text(encoding="utf-8") + load + relay
    network = Network(case_from_tree(parse_text(text.encode(), "l.toml"), "l.toml"))
    found = replay(network, [fault_at("N@50%")])
    seen = reading(found.first, "S-phase").value
    assert seen == pytest.approx(2e6 / 0.9 / (math.sqrt(3) * 11e3), rel=0.02)  # load current
    assert found.cleared == pytest.approx(reading(found.first, "N-earth").cleared, rel=1e-9)
    own = replay(network, [fault_at("S@50%")])
    assert set(own.opened) == {"S@main"}
    assert own.cleared == pytest.approx(0.3)


def test_who_still_feeds_and_which_times_are_unsure() -> None:
    case = case_of(RING, SINGLE)
    found = replay(Network(case), [fault_at("main")])
    assert feeding(found) == ("G",)  # the transformer is open, the generator of the ring is not
    slow = replay(Network(radial()), [fault_at("N@50%", zf=550)])
    m = reading(slow.first, "N-earth").multiple
    assert 1 < m < 2
    assert unsure(slow) == ("N-earth",)
    assert slow.events[0].multiple == pytest.approx(m)
    assert math.isnan(slow.events[-1].multiple)


def test_an_open_conductor_under_load_ends_when_its_line_is_switched_off() -> None:
    load = '[loads.L]\nbus = "south"\npower = "2 MW"\npower_factor = 0.9\nconnection = "delta"\n'
    relay = (
        '[relays.S-sequence]\nat = "S@main"\nmeasures = "negative-sequence"\npickup = "20 A"\n'
        'curve = "definite"\ndelay = "3 s"\n[prefault]\nstate = "loaded"\n'
    )
    text = RADIAL.read_text(encoding="utf-8") + load + relay
    network = Network(case_from_tree(parse_text(text.encode(), "l.toml"), "l.toml"))
    found = replay(network, [fault_at("S@50%", "open-one")])
    current = 2e6 / 0.9 / (math.sqrt(3) * 11e3)
    # a delta load fed by two phases: it draws √3/2 of the current there, half of that by sequence 1 and 2
    assert reading(found.first, "S-sequence").value == pytest.approx(current / 2, rel=0.03)
    assert found.cleared == pytest.approx(3.1)
    assert found.events[0].left.phase == pytest.approx(current * math.sqrt(3) / 2, rel=0.03)
    at_breaker = replay(network, [fault_at("S@main", "open-one")])  # its own breaker opens the other poles
    assert at_breaker.cleared == pytest.approx(3.1)
    assert at_breaker.left.phase == 0
