"""Which drawn networks can be judged to the last digits.

Loops of star-star units whose ratios differ by a per mille or so tie a network to earth by that
difference alone: its square stands in the matrix, and doubles lose eight digits or more. Such data decide
nothing in practice; what is computed for them is right to the digits that are left.
"""

from __future__ import annotations

import numpy as np

from seqfault.case.reader import case_from_tree
from seqfault.faults.network import Network
from seqfault.networks.assembly import assemble
from tests.strategies import PlainNetwork, to_case_tree

WORST = 1e7
"""Condition of a sequence network, grounded at its references and scaled by its diagonal."""


def well_conditioned(net: PlainNetwork) -> bool:
    """Whether each of the three networks keeps eight digits and more."""
    network = Network(case_from_tree(to_case_tree(net)))
    for sequence in range(3):
        stamps, free = assemble(network.model, sequence), network.sequences[sequence].free
        matrix = np.zeros((stamps.size, stamps.size), complex)
        np.add.at(matrix, (stamps.row, stamps.column), stamps.value)
        matrix[np.arange(stamps.size), np.arange(stamps.size)] += stamps.weak
        kept = np.setdiff1d(np.arange(stamps.size), free.reference)
        matrix = matrix[np.ix_(kept, kept)]
        size = np.sqrt(np.abs(np.diagonal(matrix)))
        size[size == 0] = 1
        if len(kept) and not np.linalg.cond(matrix / size[:, None] / size[None, :]) < WORST:
            return False
    return True
