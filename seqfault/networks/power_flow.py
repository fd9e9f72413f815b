"""The loaded state before a fault: Newton's method on the positive-sequence network.

Unknown are the angle of every node that is no reference and the size of the voltage where none is held;
what must vanish is the power that every node lacks. Source: W. F. Tinney, C. E. Hart, "Power Flow
Solution by Newton's Method", IEEE Trans. PAS-86 (1967), in the complex form of the derivatives.
"""

from __future__ import annotations

from typing import Any, NoReturn

import msgspec
import numpy as np

from seqfault.errors import NoAnswerError, quoted
from seqfault.model.elements import Bools, Complex, Floats, Ints, Model
from seqfault.networks.assembly import assemble
from seqfault.networks.factors import DENSE

STEPS = 40
COLLAPSED = 0.2
"""Voltages per unit below which a solution is one that no network stays at."""
CLOSE = 1e-9
"""Power lacking at a node, as a share of the largest power there is."""
ROUNDING = 1e-13
"""The same as a share of the largest admittance, where nothing or next to nothing is drawn."""


class Conditions(msgspec.Struct, frozen=True, eq=False):
    """What nodes (n,) must do: ``reference`` hold voltage and angle, ``held`` (n,) voltage or nan,
    ``power`` (n,) fed into the network, ``live``."""

    reference: Bools
    held: Floats
    power: Complex
    live: Bools


def power_flow(model: Model, conditions: Conditions, start: Floats) -> Complex:
    """Voltages (n,) of the nodes of positive sequence, per unit in the frame of each node.

    ``start`` (n,) are sizes to begin with. Raises ``NoAnswerError`` naming the bus that lacks most where
    no voltages satisfy the ``conditions``.
    """
    y = _admittance(model)
    live, held = conditions.live, conditions.held
    size = np.where(np.isnan(held), start, held) * live
    enough = CLOSE * float(np.abs(conditions.power).max(initial=0.0))
    enough += ROUNDING * float(np.abs(y.diagonal()).max(initial=0.0))
    worst: tuple[Complex, float] | None = None
    for first in (_linear(y, conditions, size), size.astype(complex)):
        v, miss = _iterate(y, conditions, first, enough)
        if miss <= enough and np.abs(v[live]).min(initial=1.0) > COLLAPSED:
            return v
        if worst is None or miss < worst[1]:
            worst = v, miss
    assert worst is not None
    gap = np.where(conditions.reference, 0, _lacking(y, conditions, worst[0]))
    gap = np.where(np.isnan(held), gap, gap.real)
    _fail(model, np.asarray(gap, complex), worst[0], live)


def _linear(y: Any, conditions: Conditions, size: Floats) -> Complex:
    """Voltages (n,) with loads as impedances and held voltages at one angle: where to begin."""
    fixed = ~np.isnan(conditions.held) | ~conditions.live
    loose = np.flatnonzero(~fixed)
    v = size.astype(complex)
    if not len(loose):
        return v
    load = -conditions.power.conj()[loose]
    rhs = -(y @ np.where(fixed, v, 0))[loose]
    try:
        if isinstance(y, np.ndarray):
            found = np.linalg.solve(y[np.ix_(loose, loose)] + np.diag(load), rhs)
        else:
            import scipy.sparse
            import scipy.sparse.linalg

            inner = (y[loose][:, loose] + scipy.sparse.diags_array(load)).tocsc()
            found = scipy.sparse.linalg.splu(inner).solve(rhs)
    except (np.linalg.LinAlgError, RuntimeError):
        return v
    if np.isfinite(found).all() and np.abs(found).min() > COLLAPSED:
        v[loose] = found
    return v


def _lacking(y: Any, conditions: Conditions, v: Complex) -> Complex:
    return np.asarray((conditions.power - v * (y @ v).conj()) * conditions.live)


def _iterate(y: Any, conditions: Conditions, v: Complex, enough: float) -> tuple[Complex, float]:
    """Newton's steps from ``v`` until they no longer help; the best voltages and what they miss."""
    live, held = conditions.live, conditions.held
    turns = np.flatnonzero(live & ~conditions.reference)
    sizes = np.flatnonzero(live & ~conditions.reference & np.isnan(held))

    def miss(gap: Complex) -> float:
        return float(max(np.abs(gap.real[turns]).max(initial=0), np.abs(gap.imag[sizes]).max(initial=0)))

    gap = _lacking(y, conditions, v)
    best, best_miss, stalled = v, miss(gap), 0
    for _ in range(STEPS):
        if not len(turns) or stalled > 1:
            break
        try:
            step = _newton_step(y, v, gap, turns, sizes)
        except (np.linalg.LinAlgError, RuntimeError):
            break
        if not np.isfinite(step).all():
            break
        angle, size = np.angle(v), np.abs(v)
        part = 1.0
        for _ in range(6):  # shorter where a whole step makes it worse
            turned, sized = angle.copy(), size.copy()
            turned[turns] += part * step[: len(turns)]
            sized[sizes] += part * step[len(turns) :]
            trial = sized * np.exp(1j * turned)
            gap = _lacking(y, conditions, trial)
            if miss(gap) < best_miss or miss(gap) < enough:
                break
            part /= 2
        v = trial
        if miss(gap) < best_miss:
            stalled = 0 if miss(gap) < 0.5 * best_miss else stalled + 1
            best, best_miss = v, miss(gap)
        else:
            stalled += 1
    return best, best_miss


def _fail(model: Model, gap: Complex, v: Complex, live: Bools) -> NoReturn:
    at = np.flatnonzero(live)
    low = at[np.abs(v[at]).argmin()]
    worst = int(at[np.abs(gap[at]).argmax()])

    def bus(node: int) -> str:
        buses = np.flatnonzero(model.node == node)
        return f"bus {quoted(model.buses[buses[0]])}" if len(buses) else "the open end of a line"

    short = gap[worst] * model.base_power / 1e6
    raise NoAnswerError(
        f"the loaded state has no solution that Newton's method finds: after its last step {bus(worst)} is"
        f" {abs(short.real):.4g} MW and {abs(short.imag):.4g} Mvar off, and the lowest voltage is"
        f" {abs(v[low]):.3f} pu at {bus(int(low))}; the network cannot carry this load, or a power or an"
        " impedance is mistyped"
    )


def _admittance(model: Model) -> Any:
    """Positive-sequence admittances of lines, transformers and capacitances: (n, n), no sources."""
    idle = msgspec.structs.replace(model.sources, admittance=0 * model.sources.admittance)
    sets = tuple(s for s in model.winding_sets if s.kind_of_record != "generator")
    stamps = assemble(msgspec.structs.replace(model, sources=idle, winding_sets=sets), 1)
    n = stamps.size
    every = np.arange(n)
    row, column = np.concatenate([stamps.row, every]), np.concatenate([stamps.column, every])
    value = np.concatenate([stamps.value, stamps.weak])
    if n <= DENSE:
        dense = np.zeros((n, n), complex)
        np.add.at(dense, (row, column), value)
        return dense
    import scipy.sparse

    return scipy.sparse.csr_array((value, (row, column)), shape=(n, n))


def _newton_step(y: Any, v: Complex, gap: Complex, turns: Ints, sizes: Ints) -> Floats:
    """Changes of the angles of ``turns`` and the sizes of ``sizes`` that close the ``gap``."""
    size = np.abs(v)
    direction = v / np.where(size > 0, size, 1)
    current = y @ v
    rhs = np.concatenate([gap.real[turns], gap.imag[sizes]])
    if isinstance(y, np.ndarray):
        by_angle = 1j * v[:, None] * (np.diag(current) - y * v[None, :]).conj()
        by_size = v[:, None] * (y * direction[None, :]).conj() + np.diag(current.conj() * direction)
        jacobian = np.block(
            [
                [by_angle.real[np.ix_(turns, turns)], by_size.real[np.ix_(turns, sizes)]],
                [by_angle.imag[np.ix_(sizes, turns)], by_size.imag[np.ix_(sizes, sizes)]],
            ]
        )
        return np.asarray(np.linalg.solve(jacobian, rhs))
    import scipy.sparse as sp
    import scipy.sparse.linalg

    at = sp.diags_array(v)
    by_angle = (1j * at @ (sp.diags_array(current) - y @ at).conj()).tocsr()
    by_size = (
        at @ (y @ sp.diags_array(direction)).conj() + sp.diags_array(current.conj() * direction)
    ).tocsr()
    blocks = [
        [by_angle.real[turns][:, turns], by_size.real[turns][:, sizes]],
        [by_angle.imag[sizes][:, turns], by_size.imag[sizes][:, sizes]],
    ]
    return np.asarray(scipy.sparse.linalg.splu(sp.block_array(blocks, format="csc")).solve(rhs))
