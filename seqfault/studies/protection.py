"""All that a case says of its protection, in SI units, with what had to be assumed."""

from __future__ import annotations

import msgspec

from seqfault.case.records import Case
from seqfault.case.relay_sites import Places
from seqfault.errors import quoted
from seqfault.model.assumptions import Assumption, Ledger
from seqfault.studies.current_transformers import CurrentTransformer, transformer_of
from seqfault.studies.demands import Demanded, demanded
from seqfault.studies.relays import Relay, relay_of


class Protection(msgspec.Struct, frozen=True):
    """Relays and current transformers by name, in the order of the file, and what is demanded."""

    relays: dict[str, Relay]
    transformers: dict[str, CurrentTransformer]
    demands: Demanded
    assumptions: tuple[Assumption, ...]
    warnings: tuple[str, ...]


def protection(case: Case) -> Protection | None:
    """The protection of ``case`` in its state; None where the file has no relay and no transformer."""
    if not case.relays and not case.current_transformers:
        return None
    ledger = Ledger()
    transformers = {
        name: transformer_of(name, record, ledger) for name, record in case.current_transformers.items()
    }
    demands = demanded(case, ledger)
    places = Places(case)
    relays = {
        name: relay_of(name, record, case, places, transformers, demands, ledger)
        for name, record in case.relays.items()
    }
    warnings = [
        f"relay {quoted(relay.name)}, at: it sees nothing in this state; {relay.blind}"
        for relay in relays.values()
        if relay.blind
    ]
    return Protection(relays, transformers, demands, ledger.entries(), tuple(warnings))
