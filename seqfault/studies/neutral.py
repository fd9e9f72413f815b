"""A neutral as it stands: its duty, the system's charging current, the class of earthing, its failures."""

from __future__ import annotations

from collections.abc import Iterator, Sequence

import msgspec
import numpy as np
from msgspec.structs import replace

from seqfault.case.records import Neutral
from seqfault.equations.neutrals import warm_ratio
from seqfault.errors import CheckError
from seqfault.faults.network import Network
from seqfault.faults.neutral_faults import EarthFaults
from seqfault.faults.neutral_relays import RelayView
from seqfault.faults.solution import FaultSolution
from seqfault.model.coils import ARC_SUPPRESSION, impedance_of
from seqfault.studies.charging import Charging, charging_currents
from seqfault.studies.earthing_class import EarthingClass, earthing_class
from seqfault.studies.earthing_duty import EarthingDuty, earthing_duties
from seqfault.studies.neutral_states import (
    OPEN,
    NeutralState,
    NeutralStates,
    metal_networks,
    neutral_states,
    without,
)

TEMPERATURE_COEFFICIENT = 0.001
"""Per K: stainless-steel grid resistors (common practice, from memory)."""
RISES = ((60.0, 760.0), (600.0, 610.0), (np.inf, 385.0))
"""Rise (K) allowed up to a duration (s): IEEE Std C57.32, short time, extended time, continuous; from
memory."""
DURATION = 10.0
"""Seconds, where the record states none: the usual rating of a resistor (common practice)."""


class Duty(msgspec.Struct, frozen=True):
    """What the neutral is rated for, stated or assumed.

    ``duration`` s, ``rise`` K, ``coefficient`` per K, ``continuous`` A or None; ``assumed`` sentences on
    what the record does not state.
    """

    duration: float
    rise: float
    coefficient: float
    continuous: float | None
    assumed: tuple[str, ...]


class Standing(msgspec.Struct, frozen=True, eq=False):
    """The neutral as it stands in one state.

    ``ohms`` (2,) cold and hot; ``let_through`` (2,) A at nominal phase voltage across them; ``faults``
    their earth faults by the full network; ``solutions`` line-ground and line-line-ground with cold
    ohms, in full.
    """

    state: NeutralState
    ohms: tuple[complex, complex]
    let_through: tuple[float, float]
    faults: EarthFaults
    solutions: tuple[FaultSolution, FaultSolution]
    charging: Charging
    grounding: EarthingClass
    duties: tuple[EarthingDuty, ...]

    @property
    def heat(self) -> tuple[float, float]:
        """W at nominal phase voltage across the neutral, cold and hot."""
        cold, hot = (i**2 * z.real for i, z in zip(self.let_through, self.ohms, strict=True))
        return cold, hot

    @property
    def resistive_share(self) -> float:
        """Let-through of the cold neutral over the charging current, infinite without capacitance."""
        return self.let_through[0] / self.charging.total if self.charging.total else float("inf")


class Failure(msgspec.Struct, frozen=True, eq=False):
    """One row of what may fail: ``what`` is ``as it stands``, ``shorted``, ``open`` or ``lost``, ``name``
    the neutral lost; ``faults`` of one column.
    """

    what: str
    name: str
    faults: EarthFaults


class NeutralReport(msgspec.Struct, frozen=True, eq=False):
    """All there is to tell of a neutral as it stands; ``failures`` by state."""

    neutral: NeutralStates
    duty: Duty
    standing: tuple[Standing, ...]
    failures: tuple[tuple[Failure, ...], ...]


def study_neutral(
    networks: Sequence[Network],
    name: str,
    place: str | None = None,
    *,
    device: str | None = None,
    coefficient: float | None = None,
    relays: Sequence[RelayView] = (),
) -> NeutralReport:
    """The neutral ``name`` as it stands in the states of ``networks``, for earth faults at ``place``.

    ``place`` is the bus of its star point unless stated, ``coefficient`` (per K) that of its resistance,
    ``device`` what sweeps and targets try in its place, ``relays`` those whose currents are told. Raises
    ``RequestError`` for names that are not there, ``NoAnswerError`` at resonance.
    """
    neutral = neutral_states(networks, name, place, device, relays)
    duty = duty_of(neutral.record, coefficient)
    return NeutralReport(
        neutral=neutral,
        duty=duty,
        standing=tuple(_standing(neutral, state, duty) for state in neutral.states),
        failures=tuple(tuple(_failures(state)) for state in neutral.states),
    )


def duty_of(record: Neutral, coefficient: float | None = None) -> Duty:
    """Duration, temperature rise and temperature coefficient of ``record``, assumed where not stated."""
    assumed = []
    duration = float(record.duration.value.real) if record.duration else DURATION
    if record.duration is None:
        assumed.append(f"duration not stated, taken as {DURATION:g} s (common practice)")
    resistive = record.kind != ARC_SUPPRESSION and impedance_of(record).real > 0
    if coefficient is None:
        coefficient = TEMPERATURE_COEFFICIENT if resistive else 0.0
        if resistive:
            assumed.append(
                f"resistance taken to rise by {coefficient:g} of its cold value a kelvin (grids of"
                " stainless steel, common practice); --temperature-coefficient states another"
            )
    if record.temperature_rise is not None:
        rise = float(record.temperature_rise.value.real)
    else:
        rise = next(kelvin for longest, kelvin in RISES if duration <= longest)
        if resistive:
            assumed.append(
                f"temperature_rise not stated, taken as {rise:g} K, the limit for {duration:g} s (IEEE Std"
                " C57.32, from memory)"
            )
    continuous = float(record.continuous.value.real) if record.continuous else None
    return Duty(duration, rise, coefficient, continuous, tuple(assumed))


def hot_ohms(record: Neutral, cold: complex, duty: Duty) -> complex:
    """Ohm at the end of the duration: resistors at their temperature rise, coils as they are."""
    if record.kind == ARC_SUPPRESSION:
        return cold
    ratio = warm_ratio(duty.coefficient, duty.rise)
    warm = record
    for field in ("resistance", "parallel_resistance"):
        quantity = getattr(record, field)
        if quantity is not None:
            warm = replace(warm, **{field: replace(quantity, value=quantity.value * ratio)})
    by_plate = record.resistance is None and record.reactance is None
    return impedance_of(warm) * (ratio if by_plate else 1)


def _standing(neutral: NeutralStates, state: NeutralState, duty: Duty) -> Standing:
    # The record of this very state: an overlay may have changed its ohms.
    record = state.network.case.neutrals[neutral.name]
    ohms = (state.ohms, hot_ohms(record, state.ohms, duty))
    faults = state.faults(np.array(ohms))
    one, two = (state.network.fault(neutral.place, k) for k in ("line-ground", "line-line-ground"))
    _agree(faults, state.ports.before, (one, two))
    whole = state.whole.model
    return Standing(
        state=state,
        ohms=ohms,
        let_through=(neutral.phase_voltage / abs(ohms[0]), neutral.phase_voltage / abs(ohms[1])),
        faults=faults,
        solutions=(one, two),
        charging=charging_currents(whole, metal_networks(whole, state.star)),
        grounding=earthing_class(faults, one.impedance, state.ohms, record.kind == ARC_SUPPRESSION),
        duties=earthing_duties(state.network, state.star, (one, two)),
    )


def _agree(faults: EarthFaults, before: complex, solutions: tuple[FaultSolution, FaultSolution]) -> None:
    """Raise ``CheckError`` where the closed forms and the full solutions differ.

    Solutions count angles from the voltage ``before`` at the place, closed forms from that of the network.
    """
    turn = abs(before) / before
    for k, solution in enumerate(solutions):
        size = max(float(np.abs(solution.current).max()), 1e-3)
        gap = abs(complex(faults.earth[k, 0]) * turn - solution.residual)
        if gap > 1e-7 * size:
            raise CheckError(
                f"the closed form and the full solution of the {solution.fault.kind.name} fault differ by"
                f" {gap:.3g} A; the answer is withheld"
            )


def _failures(state: NeutralState) -> Iterator[Failure]:
    for what, ohms in (("as it stands", state.ohms), ("shorted", 0j), ("open", OPEN)):
        yield Failure(what, "", state.faults(np.array([ohms])))
    model = state.network.model
    own = metal_networks(model, state.star)
    for k, name in enumerate(model.stars.names):
        device = model.stars.kinds[k] == "neutral" and np.isfinite(model.stars.impedance[k])
        if k != state.star and device and own & metal_networks(model, k):
            yield Failure("lost", name, without(state, k).faults(np.array([state.ohms])))
