"""Earth faults at one place for many impedances of one neutral, in SI, no factorisation for any."""

from __future__ import annotations

import msgspec
import numpy as np

from seqfault.equations.per_unit import base_current, base_impedance
from seqfault.equations.symmetrical import A
from seqfault.errors import NoAnswerError
from seqfault.faults.converters import settle
from seqfault.faults.neutral_ports import KindForms, NeutralPorts, device_of
from seqfault.faults.ports import CANCELLED
from seqfault.model.elements import Complex, Floats


class EarthFaults(msgspec.Struct, frozen=True, eq=False):
    """Earth faults for n impedances of the neutral; the first axis is the kind, as in ``KINDS``.

    ``ohms`` (n,) of the device, infinite open; ``earth`` (2, n) A, 3I0 into the fault; ``phase`` (2, n)
    A, the greatest faulted phase; ``neutral`` (2, n) A from the star point to earth; ``star`` (2, n) V of
    the star point; ``sound`` (2, 2, n) V of the sound phases, the second of line-line-ground nan; ``z0``
    (n,) ohm, infinite without a path; ``before`` V, the phase voltage before the fault.
    """

    ohms: Complex
    earth: Complex
    phase: Floats
    neutral: Complex
    star: Complex
    sound: Complex
    z0: Complex
    before: float

    @property
    def factor(self) -> Floats:
        """Earth-fault factor (2, n): the higher sound phase over the voltage before (IEC 60071-1)."""
        return np.asarray(np.nanmax(np.abs(self.sound), axis=1) / self.before)

    @property
    def power(self) -> Floats:
        """W (2, n) in the neutral's resistance."""
        resistance = np.where(np.isfinite(self.ohms), self.ohms, 0).real
        return np.asarray(np.abs(self.neutral) ** 2 * resistance)


def earth_faults(ports: NeutralPorts, ohms: Complex) -> EarthFaults:
    """Both kinds of earth fault for each of ``ohms`` (n,), infinite for an open neutral.

    Raises ``NoAnswerError`` at series resonance, or where converters find no steady state.
    """
    model = ports.model
    ohms = np.asarray(ohms, complex)
    device = device_of(ohms, ports.device_base)
    nominal, star_nominal = float(model.nominal[ports.place]), float(model.stars.base[ports.star])
    ampere = float(base_current(nominal, model.base_power))
    star_ampere = 3 * float(base_current(star_nominal, model.base_power))
    volt, star_volt = nominal / np.sqrt(3), star_nominal / np.sqrt(3)
    earth, neutral, star = (np.zeros((2, len(ohms)), complex) for _ in range(3))
    phase = np.zeros((2, len(ohms)))
    sound = np.full((2, 2, len(ohms)), np.nan, complex)
    for k, forms in enumerate(ports.forms):
        driven = _driven(ports, forms, device)
        i0, i1, i2 = (form.at(device) * driven for form in forms.sequence)
        earth[k] = 3 * ampere * i0
        b, c = i0 + A.conjugate() * i1 + A * i2, i0 + A * i1 + A.conjugate() * i2
        phase[k] = np.maximum(np.abs(b), np.abs(c)) * ampere if k else np.abs(earth[k])
        neutral[k] = star_ampere * forms.neutral.at(device) * driven
        star[k] = star_volt * forms.star.at(device) * driven
        for p, form in enumerate(forms.sound):
            sound[k, p] = volt * form.at(device) * driven
    path = ports.zero.bottom @ device != 0
    z0 = np.full(len(ohms), np.inf, complex)
    z0[path] = ports.zero.at(device[:, path]) * base_impedance(nominal, model.base_power)
    return EarthFaults(
        ohms=ohms,
        earth=earth,
        phase=phase,
        neutral=neutral,
        star=star,
        sound=sound,
        z0=z0,
        before=abs(ports.before) * volt,
    )


def driven_voltage(ports: NeutralPorts, device: Complex) -> Complex:
    """Per-unit voltage (2, n) that drives each kind of fault for ``device`` (2, n).

    Raises ``NoAnswerError`` as ``earth_faults`` does.
    """
    return np.stack([_driven(ports, forms, device) for forms in ports.forms])


def _driven(ports: NeutralPorts, forms: KindForms, device: Complex) -> Complex:
    """Per-unit voltage (n,) that drives the fault: the one before it, and what converters add."""
    size = forms.size @ np.abs(device)
    if (np.abs(forms.bottom @ device) <= CANCELLED * size).any():
        raise NoAnswerError(
            "the fault current has no limit: the network's impedances to this fault cancel (series"
            " resonance) or are zero; check reactances of opposite sign"
        )
    driven = np.full(device.shape[1], ports.before)
    converters = ports.model.converters
    if not converters.names:
        return driven
    before, live = ports.model.before[converters.bus], ports.model.live[converters.bus]
    positive = forms.sequence[1].at(device)
    for k in range(len(driven)):

        def respond(current: Complex, taken: complex = complex(positive[k])) -> Complex:
            drawn = taken * (ports.before + ports.lift @ current)
            return np.asarray(before + ports.among @ current - ports.lift * drawn)

        driven[k] += ports.lift @ settle(converters, live, respond).current
    return driven
