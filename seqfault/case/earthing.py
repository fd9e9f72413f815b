"""Rules for neutrals, for what is joined to them, and for earthing transformers."""

from __future__ import annotations

from seqfault.case.records import Case, EarthingTransformer, Neutral
from seqfault.case.subject import ROOT3, Subject, real, said, voltage_cure
from seqfault.case.transformers import windings
from seqfault.case.wording import amount
from seqfault.errors import quoted

_LET_THROUGH = (0.05, 20e3)  # A, common practice


def check_neutral(subject: Subject, neutral: Neutral, users: tuple[float, ...]) -> None:
    """Tell what is wrong or doubtful; ``users`` are the rated voltages (V) of its star points."""
    fields = ("parallel_resistance", "current", "voltage", "duration", "continuous")
    sound = subject.positive({field: getattr(neutral, field) for field in fields})
    sound &= subject.positive({"temperature_rise": neutral.temperature_rise})
    sound &= subject.positive({"resistance": neutral.resistance, "reactance": neutral.reactance}, zero=True)
    if not users:
        subject.warn("", "no star point is joined to it")
    if neutral.kind == "arc-suppression":
        _coil(subject, neutral)
        return
    for field in ("detuning", "loss"):
        if getattr(neutral, field) is not None:
            subject.error(field, 'it goes with kind = "arc-suppression", and that is not given')
    sound &= _one_way(subject, neutral)
    sound &= _ratio(subject, neutral)
    impedance = _ohms(neutral) if sound else None
    voltage, current = real(neutral.voltage), real(neutral.current)
    if sound and voltage and current:
        stated = voltage / ROOT3 / current
        if impedance and abs(stated - impedance) > 0.05 * impedance:
            subject.error(
                "current",
                f"{said(neutral.current)} at {said(neutral.voltage)} makes {stated:.4g} ohm, "
                f"and the ohms given make {impedance:.4g}; {_correction(impedance / stated)}",
            )
        impedance = impedance or stated
    _against_users(subject, neutral, users, impedance)


def _correction(ratio: float) -> str:
    if abs(ratio / 3 - 1) < 0.05:
        return "these are 3 times as many, as in ohm a phase (3 Zn); write the ohms of the device itself"
    if abs(ratio * 3 - 1) < 0.05:
        return "these are a third; correct one of the two"
    return "correct one of the two"


def _coil(subject: Subject, neutral: Neutral) -> None:
    """Tell what is wrong about an arc-suppression coil, which is stated by its detuning."""
    for field in ("resistance", "reactance", "current", "voltage", "ratio"):
        if getattr(neutral, field) is not None:
            subject.error(field, "an arc-suppression coil is stated by detuning and loss; leave this out")
    if neutral.detuning is None:
        subject.error(
            "detuning",
            'this is missing; an arc-suppression coil needs it, as in "+5 %", '
            'or "0 %" where it is tuned exactly',
        )
    for field, low, high, limits in (
        ("detuning", -0.5, 0.5, "lies between -50 % and +50 %"),
        ("loss", 0.0, 0.5, "is 0 % or more, and below 50 %"),
    ):
        value = real(getattr(neutral, field))
        if value is not None and not (low < value < high or (field == "loss" and value == 0)):
            subject.error(field, f"{said(getattr(neutral, field))}: this {limits}")


def _ratio(subject: Subject, neutral: Neutral) -> bool:
    """Tell whether the ratio of a distribution transformer can be."""
    if neutral.ratio is None:
        return True
    if neutral.ratio <= 0:
        subject.error("ratio", f"{neutral.ratio:g}: this must be more than zero")
        return False
    if neutral.resistance is None and neutral.reactance is None:
        subject.error("ratio", "it goes with the ohms on the secondary; give resistance or reactance")
        return False
    if neutral.ratio < 1:
        problem = f"{neutral.ratio:g} is below 1; the ratio is that of the star point's side to the other"
        subject.warn("ratio", f"{problem}; write {1 / neutral.ratio:.4g}?")
    return True


def _one_way(subject: Subject, neutral: Neutral) -> bool:
    """Tell whether ohms are stated, or a current with its voltage."""
    series = [part for part in (neutral.resistance, neutral.reactance) if part is not None]
    if series and not any(part.value for part in series):
        subject.error("", '0 ohm to earth is written neutral = "solid" at the star point')
        return False
    if neutral.current is not None and neutral.voltage is None:
        subject.error("voltage", "this is missing; current needs it, line to line")
        return False
    if neutral.voltage is not None and neutral.current is None and not series:
        subject.error("current", "this is missing; voltage alone gives no ohms")
        return False
    if not series and neutral.parallel_resistance is not None:
        subject.error("parallel_resistance", "it stands beside a reactance; alone it is written resistance")
        return False
    if not series and neutral.current is None:
        subject.error("", "its ohms are missing; give resistance, reactance, or current with voltage")
        return False
    return True


def _ohms(neutral: Neutral) -> float | None:
    """Return the magnitude that the star point sees of the ohm fields, or None without any."""
    series = complex(real(neutral.resistance) or 0, real(neutral.reactance) or 0)
    beside = real(neutral.parallel_resistance)
    if not series:
        return None
    ohms = abs(series * beside / (series + beside)) if beside else abs(series)
    return ohms * (neutral.ratio or 1.0) ** 2


def _against_users(
    subject: Subject, neutral: Neutral, users: tuple[float, ...], impedance: float | None
) -> None:
    if not users:
        return
    highest = max(users)
    if impedance:
        let_through = highest / ROOT3 / impedance
        text = (
            f"it lets through {amount(let_through, 'A')} at {amount(highest, 'V')}, "
            "outside the usual 0.05 A to 20 kA"
        )
        subject.usual("", let_through, _LET_THROUGH, text, 1e3)
    voltage = real(neutral.voltage)
    if voltage and all(max(voltage / user, user / voltage) > 1.3 for user in users):
        subject.warn(
            "voltage",
            f"{said(neutral.voltage)} is {voltage / highest:.3g} times the "
            f"{amount(highest, 'V')} of its star point{voltage_cure(voltage / highest)}",
        )


def check_earthing_transformer(subject: Subject, unit: EarthingTransformer) -> None:
    """Tell what is wrong or doubtful about an earthing transformer."""
    subject.bus("bus", unit.bus)
    subject.impedance("z0", unit.z0)
    subject.own_base("z0", unit.z0, unit.rating)
    subject.x_over_r("x_over_r", unit.x_over_r)
    if isinstance(unit.z0.value, complex) and unit.x_over_r is not None:
        subject.error("x_over_r", "z0 states its resistance already; leave this out")
    subject.positive({"rating": unit.rating, "duration": unit.duration})
    subject.volt_amperes(unit.rating)
    subject.star_point("neutral", unit.neutral)
    if unit.neutral == "isolated":
        subject.warn("neutral", '"isolated" leaves the earthing transformer without effect')


def star_points(case: Case) -> dict[str, tuple[float, ...]]:
    """Return the rated line-to-line voltages (V) of the star points on each neutral."""
    users: dict[str, list[float]] = {}

    def join(name: str | None, voltage: float | None) -> None:
        if name is not None and voltage and voltage > 0:
            users.setdefault(name, []).append(voltage)

    for unit in case.transformers.values():
        for winding in windings(unit).values():
            join(winding.neutral, real(winding.voltage))
    for machine in case.generators.values():
        bus = case.buses.get(machine.bus)
        join(machine.neutral, real(machine.voltage or (bus.voltage if bus else None)))
    for earthing in case.earthing_transformers.values():
        bus = case.buses.get(earthing.bus)
        join(earthing.neutral, real(bus.voltage) if bus else None)
    return {name: tuple(voltages) for name, voltages in users.items()}


def star_point_named(case: Case, name: str) -> str | None:
    """Return what to say when a neutral has the name that a star point of a unit has already."""
    unit, _, side = name.rpartition(".")
    if side in ("hv", "lv", "tv") and unit in case.transformers:
        return f"this is how the {side} star point of transformer {quoted(unit)} is named"
    if side == "neutral" and unit in case.generators:
        return f"this is how the star point of generator {quoted(unit)} is named"
    if side == "neutral" and unit in case.earthing_transformers:
        return f"this is how the star point of earthing transformer {quoted(unit)} is named"
    return None
