"""Proposed settings against a search of every setting, and what is said where none exist."""

from __future__ import annotations

import math
from itertools import product
from pathlib import Path

import numpy as np
import pytest

from seqfault.case.reader import case_from_tree, read_case
from seqfault.case.records import Case
from seqfault.case.rewriting import rewritten
from seqfault.case.text import parse_text
from seqfault.equations.relay_curves import operate_time
from seqfault.errors import RequestError
from seqfault.studies.settings import judge, study_settings
from seqfault.studies.settings_grades import grades
from seqfault.studies.settings_proposal import changes_of, propose_settings
from seqfault.studies.settings_states import study_states
from seqfault.studies.settings_windows import Setting, resettled
from tests.studies.setting_plants import Referee, measured

RADIAL = Path(__file__).with_name("radial.toml")
WARM = 1.4  # 400 K at 0.001 per K


def radial(*changes: tuple[str, str]) -> Case:
    text = RADIAL.read_text(encoding="utf-8")
    for old, new in changes:
        assert old in text, old
        text = text.replace(old, new)
    return case_from_tree(parse_text(text.encode(), "radial.toml"), "radial.toml")


FINE = 'step = "0.1 In", least = "0.1 In", greatest = "1 In"'
BOARD = 'step = "0.05 In", least = "0.1 In", greatest = "1 In"'
COARSE = (
    (FINE, 'step = "0.2 In", least = "0.1 In", greatest = "0.9 In"'),
    (BOARD, 'step = "0.1 In", least = "0.1 In", greatest = "0.5 In"'),
    ('pickup = "0.3 In"', 'pickup = "0.5 In"'),
    ('pickup = "50 A"', 'pickup = "40 A"'),
    ('pickup = "10 A"', 'pickup = "15 A"'),
)


def faults(case: Case, owners: set[str]) -> list[dict[str, float]]:
    """What each relay sees of every fault of ``owners`` by full solutions, resistance stepped."""
    study = study_states(case, 3)
    rows = []
    for state in study.states:
        referee = Referee(case, state.name, WARM)
        for spot in state.forms.spots:
            if spot.owner not in owners or spot.opened in ("N@main", "S@main"):
                continue
            for kind in ("line-ground", "line-line-ground"):
                for hot in (False, True):
                    for ohm in (0.0, 4.0, 10.0, 40.0, 90.0, 200.0, 400.0, 800.0):
                        solution = referee.solve(spot, kind, ohm, "subtransient", hot)
                        seen = {name: measured(solution, relay) for name, relay in study.relays.items()}
                        rows.append({**seen, "ohm": ohm, "owner": spot.owner})  # type: ignore[dict-item]
    return rows


@pytest.mark.parametrize(
    ("front", "behind"),
    [
        ("IEC standard inverse", "IEC standard inverse"),
        ("IEC extremely inverse", "IEC very inverse"),
        ("IEC standard inverse", "IEEE moderately inverse"),
    ],
)
def test_no_search_of_all_settings_finds_a_smaller_sum_of_times(front: str, behind: str) -> None:
    text = 'curve = "IEC standard inverse"\nmultiplier = '
    curves = (
        (f"{text}0.2", f'curve = "{front}"\nmultiplier = 0.2'),
        (f"{text}0.3", f'curve = "{behind}"\nmultiplier = 0.3'),
    )
    case = radial(*COARSE, *curves)
    study = study_states(case, 3)
    proposal = propose_settings(study)
    assert proposal.met
    assert proposal.whole
    zones = {"N-earth": {"N", "north"}, "S-earth": {"S", "south"}, "board-earth": {"main", "T1.lv"}}
    all_faults = faults(case, {"N", "north", "S", "south", "main", "T1.lv"})
    least = {
        name: min(f[name] for f in all_faults if f["owner"] in zone and f["ohm"] <= 10)
        for name, zone in zones.items()
    }
    backed = min(f["board-earth"] for f in all_faults if f["ohm"] <= 10)
    most = {
        name: max(f[name] for f in all_faults if f["owner"] not in zones[name] and f["ohm"] == 0)
        for name in ("N-earth", "S-earth")
    }
    curve = {"N-earth": front, "S-earth": "definite", "board-earth": behind}
    pickups = {
        "N-earth": [5 + 10 * k for k in range(5)],
        "S-earth": [5 + 10 * k for k in range(5)],
        "board-earth": [20 + 20 * k for k in range(5)],
    }
    multipliers = np.round(np.arange(1, 21) * 0.05, 10)
    times = {"N-earth": multipliers[:4], "S-earth": 0.1 + 0.05 * np.arange(3), "board-earth": multipliers}

    def goes(name: str, pickup: float) -> bool:
        seen = least[name] if name != "board-earth" else min(least[name], backed)
        return seen >= 1.5 * pickup and pickup >= 1.3 * most.get(name, 0)

    def graded(first: str, p1: float, t1: float, p2: float, t2: float) -> bool:
        rows = [f for f in all_faults if f["owner"] in zones[first]]
        early = operate_time(curve[first], np.array([f[first] for f in rows]) / p1, t1)
        late = operate_time(curve["board-earth"], np.array([f["board-earth"] for f in rows]) / p2, t2)
        acts = np.isfinite(late)
        wanted = (1.2 * early + 0.15)[acts]  # 2 x 5 % + 10 %, 0.1 + 0.02 + 0.03 s
        if (late[acts] < wanted - 1e-9).any():
            return False
        settings = {first: Setting(p1, t1), "board-earth": Setting(p2, t2)}  # between the steps
        return grades(resettled(study, settings), "board-earth", first, ()).verdict != "fail"

    best = math.inf
    for p2, t2 in product(pickups["board-earth"], times["board-earth"]):
        if not goes("board-earth", p2):
            continue
        total = float(operate_time(curve["board-earth"], least["board-earth"] / p2, t2))
        for first in ("N-earth", "S-earth"):
            fronts = sorted(
                (float(operate_time(curve[first], least[first] / p1, t1)), p1, t1)
                for p1, t1 in product(pickups[first], times[first])
                if goes(first, p1)
            )
            own = math.inf
            for time, p1, t1 in fronts:
                if total + time >= best:
                    break
                if graded(first, p1, t1, p2, t2):
                    own = time
                    break
            total += own
        best = min(best, total)
    assert math.isfinite(best)
    assert proposal.total <= best * (1 + 1e-4)  # a line of other sections differs by some millionths
    assert proposal.total == pytest.approx(best, rel=1e-4)


def test_the_proposal_meets_every_demand_when_studied_afresh_from_the_written_file(tmp_path: Path) -> None:
    study = study_states(read_case(RADIAL), 3)
    proposal = propose_settings(study)
    assert proposal.met
    path = tmp_path / "out.toml"
    path.write_bytes(rewritten(RADIAL.read_bytes(), str(path), changes_of(study, proposal)))
    fresh, found = study_settings(read_case(path), 3)
    assert found.verdict == proposal.proof.verdict  # type: ignore[union-attr]
    for row in proposal.rows:
        relay = fresh.relays[row.relay]
        assert relay.pickup.primary == pytest.approx(row.setting.pickup)
        assert (relay.delay if relay.curve == "definite" else relay.multiplier) == row.setting.time
    assert "# as found" in path.read_text(encoding="utf-8")


def test_no_time_of_the_proposal_can_be_a_step_shorter() -> None:
    study = study_states(read_case(RADIAL), 3)
    proposal = propose_settings(study)
    own = {row.relay: row.setting for row in proposal.rows}
    for row in proposal.rows:
        if not row.time_binds.startswith("it waits"):
            continue
        time = round(float(row.setting.time or 0) - 0.05, 10)
        shorter = {**own, row.relay: Setting(row.setting.pickup, time)}
        failed = [g for g in judge(resettled(study, shorter)).grades if g.verdict == "fail"]
        assert {g.backup for g in failed} == {row.relay}


def test_definite_pickups_are_the_highest_that_go() -> None:
    study = study_states(read_case(RADIAL), 3)
    proposal = propose_settings(study)
    own = {row.relay: row.setting for row in proposal.rows}
    row = next(row for row in proposal.rows if row.relay == "S-earth")
    assert row.setting.pickup is not None
    higher = {**own, "S-earth": Setting(row.setting.pickup + 5, row.setting.time)}
    assert judge(resettled(study, higher)).verdict == "fail"
    assert "board-earth" in row.pickup_binds


def test_kept_relays_stay_as_they_are() -> None:
    study = study_states(read_case(RADIAL), 3)
    proposal = propose_settings(study, ["N-earth"])
    row = next(row for row in proposal.rows if row.relay == "N-earth")
    assert row.setting == row.was == Setting(10.0, 0.2)
    assert proposal.met
    assert proposal.total > propose_settings(study).total


def test_contradictory_demands_name_both_conditions() -> None:
    case = radial(("see = 1.5", "see = 12"), ("keep_still = 1.3", "keep_still = 4"))
    proposal = propose_settings(study_states(case, 3))
    assert proposal.proof is None
    assert not proposal.met
    text = next(text for text in proposal.contradictions if text.startswith("S-earth"))
    assert "so that it keeps still for line-ground at" in text
    assert "so that it sees line-line-ground through 10 ohm" in text


def test_a_scale_without_a_setting_in_the_window_says_so() -> None:
    case = radial(
        (FINE, 'step = "2 In", least = "0.05 In", greatest = "10 In"'),
        ('pickup = "10 A"', 'pickup = "2.5 A"'),
        ('pickup = "0.3 In"', 'pickup = "2.5 A"'),
    )
    proposal = propose_settings(study_states(case, 3))
    assert any("its scale has no pickup between" in text for text in proposal.contradictions)


def test_a_backup_whose_scale_is_too_short_says_behind_whom() -> None:
    full = f"{{ pickup = {{ {BOARD} }}, multiplier = {{ step = 0.05, least = 0.05, greatest = 1 }} }}"
    short = "{ multiplier = { step = 0.01, least = 0.01, greatest = 0.05 } }"
    case = radial((f"multiplier = 0.3\nsteps = {full}", f"multiplier = 0.05\nsteps = {short}"))
    proposal = propose_settings(study_states(case, 3))
    assert proposal.proof is None
    assert "board-earth can be set to no time that is long enough behind" in proposal.contradictions[0]


def test_a_neutral_that_does_not_last_is_told_after_the_search() -> None:
    case = radial(('duration = "10 s"', 'duration = "0.2 s"'))
    proposal = propose_settings(study_states(case, 3))
    assert not proposal.met
    assert any(text.startswith("NER does not last until board-earth") for text in proposal.contradictions)


def test_what_cannot_be_asked() -> None:
    study = study_states(read_case(RADIAL), 2)
    with pytest.raises(RequestError, match='no relay has this name; "N-earth"'):
        propose_settings(study, ["N"])
    text = RADIAL.read_text(encoding="utf-8") + "\n[scenarios.weak.relays.N-earth]\nmultiplier = 0.5\n"
    own = case_from_tree(parse_text(text.encode(), "radial.toml"), "radial.toml")
    with pytest.raises(RequestError, match='scenario "weak" gives it settings of its own'):
        propose_settings(study_states(own, 2))
    opened = radial(("multiplier = 0.2\n", ""))
    with pytest.raises(RequestError, match="a setting of this relay is open"):
        propose_settings(study_states(opened, 2), ["N-earth"])
    assert propose_settings(study_states(opened, 2)).met
