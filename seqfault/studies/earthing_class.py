"""How a system is earthed: by the ratios of its impedances, and by the voltage of its sound phases.

The ratios are a rule of thumb; the coefficient of grounding is what they stand for. Sources: IEEE Std
C62.92.1 (classes of system grounding, table 1, from memory); IEC 60071-1 (earth-fault factor).
"""

from __future__ import annotations

import msgspec
import numpy as np

from seqfault.faults.neutral_faults import EarthFaults
from seqfault.faults.neutral_ports import KINDS
from seqfault.model.elements import Complex

EFFECTIVE = 0.8
"""Coefficient of grounding up to which a system is effectively earthed."""
X0_OVER_X1, R0_OVER_X1 = 3.0, 1.0
"""Ratios up to which, X0 not capacitive, a system is taken as effectively earthed."""
LOW_REACTANCE = 10.0
RESISTIVE = 2.0
HIGH_RESISTANCE = 0.01
"""Share of the three-phase current below which resistance earthing is called high."""


class EarthingClass(msgspec.Struct, frozen=True):
    """``z0``, ``z1`` ohm at the place, ``z0`` infinite without a path; ratios nan where they are none.

    ``by_ratios`` the class by the rule of thumb, ``within_ratios`` whether it says effectively earthed;
    ``factor`` the highest earth-fault factor, of fault ``kind``, on ``phase``.
    """

    z0: complex
    z1: complex
    x0_over_x1: float
    r0_over_x1: float
    r0_over_x0: float
    by_ratios: str
    within_ratios: bool
    factor: float
    kind: str
    phase: str

    @property
    def coefficient(self) -> float:
        """Coefficient of grounding: sound-phase voltage over the line voltage before the fault."""
        return float(self.factor / np.sqrt(3))

    @property
    def effective(self) -> bool:
        """Whether the coefficient makes the system effectively earthed here."""
        return self.coefficient <= EFFECTIVE


def earthing_class(faults: EarthFaults, impedance: Complex, ohms: complex, coil: bool) -> EarthingClass:
    """The class with the first of ``faults``; ``impedance`` (3,) of the place, ``ohms`` of the device."""
    z0, z1 = complex(faults.z0[0]), complex(impedance[1])
    x0_x1, r0_x1, r0_x0 = _ratio(z0.imag, z1.imag), _ratio(z0.real, z1.imag), _ratio(z0.real, z0.imag)
    within = bool(0 <= x0_x1 <= X0_OVER_X1 and r0_x1 <= R0_OVER_X1)
    three_phase = faults.before / abs(z1)
    share = float(abs(faults.earth[0, 0])) / three_phase
    factors = faults.factor[:, 0]
    k = int((factors >= factors.max() * (1 - 1e-12)).argmax())
    phase = "bc"[int(np.abs(faults.sound[0, :, 0]).argmax())] if k == 0 else "a"
    return EarthingClass(
        z0=z0,
        z1=z1,
        x0_over_x1=x0_x1,
        r0_over_x1=r0_x1,
        r0_over_x0=r0_x0,
        by_ratios="effectively earthed" if within else _name(z0, x0_x1, share, coil, ohms),
        within_ratios=within,
        factor=float(factors[k]),
        kind=KINDS[k],
        phase=phase,
    )


def _ratio(a: float, b: float) -> float:
    return a / b if b and np.isfinite(a) and np.isfinite(b) else float("nan")


def _name(z0: complex, x0_over_x1: float, share: float, coil: bool, ohms: complex) -> str:
    """The class of a system whose ratios are not those of effective earthing."""
    if coil and np.isfinite(ohms):
        return "resonant earthed"
    if not np.isfinite(z0):
        return "unearthed, without a path for earth current"
    if z0.real >= RESISTIVE * abs(z0.imag):
        return f"{'high' if share < HIGH_RESISTANCE else 'low'}-resistance earthed"
    if z0.imag < 0:
        more = " beside its resistance" if np.isfinite(ohms) and ohms.real else ""
        return f"earthed by its capacitance{more}"
    if z0.real > z0.imag:
        return "between resistance and reactance earthed"
    if 0 <= x0_over_x1 <= LOW_REACTANCE:
        return "low-reactance earthed"
    return "high-reactance earthed"
