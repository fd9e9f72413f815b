"""Factorise once, ask for columns: one sequence network and its inverse, floating parts included.

A part with no strong tie to earth is solved as v = F u + w, w zero at a reference node for each free
vector. With S the weak branches, G the inverse of the network grounded at its references and
p = G S F:

    u = σ⁻¹ dᵀ i,   w = G i − p u,   d = F − p,   σ = Fᵀ S F − (S F)ᵀ p

so that v = G i + d u. Fᵀ S F is summed from the element data, never read off the assembled diagonal,
where small capacitances drown. Where σ is zero (no weak branch at all, or exact resonance) u is free
and currents obey dᵀ i = 0. Bordering of a nearly singular system: the method of W. Govaerts,
"Numerical Methods for Bifurcations of Dynamical Equilibria", SIAM 2000, ch. 3 (from memory).
"""

from __future__ import annotations

from functools import cached_property
from typing import TYPE_CHECKING, Any

import numpy as np

from seqfault.errors import NoAnswerError
from seqfault.model.elements import Bools, Complex, Floats, Ints, Model
from seqfault.networks.assembly import Stamps, assemble
from seqfault.networks.connectivity import FreeSpace, free_space

if TYPE_CHECKING:
    from seqfault.networks.survey import Survey

DENSE = 300
"""Networks of up to this many nodes are inverted densely, without importing scipy."""
RESONANCE = 1e-12
"""A border that cancels to this share of its terms is at exact resonance."""
SEEN = 1e-9
"""Share of a free potential below which a node does not take part in it."""
CHUNK = 256


class SequenceFactor:
    """The factorised network of one sequence.

    ``stamps`` its elements, ``free`` its free space; ``direction`` (n, k) the vectors d, ``drop``
    (n, k) the vectors p; ``compliance`` (parts, k, k) the inverse of σ where it has one; ``slack``
    (parts, k, k) columns x with σ x = 0, and ``slacks`` (parts,) how many.
    """

    def __init__(self, stamps: Stamps, free: FreeSpace) -> None:
        self.stamps = stamps
        self.free = free
        self._kept = np.ones(stamps.size, bool)
        self._kept[free.reference] = False
        self._position = np.cumsum(self._kept) - 1
        load = stamps.weak[:, None] * free.basis
        self.drop: Complex = self.solve(load) if load.any() else np.zeros(load.shape, complex)
        self.direction: Complex = free.basis - self.drop
        self._border(load)

    @property
    def size(self) -> int:
        """Number of nodes."""
        return self.stamps.size

    @cached_property
    def _solver(self) -> Any:
        """Made when first asked for: the survey of all buses has factors of its own."""
        s = self.stamps
        n = int(self._kept.sum())
        both = self._kept[s.row] & self._kept[s.column]
        row, column = self._position[s.row[both]], self._position[s.column[both]]
        try:
            if n <= DENSE:
                dense = np.zeros((n, n), complex)
                np.add.at(dense, (row, column), s.value[both])
                dense[np.arange(n), np.arange(n)] += s.weak[self._kept]
                return _Dense(dense)
            return _Sparse(n, row, column, s.value[both], s.weak[self._kept])
        except (np.linalg.LinAlgError, RuntimeError) as error:
            raise NoAnswerError(
                "the network has no unique state: series or parallel resonance of lossless elements;"
                " check reactances of opposite sign that cancel"
            ) from error

    def solve(self, injection: Complex) -> Complex:
        """G times ``injection`` (n, r): potentials above the references."""
        out = np.zeros(injection.shape, complex)
        if self._kept.any():
            out[self._kept] = self._solver.solve(np.asarray(injection[self._kept], complex))
        return out

    def _border(self, load: Complex) -> None:
        part, basis = self.free.part, self.free.basis
        k, parts = basis.shape[1], len(self.free.dimension)
        at = np.flatnonzero(part >= 0)
        sigma = np.zeros((parts, k, k), complex)
        scale = np.zeros((parts, k))
        weak = self.stamps.weak
        term = basis[at, :, None] * load[at, None, :] - load[at, :, None] * self.drop[at, None, :]
        np.add.at(sigma, part[at], term)
        np.add.at(scale, part[at], np.abs(weak[at, None]) * basis[at] ** 2)
        self.compliance = np.zeros((parts, k, k), complex)
        self.slack = np.zeros((parts, k, k), complex)
        tuned = np.abs(sigma[:, 0, 0]) <= RESONANCE * scale[:, 0]
        single = self.free.dimension == 1
        regular = single & ~tuned
        self.compliance[regular, 0, 0] = 1 / sigma[regular, 0, 0]
        self.slack[single & tuned, 0, 0] = 1
        self.slacks = (single & tuned).astype(np.int64)
        self.resonant: Bools = single & tuned & (scale[:, 0] > 0)
        for p in np.flatnonzero(~single).tolist():
            size = int(self.free.dimension[p])
            inverse, slack = _split(sigma[p, :size, :size], scale[p, :size])
            self.compliance[p, :size, :size] = inverse
            self.slack[p, :size, : slack.shape[1]] = slack
            self.slacks[p] = slack.shape[1]

    def columns(self, nodes: Ints) -> Complex:
        """Columns (n, r) of G for unit injections at ``nodes``."""
        unit = np.zeros((self.size, len(nodes)), complex)
        unit[nodes, np.arange(len(nodes))] = 1
        return self.solve(unit)

    def port_impedance(self, nodes: Ints, columns: Complex) -> Complex:
        """Impedance matrix (r, r) between ``nodes``, without the slack of floating parts."""
        z: Complex = columns[nodes].copy()
        part = self.free.part[nodes]
        same = (part[:, None] == part[None, :]) & (part[:, None] >= 0)
        if same.any():
            d = self.direction[nodes]
            extra = np.einsum("ik,ikl,jl->ij", d, self.compliance[part], d)
            z += np.where(same, extra, 0)
        return z

    def slack_at(self, nodes: Ints) -> tuple[Complex, list[tuple[int, int]]]:
        """Columns (r, q): potentials at ``nodes`` for a unit of each free slack they touch.

        The second item names the slacks as (part, column).
        """
        out, names = [], []
        for p in sorted(set(self.free.part[nodes].tolist())):
            if p < 0:
                continue
            inside = self.free.part[nodes] == p
            for x in range(int(self.slacks[p])):
                values = np.where(inside, self.direction[nodes] @ self.slack[p, :, x], 0)
                if np.abs(values).max() > SEEN:
                    out.append(values)
                    names.append((p, x))
        if not out:
            return np.zeros((len(nodes), 0), complex), []
        return np.stack(out, axis=1), names

    def respond(
        self,
        columns: Complex,
        nodes: Ints,
        injection: Complex,
        slack: dict[tuple[int, int], complex],
    ) -> tuple[Complex, Complex]:
        """Potentials (n,) of ``injection`` (r,) at ``nodes``: w above the references, and v itself.

        ``slack`` gives the amounts of the free slacks. Strong elements see only w; weak ones see v.
        """
        part = self.free.part
        u = np.zeros((max(len(self.free.dimension), 1), self.free.basis.shape[1]), complex)
        at = part[nodes]
        for r in np.flatnonzero(at >= 0).tolist():
            u[at[r]] += self.compliance[at[r]] @ self.direction[nodes[r]] * injection[r]
        for (p, x), amount in slack.items():
            u[p] += self.slack[p, :, x] * amount
        lift = np.where(part[:, None] >= 0, u[part], 0)
        w: Complex = columns @ injection - (self.drop * lift).sum(axis=1)
        v = np.asarray(w + (self.free.basis * lift).sum(axis=1), complex)
        return w, v

    def driving_point(self) -> tuple[Complex, Bools]:
        """Driving-point impedance (n,) of every node, and where it is infinite."""
        diagonal = np.zeros(self.size, complex)
        diagonal[self._kept] = self._solver.diagonal()
        part = self.free.part
        at = np.flatnonzero(part >= 0)
        d = self.direction[at]
        diagonal[at] += np.einsum("ik,ikl,il->i", d, self.compliance[part[at]], d)
        infinite = np.zeros(self.size, bool)
        seen = np.einsum("ik,ikx->ix", d, self.slack[part[at]])
        infinite[at] = (np.abs(seen) > SEEN).any(axis=1)
        return diagonal, infinite


def _split(sigma: Complex, scale: Floats) -> tuple[Complex, Complex]:
    """Pseudo-inverse of a small symmetric σ, and columns that span what it leaves free."""
    size = np.where(scale > 0, np.sqrt(scale), 1.0)
    balanced = sigma / size[:, None] / size[None, :]
    u, s, vh = np.linalg.svd(balanced)
    rank = int((s > RESONANCE).sum())
    inverse = (vh[:rank].conj().T / s[:rank]) @ u[:, :rank].conj().T
    rest = np.asarray(vh[rank:].conj().T / size[:, None], complex)
    return np.asarray(inverse / size[:, None] / size[None, :], complex), rest


class _Dense:
    """A small network: its inverse, and one step of refinement on each answer."""

    def __init__(self, matrix: Complex) -> None:
        self._matrix = matrix
        self._inverse = np.linalg.inv(matrix)
        if not np.isfinite(self._inverse).all():
            raise np.linalg.LinAlgError("singular")

    def solve(self, rhs: Complex) -> Complex:
        x = self._inverse @ rhs
        return np.asarray(x + self._inverse @ (rhs - self._matrix @ x))

    def diagonal(self) -> Complex:
        return np.diagonal(self.solve(np.eye(len(self._matrix), dtype=complex)))


class _Sparse:
    """A large network: SuperLU on a symmetric pattern, and one step of refinement."""

    def __init__(self, n: int, row: Ints, column: Ints, value: Complex, weak: Complex) -> None:
        import scipy.sparse
        import scipy.sparse.linalg

        every = np.arange(n)
        self._matrix = scipy.sparse.csc_array(
            (
                np.concatenate([value, weak]),
                (np.concatenate([row, every]), np.concatenate([column, every])),
            ),
            shape=(n, n),
        )
        self._lu = scipy.sparse.linalg.splu(
            self._matrix,
            permc_spec="MMD_AT_PLUS_A",
            diag_pivot_thresh=1e-3,
            relax=1,  # rows here are too short for dense kernels to pay
            panel_size=1,
            options={"SymmetricMode": True},
        )

    def solve(self, rhs: Complex) -> Complex:
        x = self._lu.solve(np.ascontiguousarray(rhs))
        return np.asarray(x + self._lu.solve(rhs - self._matrix @ x))

    def diagonal(self) -> Complex:
        n = self._matrix.shape[0]
        out = np.zeros(n, complex)
        for start in range(0, n, CHUNK):
            which = np.arange(start, min(start + CHUNK, n))
            unit = np.zeros((n, len(which)), complex)
            unit[which, np.arange(len(which))] = 1
            out[which] = self._lu.solve(unit)[which, np.arange(len(which))]
        return out


class SequenceNetworks:
    """The three factorised networks of a model, each made when first asked for.

    Factors do not travel between processes: a copy makes its own.
    """

    def __init__(self, model: Model) -> None:
        self.model = model
        self._factors: dict[int, SequenceFactor] = {}
        self._survey: Survey | None = None

    def __reduce__(self) -> tuple[type[SequenceNetworks], tuple[Model]]:
        return type(self), (self.model,)

    def __getitem__(self, sequence: int) -> SequenceFactor:
        if sequence not in self._factors:
            stamps = assemble(self.model, sequence)
            free = free_space(self.model, sequence, stamps.weak)
            self._factors[sequence] = SequenceFactor(stamps, free)
        return self._factors[sequence]

    def survey(self) -> Survey:
        """Every bus of the three networks at once.

        Raises ``CheckError`` where a column of an inverse fails its check.
        """
        if self._survey is None:
            from seqfault.networks.survey import survey_of

            self._survey = survey_of([self[s] for s in range(3)], self.model.nodes)
        return self._survey
