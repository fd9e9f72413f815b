"""What every relay of a case does about one fault: what it sees, how many pickups, and when it acts."""

from __future__ import annotations

from collections.abc import Sequence

import msgspec

from seqfault.case.wording import listed
from seqfault.equations.relay_curves import EFFECTIVE_RANGE
from seqfault.errors import RequestError, quoted
from seqfault.faults.kinds import Fault
from seqfault.faults.network import Network
from seqfault.faults.solution import FaultSolution
from seqfault.studies.breakers import Trips, apart_of, trips_of, unfolded
from seqfault.studies.protection import Protection, protection
from seqfault.studies.relay_readings import Reading, readings

Stated = Sequence[tuple[str, str]]
"""Pairs of a relay and a breaker that it trips."""


class Operation(msgspec.Struct, frozen=True, eq=False):
    """Relays and one fault: ``acting`` in order of tripping, ``resting`` in the order of the file.

    ``trips`` says which breakers each relay trips, ``machines`` whether any machine runs. ``apart`` are
    records of several circuits that were taken apart, each circuit with relays of its own.
    """

    solution: FaultSolution
    protection: Protection
    trips: Trips
    machines: bool
    apart: tuple[str, ...]
    acting: tuple[Reading, ...]
    resting: tuple[Reading, ...]

    @property
    def readings(self) -> tuple[Reading, ...]:
        """All of them, those that act first."""
        return (*self.acting, *self.resting)


def guarded_network(network: Network, breakers: Sequence[str] = ()) -> tuple[Network, Protection]:
    """``network`` with every circuit that has relays a record of its own, and its protection.

    Raises ``RequestError`` for a case without relays.
    """
    if not network.case.relays:
        raise RequestError("this case has no relays; state them in [relays.NAME], see docs/case-format.md")
    case = unfolded(network.case, breakers)
    if case is not network.case:
        network = Network(case, machine=network.machine)
    guarded = protection(case)
    assert guarded is not None
    return network, guarded


def operate(network: Network, faults: Sequence[Fault], stated: Stated = ()) -> Operation:
    """What the relays of ``network`` do about ``faults`` that stand at once.

    ``stated`` are pairs of relay and breaker it trips. Raises ``RequestError`` for a case without relays
    and for what ``Network.solve`` cannot be asked, ``NoAnswerError`` at resonance.
    """
    network, guarded = guarded_network(network, [breaker for _, breaker in stated])
    trips = trips_of(network.case, guarded.relays, stated)
    solution = network.solve(faults)
    return operation(network, solution, guarded, trips)


def operation(network: Network, solution: FaultSolution, guarded: Protection, trips: Trips) -> Operation:
    """The relays sorted by what they do about ``solution``, a fault on ``network``."""
    seen = readings(solution, guarded)
    records = (*network.case.generators.values(), *network.case.motors.values())
    return Operation(
        solution=solution,
        protection=guarded,
        trips=trips,
        machines=any(not record.out for record in records),
        apart=apart_of(network.case),
        acting=tuple(sorted((each for each in seen if each.acts), key=lambda each: each.time)),
        resting=tuple(each for each in seen if not each.acts),
    )


def said_of(found: Operation) -> tuple[str, ...]:
    """What is special about what relays see: errors and limits of transformers, curves out of range."""
    out: list[str] = []
    for each in found.readings:
        relay, name = each.relay, quoted(each.relay.name)
        if each.beyond is not None and each.limit is not None:
            out.append(
                f"relay {name}: {each.beyond:.4g} A through a current transformer whose class speaks of"
                f" {each.limit:.4g} A at most; what its secondary shows beyond that is not known"
            )
        pickup = relay.pickup.primary
        if pickup is None or each.acts:
            continue
        if each.value > pickup and each.turned is not None and each.error >= each.value:
            out.append(
                f"relay {name}: the errors of its current transformers may show up to {each.error:.4g} A,"
                f" as much as the {each.value:.4g} A it sees, and so turn its direction"
            )
        elif each.value <= pickup < each.value + each.error:
            shown = "any amount" if each.error == float("inf") else f"up to {each.error:.4g} A"
            out.append(
                f"relay {name}: the errors of its current transformers may show {shown} beside"
                f" {each.value:.4g} A, enough to make it act"
            )
    low, high = EFFECTIVE_RANGE
    curved = [each for each in found.acting if each.relay.curve != "definite" and each.main <= each.fast]
    slow = [each.relay.name for each in curved if each.multiple < low]
    if slow:
        out.append(
            f"{listed(map(quoted, slow), 'and')}: below {low:g} times the pickup no accuracy of the time is"
            " declared, and a relay may not act at all (IEC 60255-151)"
        )
    quick = [each.relay.name for each in curved if each.multiple > high]
    if quick:
        out.append(
            f"{listed(map(quoted, quick), 'and')}: above {high:g} times the pickup many relays act no"
            " faster than there; the formula goes on"
        )
    return tuple(out)


def assumed_of(found: Operation) -> tuple[str, ...]:
    """All that the currents and times rest on and nobody has stated, in sentences."""
    s, relays = found.solution, [each.relay for each in found.readings]
    out = [str(each) for each in s.assumptions]
    out += [
        str(each)
        for each in found.protection.assumptions
        if each.record != "demands" or each.names in (("margin.breaker",), ("margin.overshoot",))
    ]
    out += found.trips.assumed
    if found.apart:
        out.append(
            f"of {listed(map(quoted, found.apart), 'and')} each circuit or unit has relays of its own: a"
            " fault inside lies in the first, the others carry their number"
        )
    if found.machines:
        out.append(
            f"machines keep their {s.machine} reactance for as long as the fault lasts; what they feed"
            " decays, so slow relays see less of it (--machine asks for another)"
        )
    if any(relay.direction for relay in relays):
        out.append(
            "a directional relay acts where its current lies within 90 degrees either side of its"
            " characteristic angle ahead of what polarises it, however small that is (common practice)"
        )
    if any(relay.measures == "residual" for relay in relays):
        out.append(
            "errors of residually connected current transformers: each of the three loses at most its"
            " composite error, all in one sense (IEC 61869-2; steady state, no remanence)"
        )
    out.append("currents are steady, without dc offset; neutral resistors have the ohms of the case, cold")
    return tuple(out)
