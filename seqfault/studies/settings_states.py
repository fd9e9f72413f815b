"""The states of a setting study: networks with resistors cold and hot, their probes, what relays see."""

from __future__ import annotations

from collections.abc import Callable

import msgspec
import numpy as np
from msgspec.structs import replace

from seqfault.case.quantities import Quantity
from seqfault.case.records import Case, Neutral
from seqfault.case.relay_sites import star_point_users
from seqfault.case.scenarios import in_state
from seqfault.errors import RequestError, quoted
from seqfault.faults.network import Network
from seqfault.model.assumptions import Assumption
from seqfault.model.coils import ARC_SUPPRESSION, impedance_of
from seqfault.model.elements import Bools, Ints
from seqfault.studies.neutral import duty_of, hot_ohms
from seqfault.studies.protection import Protection, protection
from seqfault.studies.relays import Relay
from seqfault.studies.settings_places import POINTS, spots
from seqfault.studies.settings_probe import Probe, Sites, flat, machine_states, probe
from seqfault.studies.settings_view import Forms, View, forms_of, sites_of, view_of


class State(msgspec.Struct, frozen=True, eq=False):
    """One operating state; ``views`` of the relays that see anything in it.

    ``network`` with resistors cold; ``at_home`` the metallic network (a label of its model) that each
    relay stands in. ``hot`` tells whether resistors were studied hot too.
    """

    name: str
    case: Case
    network: Network
    protection: Protection
    sites: Sites
    forms: Forms
    views: dict[str, View]
    at_home: dict[str, int]
    hot: bool


class States(msgspec.Struct, frozen=True, eq=False):
    """All states, and what was assumed and said while they were made."""

    case: Case
    states: tuple[State, ...]
    assumed: tuple[str, ...]

    @property
    def relays(self) -> dict[str, Relay]:
        """The relays of the file, in its order, each as in the first state in which it is in service."""
        found: dict[str, Relay] = {}
        for state in self.states:
            for name, relay in state.protection.relays.items():
                if name not in found or (found[name].out and not relay.out):
                    found[name] = relay
        return found

    @property
    def assumptions(self) -> tuple[str, ...]:
        """All that was assumed, of the networks and of the protection, each once."""
        found: list[Assumption] = []
        for state in self.states:
            found += [*state.network.model.assumptions, *state.protection.assumptions]
        return tuple(dict.fromkeys([*map(str, found), *self.assumed]))

    @property
    def warnings(self) -> tuple[str, ...]:
        """Warnings of all states, those that not every state has with its name."""
        out = [
            f"relay {quoted(name)}: out of service in every state, so it is not studied"
            for name, relay in self.relays.items()
            if relay.out
        ]
        for state in self.states:
            for text in (*state.network.model.warnings, *state.protection.warnings):
                everywhere = all(
                    text in (*each.network.model.warnings, *each.protection.warnings)
                    for each in self.states
                )
                out.append(text if everywhere else f"state {state.name}: {text}")
        return tuple(dict.fromkeys(out))


def study_states(case: Case, points: int = POINTS, done: Callable[[int], None] | None = None) -> States:
    """The states of ``case`` with ``points`` places along each line; ``done`` is told of each state.

    Raises ``RequestError`` for a case without relays, ``CaseError`` where a state makes no network.
    """
    if not case.relays:
        raise RequestError("this case has no relays; state them in [relays.NAME], see docs/case-format.md")
    assumed: dict[str, None] = {}
    states = []
    for k, name in enumerate(("base", *case.scenarios)):
        state, said = _state(in_state(case, name), points)
        states.append(state)
        assumed |= dict.fromkeys(said)
        if done is not None:
            done(k)
    return States(case, tuple(states), tuple(assumed))


def _state(case: Case, points: int) -> tuple[State, list[str]]:
    guarded = protection(case)
    assert guarded is not None
    flat_case, left_out = flat(case)
    said = list(left_out)
    warm, more = warmed(flat_case)
    said += more
    cold = Network(flat_case)
    places = tuple(spots(flat_case, points))
    users = star_point_users(flat_case)
    bus_of = {name: own[0].bus for name, own in users.items()}
    sites = sites_of(guarded.relays, bus_of)
    rated = tuple(n for n, record in flat_case.neutrals.items() if n in bus_of and not record.out)
    sites = replace(sites, stars=tuple(dict.fromkeys([*sites.stars, *rated])))
    machines = machine_states(flat_case)
    first = probe(cold, places, sites)
    worlds = [first]
    if warm is not None:
        at = _near(flat_case, warm, first, sites)
        hot = probe(Network(warm), [first.spots[k] for k in at.tolist()], sites, (0,))
        worlds.append(first.with_zero_sequence_of(hot, at))
    probes = [worlds]
    for machine in machines[1:]:
        own = probe(Network(flat_case, machine=machine), first.spots, sites, (1, 2))
        probes.append([own.with_zero_sequence_of(world) for world in worlds])
    forms = forms_of(case.state, machines, probes)
    views, at_home = {}, {}
    model = cold.model
    for name, relay in guarded.relays.items():
        bus = relay.bus or bus_of.get(relay.star, "")
        if bus in model.index:
            at_home[name] = int(model.galvanic[model.node[model.index[bus]]])
        if not (relay.out or relay.blind):
            views[name] = view_of(relay, forms, sites, _units(flat_case, relay))
    state = State(
        name=case.state,
        case=flat_case,
        network=cold,
        protection=guarded,
        sites=sites,
        forms=forms,
        views=views,
        at_home=at_home,
        hot=warm is not None,
    )
    return state, said


def _near(case: Case, warm: Case, first: Probe, sites: Sites) -> Ints:
    """The places (k,) of ``first`` whose faults send a current through a neutral heated in ``warm``."""
    heated = [
        k
        for k, name in enumerate(sites.stars)
        if name in case.neutrals and warm.neutrals[name] is not case.neutrals[name]
    ]
    return np.flatnonzero((first.star[:, heated] != 0).any(axis=1))


def warmed(case: Case) -> tuple[Case | None, list[str]]:
    """``case`` with its neutral resistors hot, None where it has none; what is assumed of them."""
    changed: dict[str, Neutral] = {}
    said = []
    for name, record in case.neutrals.items():
        if record.out or record.kind == ARC_SUPPRESSION:
            continue
        cold, duty = impedance_of(record), duty_of(record)
        hot = hot_ohms(record, cold, duty)
        if hot == cold:
            continue
        said += [f"neutral {quoted(name)}: {text.partition('; --')[0]}" for text in duty.assumed]
        changed[name] = replace(
            record,
            resistance=_ohm(hot.real),
            reactance=_ohm(hot.imag),
            parallel_resistance=None,
            current=None,
            voltage=None,
            ratio=None,
        )
    if not changed:
        return None, said
    return replace(case, neutrals={**case.neutrals, **changed}), said


def _ohm(value: float) -> Quantity:
    return Quantity(value, "impedance", f"{value:g} ohm")


def _units(case: Case, relay: Relay) -> int:
    """Identical units whose star points, each with a relay, share the name ``relay`` stands at."""
    users = star_point_users(case).get(relay.star, ())
    unit = case.transformers.get(users[0].element) if len(users) == 1 else None
    return unit.count if unit is not None and users[0].neutral == "solid" else 1


class Zone(msgspec.Struct, frozen=True):
    """What a relay answers for: records it ``protects``, and those of the relays it ``backs_up``."""

    protects: frozenset[str]
    backs_up: frozenset[str]

    @property
    def whole(self) -> frozenset[str]:
        """Both."""
        return self.protects | self.backs_up


def zone_of(name: str, relays: dict[str, Relay]) -> Zone:
    """The zone of the relay ``name``; whom those it backs up back up themselves counts too."""
    own = frozenset(relays[name].protects)
    behind = {owner for other in _behind(name, relays) for owner in relays[other].protects}
    return Zone(own, frozenset(behind) - own)


def _behind(name: str, relays: dict[str, Relay]) -> tuple[str, ...]:
    """A relay and all that it backs up, those of the others too."""
    met: dict[str, None] = {}
    ahead = [name]
    while ahead:
        other = ahead.pop()
        if other not in met and other in relays:
            met[other] = None
            ahead += relays[other].backs_up
    return tuple(met)


def breakers_of(name: str, relays: dict[str, Relay]) -> frozenset[str]:
    """The terminals at which a relay, and all that it backs up, open the circuit."""
    return frozenset(relays[each].at for each in _behind(name, relays))


def inside(view: View, owners: frozenset[str], ends: frozenset[str]) -> Bools:
    """Which cases (n,) of ``view`` lie in ``owners``, the breakers at ``ends`` being closed."""
    own = np.array([spot.owner in owners and spot.opened not in ends for spot in view.spots], bool)
    return np.asarray(own[view.spot] if len(own) else np.zeros(0, bool))
