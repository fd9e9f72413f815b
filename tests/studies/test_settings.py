"""The setting study against full solutions, stepped finely: what relays see, up to where, and when."""

from __future__ import annotations

import math

import numpy as np
import pytest

from seqfault.case.records import Case
from seqfault.equations.current_transformers import residual_error
from seqfault.errors import RequestError
from seqfault.studies.relays import Relay, operate_times
from seqfault.studies.settings import Settings, study_settings
from seqfault.studies.settings_sees import Sees
from seqfault.studies.settings_states import States, zone_of
from tests.studies.setting_plants import RING, Referee, case_of, measured, ohms, sampled

WARM = 1.6  # 600 K at 0.001 per K
SOUND = "see = 1.5"


@pytest.fixture(scope="module")
def studied() -> tuple[States, Settings]:
    return study_settings(case_of(), points=3)


@pytest.fixture(scope="module")
def referees() -> dict[str, Referee]:
    case = case_of()
    return {name: Referee(case, name, WARM) for name in ("base", "open")}


def owned(study: States, state: int, owners: frozenset[str], at: str) -> list[int]:
    forms = study.states[state].forms
    ends = {at, "E@main", "E@east", "X@east"} if at in ("NER", "T1@main") else {at}  # and whom they back up
    return [
        case
        for case in range(len(forms.spot))
        if forms.spots[forms.spot[case]].owner in owners
        and forms.spots[forms.spot[case]].opened not in ends
    ]


def by_time(relay: Relay, sizes: list[float], machines: tuple[str, ...]) -> float:
    """The size whose own time fits the reactance it was solved with."""
    for size, machine in zip(sizes[:-1], machines, strict=False):
        if operate_times(relay, size) <= {"subtransient": 0.1, "transient": 1.0}[machine]:
            return size
    return sizes[-1]


def test_every_relay_sees_what_full_solutions_give(
    studied: tuple[States, Settings], referees: dict[str, Referee]
) -> None:
    study, _ = studied
    some = 0
    for state in study.states:
        referee = referees[state.name]
        for case, spot, kind, hot in sampled(state, 7):
            for ohm in (0.0, 9.0, 170.0):
                for m, machine in enumerate(state.forms.machines):
                    solution = referee.solve(spot, kind, ohm, machine, hot)
                    top = max(solution.largest, 1.0)
                    for view in state.views.values():
                        got = float(view.sizes(ohms(ohm))[m, case, 0])
                        wanted = measured(solution, view.relay)
                        size = top if view.relay.unit == "A" else 6351
                        assert got == pytest.approx(wanted, rel=1e-7, abs=1e-9 * size), (
                            view.relay.name,
                            str(spot),
                            kind,
                            ohm,
                            machine,
                            hot,
                        )
                        some += got > 0
    assert some > 500


def test_a_fault_asked_for_alone_is_the_same_to_some_millionths(studied: tuple[States, Settings]) -> None:
    state = studied[0].states[0]
    alone = Referee(case_of(), "base", WARM, alone=True)
    view = state.views["T1-neutral"]
    for case, spot, kind, hot in sampled(state, 11):
        wanted = measured(alone.solve(spot, kind, 4.0, "transient", hot), view.relay)
        assert float(view.sizes(ohms(4.0))[1, case, 0]) == pytest.approx(wanted, rel=1e-4, abs=1e-6)


def test_machines_are_those_of_the_state(studied: tuple[States, Settings]) -> None:
    base, opened = studied[0].states
    assert base.forms.machines == ("subtransient", "transient", "synchronous")
    assert opened.forms.machines == ("subtransient",)  # neither generator nor motor


def test_the_least_seen_is_the_least_of_all_faults_solved_one_by_one(
    studied: tuple[States, Settings], referees: dict[str, Referee]
) -> None:
    study, found = studied
    for row in (r for r in found.sees if r.relay in ("E-main", "T1-neutral", "W-sequence")):
        zone = zone_of(row.relay, study.relays)
        owners = zone.protects if row.duty == "protects" else zone.backs_up
        relay = study.relays[row.relay]
        least = math.inf
        for k, state in enumerate(study.states):
            forms = state.forms
            for case in owned(study, k, owners, relay.at):
                spot, hot = forms.spots[forms.spot[case]], bool(forms.world[case])
                kind = ("line-ground", "line-line-ground")[int(forms.kind[case])]
                for ohm in (0.0, 12.0):
                    sizes = [
                        measured(referees[state.name].solve(spot, kind, ohm, machine, hot), relay)
                        for machine in forms.machines
                    ]
                    least = min(least, by_time(relay, sizes, forms.machines))
        assert row.current == pytest.approx(least, rel=1e-7, abs=1e-6)
        assert row.ratio == pytest.approx(least / relay.pickup.primary, rel=1e-7, abs=1e-6)
        assert row.greatest_pickup == pytest.approx(least / 1.5, rel=1e-7, abs=1e-6)


def test_the_greatest_resistance_is_where_full_solutions_fall_to_the_pickup(
    studied: tuple[States, Settings], referees: dict[str, Referee]
) -> None:
    study, found = studied
    checked = 0
    for row in found.sees:
        relay, pickup = study.relays[row.relay], study.relays[row.relay].pickup.primary
        assert pickup is not None
        for reach in row.reach[::4]:
            limit = reach.limit

            def at(ohm: float, limit: object = limit, reach: object = reach, relay: Relay = relay) -> float:
                return measured(
                    referees[limit.state].solve(  # type: ignore[attr-defined]
                        reach.spot,  # type: ignore[attr-defined]
                        limit.kind,  # type: ignore[attr-defined]
                        ohm,
                        limit.machine,  # type: ignore[attr-defined]
                        limit.resistors == "hot",  # type: ignore[attr-defined]
                    ),
                    relay,
                )

            steps = np.geomspace(1e-3, 1e5, 120)
            if math.isnan(reach.resistance):
                assert all(at(ohm) < pickup for ohm in (0.0, *steps[::8]))
                continue
            if math.isinf(reach.resistance):
                assert at(1e9) >= pickup
                continue
            checked += 1
            r = reach.resistance
            assert at(r * (1 - 1e-6)) >= pickup * (1 - 1e-9)
            assert at(r * (1 + 1e-6)) < pickup
            assert all(at(ohm) < pickup for ohm in steps[steps > r][::6])
    assert checked > 15


def test_the_most_seen_outside_is_the_most_of_all_faults_solved_one_by_one(
    studied: tuple[States, Settings], referees: dict[str, Referee]
) -> None:
    study, found = studied
    for row in (r for r in found.still if r.relay in ("X-east", "T1-neutral", "W-sequence")):
        relay = study.relays[row.relay]
        owners = zone_of(row.relay, study.relays).whole
        most = 0.0
        for k, state in enumerate(study.states):
            forms = state.forms
            everything = frozenset(spot.owner for spot in forms.spots) - owners
            for case in owned(study, k, everything, relay.at if relay.element else "-"):
                spot, hot = forms.spots[forms.spot[case]], bool(forms.world[case])
                kind = ("line-ground", "line-line-ground")[int(forms.kind[case])]
                for machine in forms.machines:
                    solution = referees[state.name].solve(spot, kind, 0.0, machine, hot)
                    most = max(most, measured(solution, relay))
        assert row.current == pytest.approx(most, rel=1e-7, abs=1e-6)
        assert row.least_pickup == pytest.approx(1.2 * most, rel=1e-7, abs=1e-6)


def test_through_currents_show_the_error_of_current_transformers() -> None:
    change = (
        'direction = "forward"\ncharacteristic_angle = "-15 deg"\npolarisation = "residual-voltage"\n',
        "",
    )
    case = case_of(RING, change, ('vt = "11 kV/110 V"\npickup = "20 A"', 'pickup = "20 A"'))
    study, found = study_settings(case, points=3)
    row = next(r for r in found.still if r.relay == "E-main")
    relay, ct = study.relays["E-main"], study.states[0].protection.transformers["ring"]
    most = 0.0
    for state in study.states:
        referee = Referee(case, state.name, WARM)
        for spot in state.forms.spots:
            if spot.owner == "E" or spot.opened == relay.at:
                continue
            for machine in state.forms.machines:
                for kind in ("three-phase", "line-line", "line-ground", "line-line-ground"):
                    solution = referee.solve(spot, kind, 0.0, machine, False)
                    t = solution.terminals
                    k = next(
                        k
                        for k in range(len(t.element))
                        if (t.element[k], t.bus[k]) == ("E", "main") and not t.side[k].startswith("from ")
                    )
                    error = float(residual_error(t.phases[:, k], 0.05, limit=ct.limit or 0))
                    most = max(most, error + abs(t.phases[:, k].sum()))
    assert row.current == pytest.approx(most, rel=1e-7)
    assert row.limit is not None
    assert row.error > 20  # more than the pickup
    assert any("errors of its current transformers alone" in text for text in row.reasons)
    assert row.verdict == "fail"


def test_the_least_margin_is_no_more_than_any_found_by_fine_steps(
    studied: tuple[States, Settings], referees: dict[str, Referee]
) -> None:
    study, found = studied
    demands = study.states[0].protection.demands
    finite = 0
    for row in found.grades:
        first, backup = study.relays[row.first], study.relays[row.backup]
        least = math.inf
        for k, state in enumerate(study.states):
            forms = state.forms
            if row.first not in state.views or row.backup not in state.views:
                continue
            cases = owned(study, k, zone_of(row.first, study.relays).whole, backup.at)
            cases = [c for c in cases if forms.spots[forms.spot[c]].opened != first.at]
            for case in cases[:: max(1, len(cases) // 7)]:
                spot, hot = forms.spots[forms.spot[case]], bool(forms.world[case])
                kind = ("line-ground", "line-line-ground")[int(forms.kind[case])]
                for ohm in (0.0, *np.geomspace(0.05, 1500, 18)):
                    solved = [
                        referees[state.name].solve(spot, kind, ohm, machine, hot)
                        for machine in forms.machines
                    ]
                    early, late = (
                        float(
                            operate_times(
                                relay, by_time(relay, [measured(s, relay) for s in solved], forms.machines)
                            )
                        )
                        for relay in (first, backup)
                    )
                    if math.isfinite(late):
                        spare = -math.inf if math.isinf(early) else late - early
                        spare -= 0 if math.isinf(early) else demands.margin(early, first.breaker_time)
                        least = min(least, spare)
        assert row.margin - row.required <= least + 1e-6 or row.margin == -math.inf
        if math.isfinite(row.margin):
            finite += 1
            limit = row.limit
            assert limit is not None
            spot = next(
                s
                for s in study.states[0].forms.spots + study.states[1].forms.spots
                if (s.place, s.opened) == (limit.place, limit.opened)
            )
            machines = next(s.forms.machines for s in study.states if s.name == limit.state)
            solved = [
                referees[limit.state].solve(
                    spot, limit.kind, limit.resistance, machine, limit.resistors == "hot"
                )
                for machine in machines
            ]
            times = [
                float(operate_times(r, by_time(r, [measured(s, r) for s in solved], machines)))
                for r in (first, backup)
            ]
            assert row.time == pytest.approx(times[0], rel=1e-6)
            assert row.backup_time == pytest.approx(times[1], rel=1e-6)
            assert row.margin == pytest.approx(times[1] - times[0], rel=1e-6)
            assert row.required == pytest.approx(demands.margin(row.time, first.breaker_time))
    assert finite


def test_a_backup_that_sees_more_than_the_first_acts_alone(studied: tuple[States, Settings]) -> None:
    row = next(r for r in studied[1].grades if (r.backup, r.first) == ("T1-neutral", "E-main"))
    if row.margin == -math.inf:
        assert row.verdict == "fail"
        assert "the backup acts alone" in row.reasons[0]


def settings_of(case: Case) -> tuple[States, Settings]:
    return study_settings(case, points=2)


def one(found: Settings, relay: str, duty: str = "protects") -> Sees:
    return next(row for row in found.sees if (row.relay, row.duty) == (relay, duty))


@pytest.mark.parametrize(("see", "verdict"), [("1.0", "pass"), (None, "tight"), ("over", "fail")])
def test_pass_tight_and_fail_by_the_ratio(
    studied: tuple[States, Settings], see: str | None, verdict: str
) -> None:
    ratio = one(studied[1], "X-east").ratio
    assert ratio > 1.2
    wanted = {"1.0": "1.0", None: f"{ratio / 1.05:.6f}", "over": f"{ratio * 1.001:.6f}"}[see]
    _, found = study_settings(case_of(RING, (SOUND, f"see = {wanted}")), points=3)
    assert one(found, "X-east").verdict == verdict


def test_without_a_least_state_nothing_that_must_be_seen_is_proven() -> None:
    _, found = study_settings(case_of(RING, ('least = ["base", "open"]\n', "")), points=2)
    assert {row.verdict for row in found.sees} <= {"fail", "not proven"}
    assert any("no state is declared" in text for row in found.sees for text in row.doubts)


@pytest.mark.parametrize(
    ("old", "new", "said"),
    [
        ("z0_over_z1 = 0.9\n", "", 'transformer "T1": z0 not stated'),
        (
            'voltage = "11 kV", neutral = "NER"',
            'voltage = "11 kV"',
            'transformer "T1": lv neutral not stated',
        ),
        ('c1 = "0.3 uF/km"\nc0 = "0.3 uF/km"\n', "", 'line "W": c0 not stated'),
        ('neutral = "isolated"\n', "", 'generator "G": neutral not stated'),
    ],
)
def test_what_rests_on_an_assumption_is_not_proven_and_says_so(old: str, new: str, said: str) -> None:
    text = RING
    if "NER" in old:
        text = RING.partition("[relays.T1-neutral]")[0] + "[demands]" + RING.partition("[demands]")[2]
    _, found = study_settings(case_of(text, (old, new)), points=2)
    row = next(r for r in found.still if r.relay == "X-east")
    assert row.verdict in ("not proven", "fail")
    assert any(text.startswith(said) for text in row.doubts)
    assert found.verdict in ("not proven", "fail")


def test_the_low_side_of_another_transformer_does_not_cast_doubt() -> None:
    _, found = study_settings(case_of(RING, ("z0_over_z1 = 0.95\n", "")), points=2)
    assert not any(row.doubts for row in found.still)


def test_places_no_relay_sees_are_told_with_their_reason(studied: tuple[States, Settings]) -> None:
    found = studied[1]
    grid = [blind for blind in found.blind_places if blind.place == "grid"]
    low = [blind for blind in found.blind_places if blind.place == "low"]
    assert len(low) == 4  # two kinds, two states
    assert grid
    assert not any(blind.guarded for blind in grid + low)
    assert all("no relay stands in its network" in blind.reason for blind in grid + low)
    delta = {blind.relay: blind for blind in found.blind_relays}
    assert set(delta) >= {"E-main", "X-east", "T1-neutral", "board"}
    assert all(blind.places == ("low",) and 'Dyn11 of "T2"' in blind.reason for blind in delta.values())
    assert "W-phase" not in delta  # phase currents come through the delta


def test_a_pickup_above_what_flows_leaves_places_blind() -> None:
    changes = [
        (f'pickup = "{old}"', 'pickup = "900 A"') for old in ("20 A", "16 A", "60 A", "100 A", "30 A")
    ]
    changes += [('pickup = "12 A"', 'pickup = "110 A"'), ('pickup = "8 %"', 'pickup = "150 %"')]
    _, found = study_settings(case_of(RING, *changes), points=2)
    assert found.verdict == "fail"
    assert any(blind.guarded and "nearest is" in blind.reason for blind in found.blind_places)
    assert all(math.isnan(reach.resistance) for reach in one(found, "E-main").reach)


def test_a_relay_on_what_is_out_in_every_state_fails_in_words() -> None:
    case = case_of(RING, ("[lines.X]\n", "[lines.X]\nout = true\n"), ('open = ["X@west"]\n', ""))
    _, found = study_settings(case, points=2)
    row = one(found, "X-east")
    assert row.verdict == "fail"
    assert row.reasons == ('state base: "X" is out', 'state open: "X" is out')
    assert found.verdict == "fail"


def test_a_relay_on_what_no_source_reaches_fails_in_words() -> None:
    dead = '[buses]\nlost = "11 kV"\naway = "11 kV"\n'
    line = '[lines.D]\nfrom = "lost"\nto = "away"\nz1 = "0.2+j0.1 ohm"\nz0 = "1+j1 ohm"\n'
    changes = (("[buses]\n", dead), ("[lines.E]\n", f'{line}c0 = "0.1 uF"\n\n[lines.E]\n'))
    moved = ('at = "X@east"', 'at = "D@lost"'), ('protects = ["X"]', 'protects = ["D", "lost"]')
    _, found = settings_of(case_of(RING, *changes, *moved))
    row = one(found, "X-east")
    assert row.verdict == "fail"
    assert row.reasons[0] == "state base: nothing of what it protects is live"


def test_a_relay_in_service_in_one_state_alone_is_judged_there() -> None:
    off = ("[relays.X-east]\n", "[relays.X-east]\nout = true\n")
    _, found = settings_of(case_of(RING, off, ('out = ["G", "M"]', 'out = ["G", "M"]\nin = ["X-east"]')))
    row = one(found, "X-east")
    assert row.limit is not None
    assert row.limit.state == "open"
    assert "state base: it is out of service" in row.reasons
    study, found = settings_of(case_of(RING, off))
    assert not any(r.relay == "X-east" for r in found.sees)
    assert 'relay "X-east": out of service in every state, so it is not studied' in study.warnings


def test_a_relay_that_answers_for_nothing_is_not_proven() -> None:
    _, found = study_settings(case_of(RING, ('protects = ["X"]\n', "")), points=2)
    row = one(found, "X-east")
    assert (row.verdict, row.reasons) == ("not proven", ("it protects nothing and backs up no relay",))


def test_open_settings_are_not_proven_and_tell_the_range() -> None:
    fast = ('instant = { pickup = "120 A", delay = "0.05 s" }\n', "")
    _, found = study_settings(case_of(RING, ('pickup = "12 A"\n', ""), fast), points=2)
    row, still = one(found, "X-east"), next(r for r in found.still if r.relay == "X-east")
    assert row.verdict == still.verdict == "not proven"
    assert row.greatest_pickup > 0
    assert still.least_pickup > 0
    assert any("still open: X-east" in text for g in found.grades for text in g.reasons)


def test_a_case_without_relays_says_so() -> None:
    text = RING.partition("[current_transformers")[0]
    with pytest.raises(RequestError, match="no relays"):
        study_settings(case_of(text))


def test_a_neutral_relay_covers_what_its_resistor_leaves() -> None:
    """x = I |Z_n|/V where the winding's own impedance is nothing beside the resistor."""
    case = case_of(RING, ('impedance = "10 %"\n', 'impedance = "0.01 %"\n'))
    _, found = study_settings(case, points=2)
    cover = next(c for row in found.sees for c in row.covers if c.winding == "T1.lv")
    assert cover.resistors == "hot"
    assert 1 - cover.share == pytest.approx(30 * 25 * WARM / (11000 / math.sqrt(3)), rel=5e-3)
