"""What a setting study costs: 60 relays on 200 buses against the factorisation, and 240 on 800 against it.

``python -m tests.bench.settings`` from the root of the repository, or with numbers of neighbourhoods (20
buses, 6 relays each) behind it. Factorisations are counted where they are made; a place is faulted in
two kinds and through several resistances, resistors cold and hot, in every state. The study is timed
from the case in memory to its verdicts, and bare factorisations of the base state's three networks
before and after it, all in processor time, which other work on the machine disturbs least. Ends with 1
where a fault costs a factorisation, or the second size more than 20 times the first. The larger size
takes minutes.
"""

from __future__ import annotations

import statistics
import sys
import time
from collections.abc import Iterator
from contextlib import contextmanager

from seqfault.case.reader import case_from_tree
from seqfault.faults.network import Network
from seqfault.networks.factors import SequenceFactor, SequenceNetworks
from seqfault.studies.settings import judge
from seqfault.studies.settings_states import study_states
from tests.bench.relay_grid import relay_grid

SIZES = (10, 40)
LIMIT = 20.0
TURNS = 21


@contextmanager
def counted() -> Iterator[list[int]]:
    """Count every factorisation of a sequence network while this lasts."""
    made = [0]
    own = SequenceFactor._factorise

    def counting(self: SequenceFactor) -> object:
        made[0] += 1
        return own(self)

    SequenceFactor._factorise = counting  # type: ignore[method-assign]  # put back below
    try:
        yield made
    finally:
        SequenceFactor._factorise = own  # type: ignore[method-assign]


def bare(model_of: Network) -> float:
    """Median processor seconds to factorise the three networks of a model, assembling included."""
    rounds = []
    for _ in range(TURNS + 1):
        start = time.process_time()
        networks = SequenceNetworks(model_of.model)
        for s in range(3):
            networks[s]
        rounds.append(time.process_time() - start)
    return statistics.median(rounds[1:])


def report(neighbourhoods: int) -> tuple[float, bool]:
    """Print what the study costs; its processor seconds, and whether no fault costs a factorisation."""
    case = case_from_tree(relay_grid(neighbourhoods), "grid")
    network = Network(case)
    before = bare(network)
    with counted() as made:
        start = time.process_time()
        study = study_states(case)
        solved = time.process_time() - start
        found = judge(study)
        whole = time.process_time() - start
    once = statistics.mean((before, bare(network)))
    cases = sum(len(state.forms.spot) for state in study.states)
    wanted = len(study.case.demands.fault_resistances)
    places = sum(len(state.forms.spots) for state in study.states)
    print(
        f"{len(case.buses)} buses, {len(found.still)} relays, {len(study.states)} states: {places} places,"
        f" {cases * wanted} faults, and every resistance between"
    )
    print(
        f"  {made[0]} factorisations of one network: {made[0] / places:.2f} a place,"
        f" {made[0] / (cases * wanted):.3f} a fault"
    )
    print(
        f"  {whole / once:.0f} times the bare factorisation of the base state's three networks"
        f" ({whole:.1f} s against {1e3 * once:.1f} ms), of it the verdicts {(whole - solved) / whole:.2f}"
    )
    return whole, made[0] < cases


if __name__ == "__main__":
    sizes = [int(word) for word in sys.argv[1:]] or SIZES
    results = [report(size) for size in sizes]
    good = all(spared for _, spared in results)
    if len(results) > 1:
        ratio = results[-1][0] / results[0][0]
        print(f"the last size costs {ratio:.1f} times the first (at most {LIMIT:g})")
        good &= ratio <= LIMIT
    sys.exit(0 if good else 1)
