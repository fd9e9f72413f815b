"""A neutral device as a port: earth faults in closed form for every impedance it may have.

The network is factorised with the device left out; it comes back between its star point and earth, in
the port system of the faulted place p and the star point s. With g the port impedances of the network
grounded at its references, d and σ those of its free potentials (``networks.factors``) and z the
device's per-unit impedance, a fault current i0 and a device current j obey

    v_p = −g_pp i0 − g_ps j + d_p u,    z j = v_s = −g_sp i0 − g_ss j + d_s u,    σ u = −d_p i0 − d_s j

By Cramer's rule Z0 = −v_p/i0 = (N₁ + z N₀)/(D₁ + z D₀): four determinants for all ohms there are. With
z = α/β homogeneous, solid (α = 0) and open (β = 0) are exact, and so is a network that only this device
earths, whose σ is zero (a rank-one removal from it would divide by zero). Where capacitances alone tie
it, σ stays in the determinants and nothing large cancels.
"""

from __future__ import annotations

import msgspec
import numpy as np
from msgspec.structs import replace

from seqfault.equations.per_unit import base_impedance
from seqfault.equations.symmetrical import A
from seqfault.model.elements import Complex, Floats, Ints, Model
from seqfault.networks.assembly import assemble
from seqfault.networks.connectivity import free_space
from seqfault.networks.factors import SEEN, SequenceFactor, SequenceNetworks

KINDS = ("line-ground", "line-line-ground")
"""The kinds of fault solved here: phase a, phases b c, bolted."""
COUPLED = 1e-12
"""A star point that moves less than this share with the place is not joined to it."""


class Form(msgspec.Struct, frozen=True, eq=False):
    """(β t₁ + α t₀)/(β b₁ + α b₀) of a device α/β; ``top`` is (t₁, t₀), ``bottom`` (b₁, b₀)."""

    top: Complex
    bottom: Complex

    def at(self, device: Complex) -> Complex:
        """Values (n,) for ``device`` (2, n), rows β and α."""
        return np.asarray((self.top @ device) / (self.bottom @ device))


class KindForms(msgspec.Struct, frozen=True, eq=False):
    """One kind of fault, per unit of the voltage before it.

    ``sequence`` the current's components 0, 1, 2; ``neutral`` the device's current; ``star`` its star
    point's voltage; ``sound`` the voltages of the sound phases, ``sound_phases`` their names; ``size``
    (2,) what the common ``bottom`` is the sum of.
    """

    sequence: tuple[Form, Form, Form]
    neutral: Form
    star: Form
    sound: tuple[Form, ...]
    sound_phases: str
    bottom: Complex
    size: Floats


class NeutralPorts(msgspec.Struct, frozen=True, eq=False):
    """A faulted place and a neutral device of one network, the device free to choose.

    ``place`` bus and ``star`` star-point index; ``coupled`` whether the device has a say in earth faults
    at the place; ``before`` the place's per-unit voltage; ``z1``, ``z2`` its impedances per unit, ``zero``
    its Z0; ``forms`` one for each of ``KINDS``; ``lift`` (m,) and ``among`` (m, m) the positive-sequence
    port impedances from converters to the place and between them.
    """

    model: Model
    place: int
    star: int
    coupled: bool
    before: complex
    z1: complex
    z2: complex
    zero: Form
    forms: tuple[KindForms, ...]
    lift: Complex
    among: Complex

    @property
    def device_base(self) -> float:
        """Ohm of a device of 1 per unit, a third of the star point's base impedance: it carries 3 I0."""
        return float(base_impedance(self.model.stars.base[self.star], self.model.base_power)) / 3


def open_zero_sequence(model: Model, stars: tuple[int, ...]) -> SequenceFactor:
    """The zero-sequence network of ``model`` with the devices of these star points left out.

    Raises ``NoAnswerError`` where that network has no unique state.
    """
    impedance = model.stars.impedance.copy()
    impedance[list(stars)] = np.inf
    opened = replace(model, stars=replace(model.stars, impedance=impedance))
    stamps = assemble(opened, 0)
    return SequenceFactor(stamps, free_space(opened, 0, stamps.weak))


def neutral_ports(networks: SequenceNetworks, zero: SequenceFactor, place: int, star: int) -> NeutralPorts:
    """The closed forms for a fault at bus ``place`` and the device of star point ``star``.

    ``zero`` is the zero-sequence network without that device (``open_zero_sequence``).
    """
    model = networks.model
    node = int(model.node[place])
    ports = np.array([node, *model.converters.node], np.int64)
    positive = networks[1].port_impedance(ports, networks[1].columns(ports))
    z1 = complex(positive[0, 0])
    z2 = complex(networks[2].port_impedance(ports[:1], networks[2].columns(ports[:1]))[0, 0])
    top, bottom, j = _determinants(zero, node, int(model.stars.node[star]))
    return NeutralPorts(
        model=model,
        place=place,
        star=star,
        coupled=j != 0,
        before=complex(model.before[place]),
        z1=z1,
        z2=z2,
        zero=Form(top, bottom),
        forms=(_line_ground(z1, z2, top, bottom, j), _line_line_ground(z1, z2, top, bottom, j)),
        lift=positive[0, 1:],
        among=positive[1:, 1:],
    )


def device_of(ohms: Complex, base: float) -> Complex:
    """Rows β and α (2, n) of devices of ``ohms`` (n,), infinite open; ``base`` ohm of 1 per unit."""
    out = np.zeros((2, len(ohms)), complex)
    small = np.abs(ohms) <= base
    out[0, small], out[1, small] = 1, ohms[small] / base
    out[1, ~small] = 1
    known = ~small & np.isfinite(ohms)
    out[0, known] = base / ohms[known]
    return out


def _line_ground(z1: complex, z2: complex, n: Complex, d: Complex, j: complex) -> KindForms:
    """Phase a to earth: I0 = I1 = I2 = E/(Z1 + Z2 + Z0) with Z0 = n/d (IEC 60909-0 clause 4.2.4)."""
    bottom = (z1 + z2) * d + n
    current = Form(d, bottom)
    v0, v1, v2 = -n, z2 * d + n, -z2 * d
    return KindForms(
        sequence=(current, current, current),
        neutral=Form(j * np.array([1, 0]), bottom),
        star=Form(j * np.array([0, 1]), bottom),
        sound=(
            Form(v0 + A.conjugate() * v1 + A * v2, bottom),
            Form(v0 + A * v1 + A.conjugate() * v2, bottom),
        ),
        sound_phases="bc",
        bottom=bottom,
        size=np.abs(z1 + z2) * np.abs(d) + np.abs(n),
    )


def _line_line_ground(z1: complex, z2: complex, n: Complex, d: Complex, j: complex) -> KindForms:
    """Phases b, c to earth: Z2 and Z0 in parallel behind Z1 (IEC 60909-0 clause 4.2.3)."""
    bottom = z1 * z2 * d + (z1 + z2) * n
    return KindForms(
        sequence=(Form(-z2 * d, bottom), Form(z2 * d + n, bottom), Form(-n, bottom)),
        neutral=Form(-z2 * j * np.array([1, 0]), bottom),
        star=Form(-z2 * j * np.array([0, 1]), bottom),
        sound=(Form(3 * z2 * n, bottom),),
        sound_phases="a",
        bottom=bottom,
        size=np.abs(z1 * z2) * np.abs(d) + np.abs(z1 + z2) * np.abs(n),
    )


def _determinants(zero: SequenceFactor, place: int, star: int) -> tuple[Complex, Complex, complex]:
    """(N₁, N₀), (D₁, D₀) and the numerator of the device's current over β; that is 0 where not joined."""
    nodes = np.array([place, star])
    g = zero.columns(nodes)[nodes]
    part = zero.free.part[nodes]
    together = bool(part[0] == part[1])
    d, sigma, loose = _free(zero, int(part[0]), nodes[: 2 if together else 1])
    joined = together and loose < 2
    joined &= abs(g[0, 1]) > COUPLED * np.sqrt(abs(g[0, 0] * g[1, 1])) or bool(
        d.shape[1] and (np.abs(d).min(axis=0) > SEEN).any()
    )
    if joined:
        d, sigma = _even(d, sigma)
        full = np.block([[g, -d], [d.T, sigma]])
        moved = full[1:, 1:].copy()
        moved[:, 0] = -full[1:, 0]
        j = complex(np.linalg.det(moved))
        if j != 0:
            rest = [0, *range(2, len(full))]
            n = [np.linalg.det(full), np.linalg.det(full[np.ix_(rest, rest)])]
            own = [np.linalg.det(full[1:, 1:]), np.linalg.det(sigma)]
            return np.array(n), np.array(own), j
    d, sigma = _even(*_free(zero, int(part[0]), nodes[:1])[:2])
    full = np.block([[g[:1, :1], -d], [d.T, sigma]])
    both = np.ones(2, complex)
    return np.linalg.det(full) * both, np.linalg.det(sigma) * both, 0j


def _free(zero: SequenceFactor, part: int, nodes: Ints) -> tuple[Complex, Complex, int]:
    """Free potentials of ``part`` at ``nodes`` (r, k), σ (k, k) that binds them, and how many it lacks.

    Those that nothing binds have rows of exact zeros in σ, and stand as independent columns.
    """
    if part < 0:
        return np.zeros((len(nodes), 0), complex), np.zeros((0, 0), complex), 0
    k, slacks = int(zero.free.dimension[part]), int(zero.slacks[part])
    inside = zero.free.part == part
    basis, drop = zero.free.basis[inside, :k], zero.drop[inside, :k]
    load = zero.stamps.weak[inside, None] * basis
    sigma = basis.T @ load - load.T @ drop
    direction = zero.direction[nodes, :k]
    if not slacks:
        return direction, sigma, 0
    loose = zero.slack[part, :k, :slacks]
    bound = np.linalg.svd(loose)[0][:, slacks:]
    free = _independent(direction @ loose)
    whole = np.zeros((k - slacks + free.shape[1],) * 2, complex)
    whole[: k - slacks, : k - slacks] = bound.T @ sigma @ bound
    return np.concatenate([direction @ bound, free], axis=1), whole, free.shape[1]


def _even(direction: Complex, sigma: Complex) -> tuple[Complex, Complex]:
    """Free potentials scaled so that what binds each is 1; ratios of determinants do not change.

    Elimination would lose a σ of capacitances among port impedances otherwise.
    """
    own = np.abs(np.diagonal(sigma))
    scale = np.where(own > 0, 1 / np.sqrt(np.where(own > 0, own, 1)), 1)
    return direction * scale, sigma * scale * scale[:, None]


def _independent(columns: Complex) -> Complex:
    """Columns that span those of ``columns`` (r, x), none where all are too small to be seen."""
    u, s, _ = np.linalg.svd(np.where(np.abs(columns) > SEEN, columns, 0), full_matrices=False)
    rank = int((s > SEEN).sum())
    return np.asarray(u[:, :rank] * s[:rank])
