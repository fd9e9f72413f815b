"""Initial short-circuit currents at one place from its driving-point impedances.

IEC 60909-0 clause 4.2 (2001 edition; formulas from memory, checked in the tests against a solution in
phase coordinates), without its voltage factor: ``voltage`` is what stands before the fault. Zero
sequence enters as an admittance, so that a place without any such path is exactly zero.
"""

from __future__ import annotations

import msgspec
import numpy as np
import numpy.typing as npt

from seqfault.equations.symmetrical import A, Complex


class BoltedCurrents(msgspec.Struct, frozen=True, eq=False):
    """Complex currents (n,) A of bolted faults: three-phase, line-line, line-line-ground (phase b, c
    and to earth) and line-ground.
    """

    k3: Complex
    k2: Complex
    k2e_b: Complex
    k2e_c: Complex
    k2e_earth: Complex
    k1: Complex


def bolted_currents(
    voltage: npt.ArrayLike, z1: npt.ArrayLike, z2: npt.ArrayLike, y0: npt.ArrayLike
) -> BoltedCurrents:
    """Currents of bolted faults.

    ``voltage`` (n,) V phase to earth before the fault, ``z1``, ``z2`` (n,) ohm, ``y0`` (n,) S, the
    reciprocal of Z0. Faulted phases a; b and c.
    """
    v, z1, z2, y0 = (np.asarray(x, complex) for x in (voltage, z1, z2, y0))
    k3 = v / z1
    k2 = -1j * np.sqrt(3) * v / (z1 + z2)
    together = z1 + z2 + z1 * z2 * y0  # (Z1 Z2 + Z1 Z0 + Z2 Z0)/Z0
    i1 = v * (1 + z2 * y0) / together
    i2 = -v / together
    i0 = -v * z2 * y0 / together
    return BoltedCurrents(
        k3=k3,
        k2=k2,
        k2e_b=i0 + A.conjugate() * i1 + A * i2,
        k2e_c=i0 + A * i1 + A.conjugate() * i2,
        k2e_earth=3 * i0,
        k1=3 * v * y0 / ((z1 + z2) * y0 + 1),
    )
