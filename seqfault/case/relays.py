"""Rules for relays: where they stand, what they measure, how they are set, whom they stand behind."""

from __future__ import annotations

from graphlib import CycleError, TopologicalSorter

from seqfault.case.pickups import check_instant, check_pickup, check_time
from seqfault.case.relay_direction import check_direction, check_vt
from seqfault.case.relay_places import check_at, check_protects
from seqfault.case.relay_sites import Places
from seqfault.case.scales import check_steps
from seqfault.case.subject import Site, Subject
from seqfault.errors import quoted

# What carries the current that is measured.
_CONNECTIONS = {
    "residual": "residual",
    "core-balance": "core-balance",
    "neutral": "neutral",
    "phase": "residual",
    "negative-sequence": "residual",
}


def check_relays(site: Site) -> None:
    """Tell what is wrong or doubtful about the relays."""
    case = site.case
    if not case.relays:
        return
    places = Places(site.case)
    for name, relay in case.relays.items():
        subject = Subject(site, "relays", name)
        users = check_at(subject, relay, places)
        ct = None if relay.ct is None else subject.current_transformer("ct", relay.ct)
        if relay.measures == "neutral-voltage":
            if relay.ct is not None:
                subject.error("ct", "neutral-voltage is measured through a vt; leave this out")
        elif ct is not None and ct.connection != _CONNECTIONS[relay.measures]:
            subject.error(
                "ct",
                f"{quoted(relay.ct or '')} has connection = {quoted(ct.connection)}, and "
                f"{relay.measures} is measured with {quoted(_CONNECTIONS[relay.measures])}",
            )
        check_vt(subject, relay, users)
        check_direction(subject, relay, places)
        check_pickup(subject, relay, ct, users)
        check_instant(subject, relay, ct)
        check_time(subject, relay)
        check_steps(subject, relay, ct)
        for one in relay.protects:
            check_protects(subject, one, places)
        for other in relay.backs_up:
            if other == name:
                subject.error("backs_up", "a relay does not back up itself")
            else:
                subject.relay("backs_up", other)
        subject.positive({"breaker_time": relay.breaker_time}, zero=True)
    _rings(site)


def _rings(site: Site) -> None:
    """Complain of relays that stand behind one another in a ring, of each ring once."""
    behind = {
        name: {other for other in relay.backs_up if other in site.case.relays and other != name}
        for name, relay in site.case.relays.items()
    }
    while True:
        try:
            TopologicalSorter(behind).prepare()
        except CycleError as error:
            ring = error.args[1][::-1]  # each backs up the next, the last is the first again
            chain = ", which backs up ".join(map(quoted, ring[1:]))
            problem = f"{quoted(ring[0])} backs up {chain}: of two relays one stands behind the other"
            Subject(site, "relays", ring[0]).error("backs_up", problem)
            behind[ring[0]].discard(ring[1])
        else:
            return
