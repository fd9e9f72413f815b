"""The earth-fault setting study: do relays see, keep still and grade, and what does none of them see?"""

from __future__ import annotations

from collections.abc import Callable

import msgspec

from seqfault.case.records import Case
from seqfault.errors import quoted
from seqfault.studies.settings_blind import BlindPlace, BlindRelay, blind_places, blind_relays
from seqfault.studies.settings_doubts import doubts_of
from seqfault.studies.settings_grades import Grades, grades, pairs
from seqfault.studies.settings_places import POINTS
from seqfault.studies.settings_screens import Screen, screens
from seqfault.studies.settings_sees import Sees, sees
from seqfault.studies.settings_states import States, study_states, zone_of
from seqfault.studies.settings_still import Still, keeps_still
from seqfault.studies.settings_verdicts import Verdict, worst
from seqfault.studies.settings_withstand import Withstand, withstands

NO_LEAST = "demands, least: no state is declared as the one in which the least is to be seen"


class Settings(msgspec.Struct, frozen=True, eq=False):
    """Everything the study found; ``verdict`` the worst of all.

    ``places`` how many places were studied in the state with most; ``states`` by name.
    """

    states: tuple[str, ...]
    places: int
    sees: tuple[Sees, ...]
    still: tuple[Still, ...]
    grades: tuple[Grades, ...]
    withstand: tuple[Withstand, ...]
    screens: tuple[Screen, ...]
    blind_places: tuple[BlindPlace, ...]
    blind_relays: tuple[BlindRelay, ...]
    verdict: Verdict


def study_settings(
    case: Case, points: int = POINTS, done: Callable[[int], None] | None = None
) -> tuple[States, Settings]:
    """Study the relays of ``case`` in all its states, with ``points`` places along each line.

    ``done`` is told of each state.

    Raises ``RequestError`` for a case without relays, ``CaseError`` where a state makes no network.
    """
    study = study_states(case, points, done)
    return study, judge(study)


def judge(study: States) -> Settings:
    """The verdicts on all relays of ``study``."""
    doubts = {name: relay_doubts(study, name) for name in study.relays}
    unstated = () if study.case.demands.least else (NO_LEAST,)
    active = [name for name, relay in study.relays.items() if not relay.out]
    seen = tuple(each for name in active for each in sees(study, name, (*doubts[name], *unstated)))
    still = tuple(keeps_still(study, name, doubts[name]) for name in active)
    graded = tuple(
        grades(study, backup, first, tuple(dict.fromkeys(doubts[backup] + doubts[first])))
        for backup, first in pairs(study)
    )
    patience = tuple(withstands(study, doubts))
    metal = tuple(screens(study, doubts))
    blind = blind_places(study)
    verdicts: list[Verdict] = [each.verdict for each in seen]
    verdicts += [each.verdict for each in still]
    verdicts += [each.verdict for each in graded]
    verdicts += [each.verdict for each in patience]
    verdicts += [each.verdict for each in metal]
    if any(place.guarded for place in blind):
        verdicts.append("fail")
    return Settings(
        states=tuple(state.name for state in study.states),
        places=max(len(state.forms.spots) for state in study.states),
        sees=seen,
        still=still,
        grades=graded,
        withstand=patience,
        screens=metal,
        blind_places=blind,
        blind_relays=blind_relays(study),
        verdict=worst(tuple(verdicts)),
    )


def method(study: States, found: Settings) -> tuple[str, ...]:
    """What the study itself assumes, as far as it matters for these relays."""
    relays = [relay for relay in study.relays.values() if not relay.out]
    out = [
        "faults to earth: line-ground and line-line-ground; the resistance lies between the faulted phase,"
        " or the two joined phases, and earth (common practice)",
        "machines by the relay's own operate time: subtransient reactance below 0.1 s, transient up to 1 s,"
        " synchronous above where stated; motors feed the subtransient state alone (common practice)",
        "a relay must keep still in all of these states of the machines, whatever its own time",
    ]
    if any(relay.direction for relay in relays):
        out.append(
            "a directional relay acts where its current lies within 90 degrees either side of its"
            " characteristic angle ahead of what polarises it, however small that is, and keeps still where"
            " nothing polarises it (common practice)"
        )
    if any(relay.polarisation in study.states[0].sites.stars for relay in relays):
        out.append("the current of a star point that polarises counts from earth into the star point")
    if any(relay.measures == "residual" for relay in relays):
        out.append(
            "errors of residually connected current transformers: each of the three loses at most its"
            " composite error, all in one sense (IEC 61869-2; steady state, no remanence)"
        )
    if any(each.covers for each in found.sees):
        out.append(
            "cover of a winding: its voltage and its impedance in proportion to the turns, the winding's"
            " reactance such that a fault at its terminals draws what was solved"
        )
    bare = [n for n, line in study.case.lines.items() if line.screen_current is None and not line.out]
    if found.screens:
        out.append(
            "screens of cables: all of 3I0 into the fault flows in the screen of the faulted cable and"
            " heats it without loss (IEC 60949, adiabatic)"
        )
    if bare:
        more = f" and {len(bare) - 6} more" if len(bare) > 6 else ""
        shown = ", ".join(quoted(name) for name in bare[:6]) + more
        out.append(f"lines {shown}: screen_current not stated, so what a screen withstands was not checked")
    return tuple(out)


def asked(study: States) -> tuple[str, ...]:
    """What the demands ask, and in which states."""
    demands = study.states[0].protection.demands
    rest = [state.name for state in study.states if state.name not in demands.least]
    ohms = ", ".join(f"{ohm:g}" for ohm in demands.fault_resistances)
    seen = (
        f"to see {demands.see:g} times the pickup through {ohms} ohm in the states"
        f" {', '.join(demands.least)}" + (f"; not asked in {', '.join(rest)}" if rest else "")
    )
    share = f"(2 × {100 * demands.relay_error:g} % + {100 * demands.ct_error:g} %)"
    return (
        seen,
        f"to keep still, in all states: a pickup of {demands.keep_still:g} times the most elsewhere",
        f"to wait, in all states: {share} of the time of the relay in front, and its breaker's,"
        f" {demands.overshoot:g} s overshoot and {demands.safety:g} s safety",
        f"tight is what holds by less than {100 * demands.tight:g} %",
    )


def relay_doubts(study: States, name: str) -> tuple[str, ...]:
    """What the earth currents that ``name`` sees rest on and nobody has stated."""
    zone = zone_of(name, study.relays).whole
    out: dict[str, None] = {}
    for state in study.states:
        probe = state.forms.probes[0][0]
        networks = {
            label for spot, label in zip(probe.spots, probe.galvanic, strict=True) if spot.owner in zone
        }
        if name in state.at_home:
            networks.add(state.at_home[name])
        out |= {
            doubt.text: None
            for doubt in doubts_of(state.network.model, state.case)
            if doubt.networks & networks
        }
    return tuple(out)
