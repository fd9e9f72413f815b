"""Every single outage of a grid at fifty buses: updates against refactorising each, in one process.

``python -m tests.bench.outages`` from the root of the repository, or with a number of buses behind it.
Refactorising is done for some outages only, spread over all: the three networks are assembled and
factorised from a model without the element, and solved for the same buses with the same code. Building
that model from the case is told apart. Updates of all and a third of the references take turns; the median
survey and the mean reference are compared.
"""

from __future__ import annotations

import statistics
import sys
import time

import numpy as np

import seqfault
from seqfault.case.scenarios import in_state
from seqfault.model.build import build_model
from seqfault.networks.factors import SequenceNetworks
from seqfault.networks.removal import driving_points
from seqfault.studies.outages import single_outages, survey_outages
from tests.bench.grid import grid

BUSES, CHOSEN, SAMPLE, TURNS = 2_000, 50, 30, 3


def main(buses: int) -> None:
    """Print the ratios."""
    case = seqfault.case_from_tree(grid(buses))
    network = seqfault.Network(case)
    for s in range(3):
        _ = network.sequences[s]
    outages = single_outages(network, "lines") + single_outages(network, "transformers")
    at = network.buses[:: max(1, buses // CHOSEN)][:CHOSEN]
    survey_outages(network, outages[:5], at)  # imports
    sample = outages[:: max(1, len(outages) // SAMPLE)]
    build = refactor = 0.0
    update: list[float] = []
    rebuilt = 0
    for turn in range(TURNS):
        start = time.perf_counter()
        rebuilt = len(survey_outages(network, outages, at).rebuilt)
        update.append(time.perf_counter() - start)
        for outage in sample[turn::TURNS]:
            start = time.perf_counter()
            model = build_model(in_state(case, without=outage))
            build += time.perf_counter() - start
            start = time.perf_counter()
            networks = SequenceNetworks(model)
            nodes = np.array([model.node[model.index[bus]] for bus in at], np.int64)
            for s in range(3):
                driving_points(networks[s], nodes)
            refactor += time.perf_counter() - start
    each = statistics.median(update) / len(outages)
    print(f"{buses} buses, {len(outages)} outages, {len(at)} buses asked for, {rebuilt} built anew")
    print(f"one outage by update {1e3 * each:.2f} ms")
    print(f"refactorising costs {refactor / len(sample) / each:.0f} times as much", end=", ")
    print(f"with building the model {(refactor + build) / len(sample) / each:.0f} times")


if __name__ == "__main__":
    main(int(sys.argv[1]) if len(sys.argv) > 1 else BUSES)
