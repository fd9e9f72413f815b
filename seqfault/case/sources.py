"""Rules for infeeds, generators and motors."""

from __future__ import annotations

from seqfault.case.quantities import Quantity
from seqfault.case.records import Generator, Infeed, Motor
from seqfault.case.subject import ROOT3, Subject, is_usual, real, said
from seqfault.case.wording import amount, digits
from seqfault.errors import quoted

_FAULT_CURRENT = (10.0, 100e3)  # A, common practice
_SUBTRANSIENT = (0.03, 0.80)
_LOCKED_ROTOR = (2.0, 12.0)
_SHARE = (0.5, 1.0)  # of efficiencies and power factors at rated load
_LEAST_X_OVER_R = 0.2


def check_infeed(subject: Subject, infeed: Infeed) -> None:
    """Tell what is wrong or doubtful about a utility infeed."""
    bus = subject.bus("bus", infeed.bus)
    sound = subject.positive({"three_phase": infeed.three_phase, "line_ground": infeed.line_ground})
    sound &= subject.impedance("z1", infeed.z1) & subject.impedance("z2", infeed.z2)
    subject.x_over_r("x_over_r", infeed.x_over_r)
    if infeed.x_over_r is not None and 0 <= infeed.x_over_r < _LEAST_X_OVER_R:
        text = f"{infeed.x_over_r:g} is below the usual {_LEAST_X_OVER_R:g}; is it R/X?"
        subject.warn("x_over_r", text)
    subject.x_over_r("x0_over_r0", infeed.x0_over_r0)
    subject.resistive("z1", infeed.z1)
    subject.resistive("z2", infeed.z2)
    _held(subject, "voltage", infeed.voltage)
    _fault_level(subject, infeed)
    _zero_sequence(subject, infeed)
    if sound and bus is not None and (nominal := real(bus.voltage)) and nominal > 0:
        z1 = _positive_sequence(infeed, nominal)
        if z1:
            level = nominal / ROOT3 / abs(z1)
            if not is_usual(level, _FAULT_CURRENT):
                field = "three_phase" if infeed.three_phase else "z1"
                text = (
                    f"the three-phase fault level is {amount(level, 'A')}, outside the usual 10 A to 100 kA"
                )
                subject.usual(field, level, _FAULT_CURRENT, text, 1e3)
            _earth_fault_level(subject, infeed, z1, nominal)


def _held(subject: Subject, field: str, voltage: Quantity | None) -> None:
    """Complain of a voltage that nothing holds, of nominal voltage."""
    value = real(voltage)
    if voltage is not None and value is not None and not 0.5 <= value <= 1.5:
        subject.error(field, f"{said(voltage)}: a voltage held lies between 0.5 and 1.5 pu of nominal")


def _fault_level(subject: Subject, infeed: Infeed) -> None:
    if infeed.three_phase is None and infeed.z1 is None:
        subject.error("", "the fault level is missing; give three_phase with x_over_r, or z1")
    elif infeed.three_phase is not None and infeed.z1 is not None:
        subject.error("", "both three_phase and z1 are given; give one of the two")
    elif infeed.three_phase is not None and infeed.x_over_r is None:
        subject.error("x_over_r", "this is missing; three_phase needs it, as in 10")
    elif infeed.z1 is not None and infeed.x_over_r is not None:
        subject.error("x_over_r", "z1 leaves no use for it; write z1 with both parts, R+jX")


def _zero_sequence(subject: Subject, infeed: Infeed) -> None:
    if infeed.line_ground is None and infeed.z0 is None:
        subject.error(
            "",
            "its zero sequence is missing; give line_ground with x0_over_r0, or z0, "
            'or z0 = "open" where no earth current can come from it',
        )
    elif infeed.line_ground is not None and infeed.z0 is not None:
        subject.error("", "both line_ground and z0 are given; give one of the two")
    elif infeed.line_ground is not None and infeed.x0_over_r0 is None:
        subject.error("x0_over_r0", "this is missing; line_ground needs it, as in 5")
    elif infeed.line_ground is None and infeed.x0_over_r0 is not None:
        subject.error("x0_over_r0", "it goes with line_ground, and that is not given")
    if isinstance(infeed.z0, Quantity):
        subject.impedance("z0", infeed.z0, capacitive=True)
        subject.resistive("z0", infeed.z0)


def _positive_sequence(infeed: Infeed, nominal: float) -> complex | None:
    """Return Z1 in ohm, or None where it is not stated."""
    if infeed.z1 is not None:
        return complex(infeed.z1.value)
    level = real(infeed.three_phase)
    if infeed.three_phase is None or not level or infeed.x_over_r is None or infeed.x_over_r < 0:
        return None
    current = level if infeed.three_phase.dimension == "current" else level / (ROOT3 * nominal)
    direction = complex(1, infeed.x_over_r)
    return nominal / ROOT3 / current * direction / abs(direction)


def _earth_fault_level(subject: Subject, infeed: Infeed, z1: complex, nominal: float) -> None:
    """|Z1 + Z2 + Z0| = 3 V / Ik1 leaves no room for Z0 beyond Ik1 = 3 V / |Z1 + Z2|."""
    current = real(infeed.line_ground)
    if not current:
        return
    z2 = complex(infeed.z2.value) if infeed.z2 is not None else z1
    largest = ROOT3 * nominal / abs(z1 + z2)
    if current > largest * (1 + 1e-9):
        subject.error(
            "line_ground",
            f"{said(infeed.line_ground)}: with this positive sequence the largest earth-fault "
            f"current is {amount(largest, 'A')}",
        )


def check_generator(subject: Subject, generator: Generator) -> None:
    """Tell what is wrong or doubtful about a synchronous machine."""
    bus = subject.bus("bus", generator.bus)
    subject.positive({"rating": generator.rating, "voltage": generator.voltage})
    subject.positive({"resistance": generator.resistance, "c0": generator.c0}, zero=True)
    subject.volt_amperes(generator.rating)
    for field in ("subtransient", "transient", "synchronous", "x2", "x0"):
        subject.impedance(field, getattr(generator, field))
    subject.rated_voltage("voltage", generator.voltage, generator.bus)
    subject.star_point("neutral", generator.neutral)
    _held(subject, "holds", generator.holds)
    if generator.neutral not in (None, "isolated") and generator.x0 is None:
        subject.error("x0", f"this is missing; neutral = {quoted(generator.neutral or '')} needs it")
    voltage = real(generator.voltage) or (real(bus.voltage) if bus else None)
    rating, reactance = real(generator.rating), generator.subtransient
    if voltage and rating and rating > 0:
        share = abs(reactance.value)
        if reactance.dimension == "impedance":
            share *= rating / voltage**2
        text = f"{said(reactance)} is {digits(100 * share)} %, outside the usual 3 to 80 %"
        subject.usual("subtransient", share, _SUBTRANSIENT, text, 100)


def check_motor(subject: Subject, motor: Motor) -> None:
    """Tell what is wrong or doubtful about an induction motor."""
    subject.bus("bus", motor.bus)
    subject.positive(
        {
            "rating": motor.rating,
            "shaft_power": motor.shaft_power,
            "voltage": motor.voltage,
            "speed": motor.speed,
        }
    )
    subject.positive({"c0": motor.c0}, zero=True)
    subject.volt_amperes(motor.rating)
    subject.count(motor.count)
    subject.x_over_r("x_over_r", motor.x_over_r)
    subject.rated_voltage("voltage", motor.voltage, motor.bus)
    _motor_rating(subject, motor)
    if motor.locked_rotor <= 0:
        subject.error("locked_rotor", f"{motor.locked_rotor:g}: this must be more than zero")
    elif not is_usual(motor.locked_rotor, _LOCKED_ROTOR):
        text = f"{motor.locked_rotor:g} times rated current is outside the usual 2 to 12"
        subject.usual("locked_rotor", motor.locked_rotor, _LOCKED_ROTOR, text, 100)


def _motor_rating(subject: Subject, motor: Motor) -> None:
    parts = {"efficiency": motor.efficiency, "power_factor": motor.power_factor}
    if motor.rating is None and motor.shaft_power is None:
        subject.error(
            "",
            "its size is missing; give rating in kVA, or shaft_power with efficiency and power_factor",
        )
    elif motor.rating is not None and motor.shaft_power is not None:
        subject.error("", "both rating and shaft_power are given; give one of the two")
    elif motor.shaft_power is not None:
        for field, part in parts.items():
            if part is None:
                subject.error(field, "this is missing; shaft_power needs it, as in 0.9")
    for field, part in parts.items():
        value = part.value if isinstance(part, Quantity) else part
        if value is None or isinstance(value, complex):
            continue
        if 0 < value <= 1:
            said_of = said(part) if isinstance(part, Quantity) else f"{part:g}"
            subject.usual(field, value, _SHARE, f"{said_of} is outside the usual 0.5 to 1", 100)
            continue
        text = said(part) if isinstance(part, Quantity) else f"{part:g}"
        repair = f'; write "{value:g} %"' if 2 <= value <= 100 else ""
        subject.error(field, f"{text}: this is above 0 and up to 1{repair}")
