"""Which breakers relays trip, and the network with breakers open.

A breaker stands at a terminal, ``ELEMENT@BUS``; opening it opens all three poles there. A case does not say
what a relay trips: one at a terminal trips the breaker there, one at a star point the breakers of the
windings that end in it, on their own side, unless it is said otherwise.
"""

from __future__ import annotations

from collections.abc import Iterable, Mapping, Sequence

import msgspec
from msgspec.structs import replace

from seqfault.case.records import Case, Line
from seqfault.case.relay_sites import Places, terminals
from seqfault.case.wording import Spelling, listed
from seqfault.errors import RequestError, quoted
from seqfault.faults.kinds import Fault, fault_at
from seqfault.faults.network import Network
from seqfault.faults.solution import FaultSolution
from seqfault.studies.relays import Relay


class Trips(msgspec.Struct, frozen=True):
    """The breakers of each relay, by its name, and what was assumed of them."""

    of: dict[str, tuple[str, ...]]
    assumed: tuple[str, ...]


def trips_of(case: Case, relays: Mapping[str, Relay], stated: Sequence[tuple[str, str]]) -> Trips:
    """What ``relays`` trip; ``stated`` are pairs of relay and breaker, which stand in place of the rule.

    Raises ``RequestError`` for a relay or a breaker that is not there.
    """
    places = Places(case)
    given: dict[str, tuple[str, ...]] = {}
    for name, breaker in stated:
        if name not in relays:
            raise RequestError(f"--trips: no relay is called {quoted(name)}{Spelling(relays).hint(name)}")
        check_breaker(places, breaker, "--trips")
        given[name] = (*given.get(name, ()), *_all_units(places, breaker))
    of: dict[str, tuple[str, ...]] = {}
    assumed = []
    for name, relay in relays.items():
        if name in given:
            of[name] = tuple(dict.fromkeys(given[name]))
        elif relay.star:
            users = places.stars.get(relay.star, ())
            of[name] = tuple(f"{user.element}@{user.bus}" for user in users)
            if users and not (relay.out or relay.blind):
                assumed.append(
                    f"relay {quoted(name)}: the case does not say what it trips; taken as"
                    f" {listed(map(quoted, of[name]), 'and')}, on the winding's own side (--trips states"
                    " another)"
                )
        else:
            of[name] = (relay.at,)
    if any(not relay.star and name not in given for name, relay in relays.items()):
        assumed.insert(0, "a relay at a terminal trips the breaker there, and no other")
    return Trips(of, tuple(assumed))


def check_breaker(places: Places, breaker: str, option: str) -> None:
    """Raise ``RequestError`` where ``breaker`` is no terminal of an element."""
    name, mark, bus = breaker.partition("@")
    found = places.elements.get(name)
    if found is None:
        hint = Spelling(places.elements).hint(name)
        raise RequestError(f"{option} {quoted(breaker)}: there is no element {quoted(name)}{hint}")
    ends = terminals(found[1])
    if not mark or bus not in ends:
        write = listed((quoted(f"{name}@{end}") for end in ends), "or")
        raise RequestError(f"{option} {quoted(breaker)}: no breaker of {quoted(name)}; write {write}")


def closed(places: Places, case: Case, breaker: str) -> bool:
    """Whether ``breaker`` has anything to open in the state of ``case``."""
    name, _, bus = breaker.partition("@")
    record = places.elements[name][1]
    if record.out or any(case.buses[end].out for end in terminals(record)):
        return False
    if isinstance(record, Line):
        return bus not in record.open
    return bool(getattr(record, "closed", True))


def solve_with(network: Network, faults: Sequence[Fault], opened: Iterable[str]) -> FaultSolution:
    """Solve ``faults`` on ``network`` with the breakers ``opened``.

    Converters that this cuts off from every infeed and generator feed nothing, as in a part that has none
    from the start. Raises as ``Network.solve`` does; ``RequestError`` where a fallen conductor lies at the
    breaker itself.
    """
    case = network.case
    opened = list(opened)
    ties = {b.partition("@")[0] for b in opened} & case.ties.keys()
    off = {b.partition("@")[0] for b in opened} & case.converters.keys()
    if ties or off:
        case = replace(
            case,
            ties={n: replace(r, closed=r.closed and n not in ties) for n, r in case.ties.items()},
            converters={n: replace(r, out=r.out or n in off) for n, r in case.converters.items()},
        )
        network = Network(case, machine=network.machine)
    poles = [b for b in opened if b.partition("@")[0] not in ties | off]
    standing = []
    for fault in faults:
        if fault.kind.series and network.place(fault.place).name in poles:
            if fault.fallen:
                raise RequestError(
                    f"place {quoted(fault.place)}: the fallen conductor lies at the breaker that opens; put"
                    " it a little into the line, as in LINE@1%"
                )
            continue
        standing.append(fault)
    standing += [fault_at(breaker, "open-three") for breaker in poles]
    running = [name for name, record in network.case.converters.items() if not record.out]
    if not (running and poles):
        return network.solve(standing)
    calm = _without(network, running).solve(standing)
    lost = [n for n in running if calm.lost[calm.index[network.case.converters[n].bus]]]
    if set(lost) == set(running):
        return calm
    return (_without(network, lost) if lost else network).solve(standing)


def _without(network: Network, converters: Sequence[str]) -> Network:
    """``network`` with ``converters`` out."""
    case = network.case
    kept = {n: replace(r, out=r.out or n in converters) for n, r in case.converters.items()}
    return Network(replace(case, converters=kept), machine=network.machine)


def unfolded(case: Case, breakers: Iterable[str] = ()) -> Case:
    """``case`` with records of several circuits or units that a relay or breaker stands at taken apart.

    Each becomes a record of its own, ``W``, ``W (2)`` and so on, with relays of its own; places along ``W``
    are in the first. The network is the same.
    """
    places = Places(case)
    wanted = {b.partition("@")[0] for b in breakers}
    for relay in case.relays.values():
        name, mark, _ = relay.at.partition("@")
        wanted |= {name} if mark else {user.element for user in places.stars.get(name, ())}
    tables: dict[str, dict[str, object]] = {}
    relays = dict(case.relays)
    for name in sorted(wanted & places.elements.keys()):
        table, record = places.elements[name]
        count = getattr(record, "count", 1)
        if count == 1:
            continue
        own = tables.setdefault(table, dict(getattr(case, table)))
        own[name] = replace(record, count=1)
        for number in range(2, count + 1):
            twin = _free(f"{name} ({number})", own)
            own[twin] = own[name]
            for relay_name, relay in case.relays.items():
                at = _at_twin(relay.at, name, twin, places)
                if at:
                    relays[_free(f"{relay_name} ({number})", relays)] = replace(relay, at=at)
    return replace(case, **tables, relays=relays) if tables else case


def apart_of(case: Case) -> tuple[str, ...]:
    """The records of ``case`` that ``unfolded`` took apart."""
    own = Places(case).elements
    return tuple(name for name, (_, record) in own.items() if own.get(f"{name} (2)", (0, 0))[1] is record)


def _at_twin(at: str, name: str, twin: str, places: Places) -> str:
    """Where the relay at ``at`` of ``name`` stands on its ``twin``; nothing where it is not on it alone."""
    element, mark, bus = at.partition("@")
    if mark:
        return f"{twin}@{bus}" if element == name else ""
    users = places.stars.get(at, ())
    if len(users) == 1 and users[0].element == name and users[0].neutral in ("solid", "isolated"):
        return f"{twin}.{users[0].side}"
    return ""


def _free(name: str, taken: Mapping[str, object]) -> str:
    while name in taken:
        name += "'"
    return name


def _all_units(places: Places, breaker: str) -> tuple[str, ...]:
    """The breaker of a record, and those of its twins."""
    name, _, bus = breaker.partition("@")
    out, number = [breaker], 2
    while f"{name} ({number})" in places.elements:
        out.append(f"{name} ({number})@{bus}")
        number += 1
    return tuple(out)
