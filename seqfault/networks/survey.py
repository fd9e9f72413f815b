"""All nodes of the three networks at once: Z at every node and between neighbours, floating parts included.

A unit current into node k raises its neighbour j to w_jk = G_jk − p_jᵀ σ⁻¹ d_k above the references,
which is what strong elements see, and node k itself to Z_kk = G_kk + d_kᵀ σ⁻¹ d_k (``factors`` has the
symbols). G comes from the selected inverse, in small networks from dense ones. Every column is
checked; where one fails, its network is solved again column by column, with pivots.
"""

from __future__ import annotations

from collections.abc import Sequence

import msgspec
import numpy as np

from seqfault.errors import CheckError
from seqfault.model.elements import Bools, Complex, Floats
from seqfault.networks import factors
from seqfault.networks.factors import CHUNK, SEEN, SequenceFactor
from seqfault.networks.pattern import UnionPattern, grounded, small_union, union

TOLERANCE = 1e-9
"""|Σ_j Y_kj Z_jk − 1| over the size of its terms above which a column fails."""


class Survey(msgspec.Struct, frozen=True, eq=False):
    """``pattern`` of the union of the networks; ``above`` (3, e) the potentials w of its rows for a unit
    current into its columns; ``impedance`` (3, n) driving-point impedances, ``infinite`` (3, n) where
    nothing bounds them; ``worst`` (3,) largest error of the check.
    """

    pattern: UnionPattern
    above: Complex
    impedance: Complex
    infinite: Bools
    worst: Floats


def survey_of(networks: Sequence[SequenceFactor], size: int) -> Survey:
    """The survey of the three ``networks`` on ``size`` nodes.

    Raises ``CheckError`` where a column fails its check even when solved by itself.
    """
    references = [each.free.reference for each in networks]
    inverse: Complex | None = None
    if size <= factors.DENSE:
        pattern = small_union([each.stamps for each in networks], references, size)
    else:
        from seqfault.networks.selected import selected_inverse

        stamped = zip(networks, references, strict=True)
        pattern = union([grounded(each.stamps, reference, size) for each, reference in stamped])
        try:
            inverse = selected_inverse(pattern)
        except (RuntimeError, np.linalg.LinAlgError):  # a pivot that is zero, or off the diagonal
            inverse = None
    if inverse is None:
        inverse = np.zeros(pattern.value.shape, complex)
        worst = np.full(3, np.inf)
    else:
        worst = np.array([_error(pattern, s, inverse[s], network) for s, network in enumerate(networks)])
    for s, network in enumerate(networks):
        if not worst[s] <= TOLERANCE:
            inverse[s] = _by_columns(network, pattern)
            worst[s] = _error(pattern, s, inverse[s], network)
    if not (worst <= TOLERANCE).all():
        s = int(np.argmax(~(worst <= TOLERANCE)))
        raise CheckError(
            f"the survey of all buses fails its check (sequence {s}: {worst[s]:.3g} of the terms left,"
            f" {TOLERANCE:g} allowed); the answer is withheld; `fault` solves single buses"
        )
    impedance = np.zeros((3, size), complex)
    infinite = np.zeros((3, size), bool)
    for s, network in enumerate(networks):
        impedance[s], infinite[s] = _bordered(network, pattern, inverse[s])
    return Survey(pattern, inverse, impedance, infinite, worst)


def _held(network: SequenceFactor, size: int) -> Bools:
    """Nodes (n,) that are a row of the unit matrix in this network."""
    held = np.ones(size, bool)
    held[: network.size] = False
    held[network.free.reference] = True
    return held


def _error(pattern: UnionPattern, s: int, inverse: Complex, network: SequenceFactor) -> float:
    """Largest error of any column of the inverse of sequence ``s``; nan where something is not finite."""
    start, value = pattern.start[:-1], pattern.value[s]
    product = value * inverse
    left = np.abs(np.add.reduceat(product, start) - 1)
    terms = np.add.reduceat(np.abs(value), start) * np.abs(inverse[pattern.diagonal])
    terms = np.maximum(terms, np.add.reduceat(np.abs(product), start))
    free = ~_held(network, pattern.size)
    with np.errstate(invalid="ignore", divide="ignore"):
        return float((left / terms)[free].max(initial=0.0))


def _by_columns(network: SequenceFactor, pattern: UnionPattern) -> Complex:
    """Entries (e,) of G from a solve a node."""
    out = np.zeros(len(pattern.row), complex)
    for first in range(0, network.size, CHUNK):
        nodes = np.arange(first, min(first + CHUNK, network.size))
        here = slice(pattern.start[first], pattern.start[nodes[-1] + 1])
        row, column = pattern.row[here], pattern.column[here] - first
        inside = row < network.size
        out[here][inside] = network.columns(nodes)[row[inside], column[inside]]
    return out


def _bordered(network: SequenceFactor, pattern: UnionPattern, above: Complex) -> tuple[Complex, Bools]:
    """Driving points (n,), and where they are infinite; ``above`` turns from G to w in place."""
    held = _held(network, pattern.size)
    above[held[pattern.row] | held[pattern.column]] = 0
    impedance = above[pattern.diagonal]
    infinite = np.zeros(pattern.size, bool)
    part = network.free.part
    label = np.full(pattern.size, -1)
    label[: network.size] = part
    for k in sorted(set(network.free.dimension.tolist())):  # most parts have one free vector
        chosen = np.append(network.free.dimension == k, False)  # part −1 is none
        at = np.flatnonzero(chosen[part])
        direction = network.direction[at, :k]
        lift = np.zeros((pattern.size, k), complex)  # σ⁻¹ d
        lift[at] = np.einsum("ikl,il->ik", network.compliance[part[at], :k, :k], direction)
        impedance[at] += (direction * lift[at]).sum(axis=1)
        seen = np.einsum("ik,ikx->ix", direction, network.slack[part[at], :k, :k])
        infinite[at] = (np.abs(seen) > SEEN).any(axis=1)
        inside = chosen[label[pattern.row]] & (label[pattern.row] == label[pattern.column])
        entry = np.flatnonzero(inside)
        drop = network.drop[pattern.row[entry], :k]
        above[entry] -= (drop * lift[pattern.column[entry]]).sum(axis=1)
    return impedance, infinite
