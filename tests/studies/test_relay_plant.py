"""The plant of ``cases/mill.toml``: its two mistakes, their mending, and every figure by brute force.

Full solutions of single faults, stepped in place, resistance and current, stand against the study.
"""

from __future__ import annotations

import cmath
import math
from collections import defaultdict
from collections.abc import Iterator
from dataclasses import dataclass
from pathlib import Path

import numpy as np
import pytest

from seqfault.case.reader import case_from_tree, read_case
from seqfault.case.rewriting import rewritten
from seqfault.case.text import parse_text
from seqfault.faults.solution import FaultSolution
from seqfault.studies.relays import Relay, operate_times
from seqfault.studies.settings import Settings, study_settings
from seqfault.studies.settings_places import Spot
from seqfault.studies.settings_proposal import Proposal, changes_of, propose_settings
from seqfault.studies.settings_sees import Reach
from seqfault.studies.settings_states import State, States, breakers_of, zone_of
from tests.studies.setting_plants import Referee

FILE = Path(__file__).parents[2] / "cases" / "mill.toml"
WARM = 1.7  # 700 K at 0.001 per K
DEMANDED = (0.0, 5.0)
SCAN = (1.0, 12.0, 25.0, 45.0, 80.0, 150.0, 600.0)
KINDS = ("line-ground", "line-line-ground")
ERROR = 0.05  # 5P20
CHARGING = "water-earth"
HASTY = ("ring-2-south", "ring-1-north")


@dataclass(frozen=True)
class Fault:
    """One fault; by machine what each relay measures of it and what errors make of that, A."""

    spot: Spot
    kind: str
    hot: bool
    ohm: float
    sizes: dict[str, list[float]]
    wrong: dict[str, list[float]]
    neutrals: list[dict[str, float]]


@pytest.fixture(scope="module")
def studied() -> tuple[States, Settings]:
    return study_settings(read_case(FILE))


@pytest.fixture(scope="module")
def proposed(studied: tuple[States, Settings]) -> Proposal:
    return propose_settings(studied[0])


def looked(solution: FaultSolution, relay: Relay) -> tuple[float, float]:
    """A that ``relay`` measures in its direction, and the same made of errors; by phase currents alone."""
    t = solution.terminals
    if relay.star:
        star = {s.name: abs(s.current) for s in solution.star_points}
        return star.get(relay.star, 0.0), 0.0
    ends = zip(t.element, t.bus, t.side, strict=True)
    row = next(
        k for k, (e, b, s) in enumerate(ends) if (e, b) == (relay.element, relay.bus) and s[:5] != "from "
    )
    phases = t.phases[:, row] / t.count[row]
    residual = complex(phases.sum())
    if relay.measures == "core-balance":
        return abs(residual), 0.0
    sums = [phases[list(some)].sum() for some in ((0,), (1,), (2,), (0, 1), (0, 2), (1, 2), (0, 1, 2))]
    error = ERROR * float(np.abs(sums).max())
    by = -complex(solution.at(relay.bus).sum())
    if abs(by) < 1e-3:  # V of 11 kV: nothing polarises it
        return 0.0, 0.0
    turned = by * cmath.exp(1j * math.radians(relay.characteristic_angle_deg or 0))
    if abs(cmath.phase(residual * turned.conjugate())) <= math.pi / 2:
        return abs(residual), abs(residual) + error
    return 0.0, abs(residual) + error if error >= abs(residual) else 0.0


def faults(
    state: State, referee: Referee, spots: list[Spot], ohms: tuple[float, ...], heats: tuple[bool, ...]
) -> Iterator[Fault]:
    for spot in spots:
        for kind in KINDS:
            for hot in heats:
                for ohm in ohms:
                    solved = [referee.solve(spot, kind, ohm, m, hot) for m in state.forms.machines]
                    both = {
                        name: [looked(solution, view.relay) for solution in solved]
                        for name, view in state.views.items()
                    }
                    yield Fault(
                        spot,
                        kind,
                        hot,
                        ohm,
                        {name: [size for size, _ in each] for name, each in both.items()},
                        {name: [most for _, most in each] for name, each in both.items()},
                        [{s.name: abs(s.current) for s in each.star_points} for each in solved],
                    )


@pytest.fixture(scope="module")
def everywhere(studied: tuple[States, Settings]) -> dict[str, list[Fault]]:
    """Every place of the study through what is demanded, a fifth of them through a scan of resistances."""
    out = {}
    for state in studied[0].states:
        referee = Referee(studied[0].case, state.name, WARM, points=5)
        places = list(state.forms.spots)
        out[state.name] = [
            *faults(state, referee, places, DEMANDED, (False, True)),
            *faults(state, referee, places[::5], SCAN, (False, True)),
        ]
    return out


def own(relay: Relay, fault: Fault, machines: tuple[str, ...]) -> tuple[float, int]:
    """What it measures with the reactance that stands at its own time, and which."""
    sizes = fault.sizes[relay.name]
    if len(machines) == 1 or float(operate_times(relay, sizes[0])) <= 0.1:
        return sizes[0], 0
    return sizes[-1], len(machines) - 1


def within(fault: Fault, owners: frozenset[str], closed: frozenset[str]) -> bool:
    return fault.spot.owner in owners and fault.spot.opened not in closed


def test_the_study_finds_both_mistakes_and_nothing_else(studied: tuple[States, Settings]) -> None:
    _, found = studied
    assert {row.verdict for row in (*found.sees, *found.withstand)} == {"pass"}
    assert [row.relay for row in found.still if row.verdict != "pass"] == [CHARGING]
    assert [(row.backup, row.first) for row in found.grades if row.verdict != "pass"] == [HASTY]
    assert not any(place.guarded for place in found.blind_places)
    assert found.verdict == "fail"
    still = next(row for row in found.still if row.relay == CHARGING)
    assert still.pickup is not None
    assert still.pickup < still.current  # it trips whenever a neighbour is faulty
    grade = next(row for row in found.grades if row.verdict == "fail")
    assert grade.time < grade.backup_time < grade.time + grade.required
    assert len(found.still) == 14
    assert len(found.states) == 4
    assert not any(each.doubts for each in (*found.sees, *found.still, *found.grades, *found.withstand))


def test_the_proposal_mends_both_and_the_written_file_passes(
    studied: tuple[States, Settings], proposed: Proposal
) -> None:
    study, found = studied
    assert proposed.met
    content = rewritten(FILE.read_bytes(), str(FILE), changes_of(study, proposed))
    again = study_settings(case_from_tree(parse_text(content, "mended.toml"), "mended.toml"))[1]
    assert again.verdict == "pass"
    row = next(each for each in proposed.rows if each.relay == CHARGING)
    still = next(row for row in found.still if row.relay == CHARGING)
    assert row.setting.pickup is not None
    assert row.setting.pickup >= 1.3 * still.current
    hasty = next(each for each in proposed.rows if each.relay == HASTY[0])
    front = next(each for each in proposed.rows if each.relay == HASTY[1])
    assert hasty.setting.time is not None
    assert front.setting.time is not None
    assert hasty.setting.time >= front.setting.time * 1.2 + 0.15  # (2 × 5 % + 10 %) t + 0.1 + 0.02 + 0.03
    assert hasty.setting.time - 0.05 < front.setting.time * 1.2 + 0.15  # a step less would be too short


def test_the_two_mistakes_mended_by_hand_leave_nothing_wrong() -> None:
    text = FILE.read_text(encoding="utf-8")
    head, tail = text.split(f"[relays.{CHARGING}]")
    text = head + f"[relays.{CHARGING}]" + tail.replace('pickup = "0.1 In"', 'pickup = "0.3 In"', 1)
    head, tail = text.split(f"[relays.{HASTY[0]}]")
    text = head + f"[relays.{HASTY[0]}]" + tail.replace('delay = "0.4 s"', 'delay = "0.55 s"', 1)
    found = study_settings(case_from_tree(parse_text(text.encode(), "mended.toml"), "mended.toml"))[1]
    assert found.verdict == "pass"


def test_the_least_seen_is_that_of_all_faults_one_by_one(
    studied: tuple[States, Settings], everywhere: dict[str, list[Fault]]
) -> None:
    study, found = studied
    assert len(found.sees) == 22
    for row in found.sees:
        relay, zone = study.relays[row.relay], zone_of(row.relay, study.relays)
        owners = zone.protects if row.duty == "protects" else zone.backs_up
        closed = breakers_of(row.relay, study.relays)
        least = min(
            own(relay, fault, state.forms.machines)[0]
            for state in study.states
            if state.name != "ring-open" and row.relay in state.views
            for fault in everywhere[state.name]
            if fault.ohm in DEMANDED and within(fault, owners, closed)
        )
        assert row.current == pytest.approx(least, rel=1e-6)
        assert relay.pickup.primary is not None
        assert row.ratio == pytest.approx(least / relay.pickup.primary, rel=1e-6)
        assert row.greatest_pickup == pytest.approx(least / 1.5, rel=1e-6)


def test_the_most_elsewhere_is_that_of_all_faults_one_by_one(
    studied: tuple[States, Settings], everywhere: dict[str, list[Fault]]
) -> None:
    study, found = studied
    for row in found.still:
        relay, owners = study.relays[row.relay], zone_of(row.relay, study.relays).whole
        of = "wrong" if relay.measures == "residual" else "sizes"
        most = max(
            max(getattr(fault, of)[row.relay])
            for state in study.states
            if row.relay in state.views
            for fault in everywhere[state.name]
            if fault.ohm == 0 and fault.spot.owner not in owners and fault.spot.opened != relay.at
        )
        assert row.current == pytest.approx(most, rel=1e-6, abs=1e-6)
        assert row.least_pickup == pytest.approx(1.3 * most, rel=1e-6, abs=1e-6)


def test_no_place_between_the_steps_of_a_line_is_worse(studied: tuple[States, Settings]) -> None:
    """Lines in steps of a twelfth, resistors hot, both ends closed."""
    study, found = studied
    sees: dict[str, float] = defaultdict(lambda: math.inf)
    for row in found.sees:
        sees[row.relay] = min(sees[row.relay], row.current)
    most = {row.relay: row.current for row in found.still}
    met = 0
    for state in study.states:
        referee = Referee(study.case, state.name, WARM, points=13)
        places = [spot for spot in referee.spots if "%" in spot.place and not spot.opened]
        for fault in faults(state, referee, places, DEMANDED, (True,)):
            for name in state.views:
                relay, owners = study.relays[name], zone_of(name, study.relays).whole
                if fault.spot.owner not in owners:
                    if fault.ohm == 0:
                        size = (fault.wrong if relay.measures == "residual" else fault.sizes)[name]
                        assert max(size) <= most[name] * (1 + 1e-4) + 1e-6
                elif state.name != "ring-open":
                    met += 1
                    assert own(relay, fault, state.forms.machines)[0] >= sees[name] * (1 - 1e-4)
    assert met > 2000


def beside(reach: Reach, referee: Referee, relay: Relay, step: float) -> tuple[float, float]:
    """What is measured just below and just above the greatest resistance, in its limiting case."""
    limit, r = reach.limit, reach.resistance
    below, above = (
        looked(referee.solve(reach.spot, limit.kind, ohm, limit.machine, limit.resistors == "hot"), relay)[
            0
        ]
        for ohm in (r * (1 - step), r * (1 + step))
    )
    return below, above


def test_just_below_the_greatest_resistance_a_relay_acts_and_just_above_it_rests(
    studied: tuple[States, Settings],
) -> None:
    """At every place of every relay, whatever is worst there; and below it in all the other cases."""
    study, found = studied
    states = {state.name: state for state in study.states}
    referees = {name: Referee(study.case, name, WARM, points=5) for name in states}
    checked = 0
    for row in found.sees:
        relay = study.relays[row.relay]
        pickup = relay.pickup.primary
        assert pickup is not None
        for reach in row.reach[::2]:
            below, above = beside(reach, referees[reach.limit.state], relay, 1e-6)
            assert above < pickup <= below
            checked += 1
        for reach in row.reach[::9]:
            for name in ("base", "t1-out", "t2-out"):
                if row.relay in states[name].views and reach.spot in states[name].forms.spots:
                    for fault in faults(
                        states[name],
                        referees[name],
                        [reach.spot],
                        (reach.resistance * (1 - 1e-6),),
                        (False, True),
                    ):
                        assert own(relay, fault, states[name].forms.machines)[0] >= pickup
    assert checked > 150


def test_a_fault_asked_for_by_itself_has_the_same_greatest_resistance(
    studied: tuple[States, Settings],
) -> None:
    """Without the other places in the network: the command ``fault`` just below and just above."""
    study, found = studied
    for name in ("boilers-earth", "ring-2-north", "T1-neutral"):
        row = next(each for each in found.sees if each.relay == name)
        relay = study.relays[name]
        pickup = float(relay.pickup.primary or 0)
        for reach in row.reach:
            alone = Referee(study.case, reach.limit.state, WARM, points=5, alone=True)
            below, above = beside(reach, alone, relay, 1e-4)
            assert above < pickup <= below


def test_the_least_margin_is_below_every_scanned_one_and_is_reached(
    studied: tuple[States, Settings], everywhere: dict[str, list[Fault]]
) -> None:
    study, found = studied
    assert len(found.grades) == 18
    for row in found.grades:
        first, backup = study.relays[row.first], study.relays[row.backup]
        owners = zone_of(row.first, study.relays).whole
        closed = breakers_of(row.backup, study.relays) | {first.at}
        least, nearest = math.inf, None
        for state in study.states:
            if not {row.first, row.backup} <= set(state.views):
                continue
            for fault in everywhere[state.name]:
                if not within(fault, owners, closed):
                    continue
                late = float(operate_times(backup, own(backup, fault, state.forms.machines)[0]))
                early = float(operate_times(first, own(first, fault, state.forms.machines)[0]))
                if math.isinf(late):
                    continue
                spare = late - early - (0.2 * early + 0.1 + 0.02 + 0.03)
                if spare < least:
                    least, nearest = spare, (early, late)
        assert nearest is not None
        assert row.margin - row.required == pytest.approx(least, abs=1e-6)
        assert row.margin == pytest.approx(row.backup_time - row.time)
        assert row.required == pytest.approx(0.2 * row.time + 0.15)


def test_the_resistors_outlast_their_relays(
    studied: tuple[States, Settings], everywhere: dict[str, list[Fault]]
) -> None:
    study, found = studied
    assert [(row.relay, row.neutral) for row in found.withstand] == [
        ("T1-neutral", "NER-A"),
        ("T2-neutral", "NER-B"),
    ]
    for row in found.withstand:
        relay, owners = study.relays[row.relay], zone_of(row.relay, study.relays).whole
        closed = breakers_of(row.relay, study.relays)
        worst, left = 0.0, 0.0
        for state in study.states:
            if row.relay not in state.views:
                continue
            for fault in everywhere[state.name]:
                size, machine = own(relay, fault, state.forms.machines)
                through = fault.neutrals[machine].get(row.neutral, 0.0)
                if fault.ohm in DEMANDED and within(fault, owners, closed):
                    worst = max(worst, through**2 * (float(operate_times(relay, size)) + 0.1))
                seen = any(
                    own(view.relay, fault, state.forms.machines)[0] >= (view.relay.pickup.primary or 0)
                    for view in state.views.values()
                )
                left = left if seen else max(left, through)
        assert row.current**2 * row.time == pytest.approx(worst, rel=1e-6)
        assert row.rated == pytest.approx(800, rel=1e-9)
        assert row.allowed == pytest.approx(10 * (800 / row.current) ** 2)
        assert left <= row.stays * (1 + 1e-9)
        assert row.stays == pytest.approx(float(relay.pickup.primary or 0), rel=1e-6)  # it alone sees main


def test_the_share_of_a_winding_is_that_of_stepping_along_it(studied: tuple[States, Settings]) -> None:
    """A fault x of the turns from the star point: x E over R + j x X, X from a fault at the terminals."""
    study, found = studied
    covers = {cover.winding: cover for row in found.sees for cover in row.covers}
    assert set(covers) == {"T1.lv", "T2.lv"}
    for winding, cover in covers.items():
        unit, relay = winding.removesuffix(".lv"), study.relays[f"{winding.removesuffix('.lv')}-neutral"]
        warm = WARM if cover.resistors == "hot" else 1
        ohm, volt = warm * 11000 / math.sqrt(3) / 800, 11000 / math.sqrt(3)
        state = next(each for each in study.states if each.name == cover.state)
        referee = Referee(study.case, cover.state, WARM, points=5)
        spot = Spot(f"{unit}@main-{'a' if unit == 'T1' else 'b'}", winding)
        solution = referee.solve(spot, "line-ground", 0, state.forms.machines[-1], cover.resistors == "hot")
        drawn = looked(solution, relay)[0]
        reactance = math.sqrt(max((volt / drawn) ** 2 - ohm**2, 0))
        steps = np.linspace(0, 1, 20001)[1:]
        current = steps * volt / np.abs(ohm + 1j * steps * reactance)
        uncovered = float(steps[np.flatnonzero(current >= float(relay.pickup.primary or 0))[0]])
        assert 1 - cover.share == pytest.approx(uncovered, abs=1e-4)


def test_places_no_relay_sees_are_those_of_all_faults_one_by_one(
    studied: tuple[States, Settings], everywhere: dict[str, list[Fault]]
) -> None:
    study, found = studied
    for state in study.states:
        blind = {
            (fault.spot.place, fault.spot.opened, fault.kind)
            for fault in everywhere[state.name]
            if fault.ohm in DEMANDED
            and not any(
                own(view.relay, fault, state.forms.machines)[0] >= (view.relay.pickup.primary or 0)
                for view in state.views.values()
            )
        }
        told = {(p.place, p.opened, p.kind) for p in found.blind_places if p.state == state.name}
        assert told == blind
        assert any(place == "north-lv" for place, _, _ in told)
