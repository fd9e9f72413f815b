"""Every hypothesis strategy of the project, and the plain networks they draw.

A ``PlainNetwork`` is a list of nameplates in SI units. From it come both the tree of a case file
(``to_case_tree``) and the network of the independent judge (``to_referee``), by arithmetic that
stands here alone: an error of the package in reading a nameplate shows as well as one in solving.
"""

from __future__ import annotations

import cmath
from dataclasses import dataclass, field, replace
from decimal import Decimal
from itertools import combinations
from math import pi, sqrt
from typing import Any

from hypothesis import strategies as st
from hypothesis.strategies import DrawFn, SearchStrategy

from tests.referee import Referee, Winding, star_pairs
from tests.spots import Spot, Trouble

LEVELS = (110e3, 33e3, 11e3, 0.4e3)
POWERS = {"": 0, "u": -6, "m": -3, "k": 3, "M": 6}
# Kind of fault: the choices of phases it leaves.
FAULT_PHASES = {
    "line-ground": ("a", "b", "c"),
    "line-line": ("bc", "ca", "ab"),
    "line-line-ground": ("bc", "ca", "ab"),
    "three-phase": ("abc",),
    "three-phase-ground": ("abc",),
}
KINDS_OF_WINDING = {"D": "delta", "d": "delta"}
KIND_OF_LETTER = {"Y": "star", "D": "delta", "Z": "zigzag", "A": "auto"}
LAG_OF_LETTER = {"Y": 0, "D": 1, "Z": 1}  # parity of clocks: two kinds alike are an even number apart
WITH_OWN_RETURN = ("five-limb", "shell-form", "three-single-phase")


def quantity(value: complex, unit: str, prefix: str = "") -> str:
    """Text that reads back as ``value`` of ``unit`` to the last bit, whatever the prefix."""

    def digits(number: float) -> str:
        return str(Decimal(repr(number)).scaleb(-POWERS[prefix]))

    if isinstance(value, complex):
        sign = "-" if value.imag < 0 else "+"
        return f"{digits(value.real)}{sign}j{digits(abs(value.imag))} {prefix}{unit}"
    return f"{digits(value)} {prefix}{unit}"


def share(value: complex, percent: bool) -> str:
    """A fraction as per cent or per unit."""
    if not percent:
        return quantity(value, "pu")
    if isinstance(value, complex):
        return f"{share(value.real, True)[:-2]}+j{share(value.imag, True)}"
    return f"{Decimal(repr(value)).scaleb(2)} %"


def at_angle(size: float, x_over_r: float) -> complex:
    """Impedance of a size and a ratio X/R."""
    return size / sqrt(1 + x_over_r**2) * complex(1, x_over_r)


def stated(**fields: Any) -> dict[str, Any]:
    """A table of the case file without the fields that nothing was said about."""
    return {key.rstrip("_"): value for key, value in fields.items() if value is not None}


@dataclass(frozen=True)
class PlainInfeed:
    """Stated in ohm, or by its fault levels at 1.0 pu where those are given."""

    bus: str
    nominal: float
    z1: complex | None
    three_phase: float | None  # A
    as_power: bool
    x_over_r: float | None
    z2: complex | None
    z0: complex | None
    line_ground: float | None  # A
    x0_over_r0: float | None

    def ohms(self) -> tuple[complex, complex, complex | None]:
        z1 = self.z1
        if self.three_phase is not None and self.x_over_r is not None:
            z1 = at_angle(self.nominal / sqrt(3) / self.three_phase, self.x_over_r)
            if self.as_power:
                z1 = at_angle(self.nominal**2 / self.power(), self.x_over_r)
        assert z1 is not None
        z2 = z1 if self.z2 is None else self.z2
        z0 = self.z0
        if self.line_ground is not None and self.x0_over_r0 is not None:
            # |z1 + z2 + z0| = 3 V / I with z0 = r (1 + jk): a quadratic in r, the positive root
            rest, k = z1 + z2, self.x0_over_r0
            whole = sqrt(3) * self.nominal / self.line_ground
            half = rest.real + k * rest.imag
            r = (sqrt(half**2 + (1 + k * k) * (whole**2 - abs(rest) ** 2)) - half) / (1 + k * k)
            z0 = complex(r, k * r)
        return z1, z2, z0

    def power(self) -> float:
        assert self.three_phase is not None
        return sqrt(3) * self.nominal * self.three_phase

    def entry(self) -> dict[str, Any]:
        level = None
        if self.three_phase is not None:
            level = quantity(self.three_phase, "A", "k")
            level = quantity(self.power(), "VA", "M") if self.as_power else level
        by_level = self.line_ground is not None
        z0 = "open" if self.z0 is None else quantity(self.z0, "ohm")
        return stated(
            bus=self.bus,
            z1=None if self.z1 is None else quantity(self.z1, "ohm"),
            three_phase=level,
            x_over_r=self.x_over_r,
            z2=None if self.z2 is None else quantity(self.z2, "ohm"),
            z0=None if by_level else z0,
            line_ground=quantity(self.line_ground, "A", "k") if self.line_ground else None,
            x0_over_r0=self.x0_over_r0,
        )

    def put(self, name: str, referee: Referee) -> None:
        referee.infeed(name, self.bus, *self.ohms())


@dataclass(frozen=True)
class PlainGenerator:
    """Reactances and resistance are fractions of the own rating."""

    bus: str
    nominal: float
    rating: float
    voltage: float | None
    subtransient: float
    x2: float | None
    x0: float | None
    resistance: float | None
    in_ohm: bool
    percent: bool
    neutral: str | None
    c0: float | None

    def base(self) -> float:
        return (self.voltage or self.nominal) ** 2 / self.rating

    def entry(self) -> dict[str, Any]:
        def part(value: float | None) -> str | None:
            if value is None:
                return None
            return quantity(value * self.base(), "ohm") if self.in_ohm else share(value, self.percent)

        return stated(
            bus=self.bus,
            rating=quantity(self.rating, "VA", "M"),
            voltage=None if self.voltage is None else quantity(self.voltage, "V", "k"),
            subtransient=part(self.subtransient),
            x2=part(self.x2),
            x0=part(self.x0),
            resistance=part(self.resistance),
            neutral=self.neutral,
            c0=None if self.c0 is None else quantity(self.c0, "F", "u"),
        )

    def put(self, name: str, referee: Referee) -> None:
        r = self.resistance or 0.0
        x2 = self.subtransient if self.x2 is None else self.x2
        x0 = self.subtransient if self.x0 is None else self.x0  # stated unless isolated
        z1, z2, z0 = (complex(r, x) * self.base() for x in (self.subtransient, x2, x0))
        referee.generator(name, self.bus, z1, z2, z0, self.neutral or "isolated")
        if self.c0:
            referee.capacitance(name, self.bus, self.c0)


@dataclass(frozen=True)
class PlainMotor:
    """One of ``count``; its impedance is that of the locked rotor, in both rotations."""

    bus: str
    nominal: float
    rating: float | None  # VA
    shaft_power: float | None  # W, with the next two
    efficiency: float | None
    power_factor: float | None
    voltage: float | None
    locked_rotor: float
    x_over_r: float
    count: int
    c0: float | None

    def entry(self) -> dict[str, Any]:
        return stated(
            bus=self.bus,
            rating=None if self.rating is None else quantity(self.rating, "VA", "k"),
            shaft_power=None if self.shaft_power is None else quantity(self.shaft_power, "W", "k"),
            efficiency=None if self.efficiency is None else share(self.efficiency, True),
            power_factor=self.power_factor,
            voltage=None if self.voltage is None else quantity(self.voltage, "V"),
            locked_rotor=self.locked_rotor,
            x_over_r=self.x_over_r,
            count=self.count,
            c0=None if self.c0 is None else quantity(self.c0, "F"),
        )

    def put(self, name: str, referee: Referee) -> None:
        rating = self.rating
        if self.shaft_power and self.efficiency and self.power_factor:
            rating = self.shaft_power / self.efficiency / self.power_factor
        assert rating is not None
        size = (self.voltage or self.nominal) ** 2 / rating / self.locked_rotor / self.count
        z = at_angle(size, self.x_over_r)
        referee.motor(name, self.bus, z, z)
        if self.c0:
            referee.capacitance(name, self.bus, self.c0 * self.count)


@dataclass(frozen=True)
class PlainLine:
    """One of ``count`` circuits: values per kilometre with a ``length`` in km, totals without."""

    bus_i: str
    bus_j: str
    z1: complex
    z0: complex
    c1: float | None
    c0: float | None
    susceptance: bool  # stated as b1, b0
    length: float | None
    count: int
    open_end: str | None
    earthed: bool = False

    def entry(self, frequency: float) -> dict[str, Any]:
        per = "" if self.length is None else "/km"
        entry = stated(
            from_=self.bus_i,
            to=self.bus_j,
            z1=quantity(self.z1, f"ohm{per}"),
            z0=quantity(self.z0, f"ohm{per}"),
            length=None if self.length is None else f"{self.length!r} km",
            count=None if self.count == 1 else self.count,
            open=[self.open_end] if self.open_end else None,
            earthed=self.earthed or None,
            out=self.earthed or None,  # only a line out of service is earthed
        )
        for order, farads in (("1", self.c1), ("0", self.c0)):
            if farads is not None and self.susceptance:
                entry[f"b{order}"] = quantity(2 * pi * frequency * farads, f"S{per}", "u")
            elif farads is not None:
                entry[f"c{order}"] = quantity(farads, f"F{per}", "u")
        return entry

    def size(self) -> float:
        """What stated values are multiplied by."""
        return 1.0 if self.length is None else self.length

    def to_earth(self) -> float:
        """Capacitance to earth of all circuits, F a phase."""
        return (self.c0 or 0.0) * self.size() * self.count

    def closed_ends(self) -> list[str]:
        """Buses it is connected to."""
        return [bus for bus in (self.bus_i, self.bus_j) if not self.earthed and bus != self.open_end]

    def put(self, name: str, referee: Referee) -> None:
        z1, z0 = (z * self.size() / self.count for z in (self.z1, self.z0))
        c1 = (self.c1 or 0.0) * self.size() * self.count
        ends = (self.open_end,) if self.open_end else ()
        sides = (self.bus_i, self.bus_j)
        referee.line(name, *sides, z1, z0, c1, self.to_earth(), ends, self.earthed)


@dataclass(frozen=True)
class PlainCoupling:
    """Zero-sequence coupling of every two of its lines: ohm in all, or ohm per km over some km."""

    lines: tuple[str, ...]
    z0: complex
    length: float | None  # km over which it is per km
    by_default: bool  # the length is that of the shorter line of each two, and not stated
    lengths: tuple[float, ...] = ()  # km of the lines, where it matters

    def entry(self) -> dict[str, Any]:
        per = "" if self.length is None else "/km"
        stand = self.length is not None and not self.by_default
        return stated(
            lines=list(self.lines),
            z0=quantity(self.z0, f"ohm{per}"),
            length=f"{self.length!r} km" if stand else None,
        )

    def put(self, name: str, referee: Referee) -> None:
        for first, second in combinations(self.lines, 2):
            referee.couple(first, second, self.ohms(first, second))

    def ohms(self, first: str, second: str) -> complex:
        """The whole coupling of two of its lines."""
        if self.by_default:
            km = dict(zip(self.lines, self.lengths, strict=True))
            return self.z0 * min(km[first], km[second])
        return self.z0 * (1.0 if self.length is None else self.length)


@dataclass(frozen=True)
class PlainTransformer:
    """One of ``count`` two-winding units; impedances are fractions of its rating."""

    hv_bus: str
    lv_bus: str
    group: str  # "YNyn", "Dd" ...: without the clock
    clock: int
    rating: float
    hv_voltage: float
    lv_voltage: float
    hv_neutral: str | None  # None where the winding brings out no neutral
    lv_neutral: str | None
    impedance: complex  # complex as stated; else its size
    x_over_r: float | None
    load_loss: float | None  # W
    z0: complex | None
    z0_over_z1: float | None
    tap: float | None
    magnetic_circuit: str | None
    count: int
    percent: bool

    def kinds(self) -> tuple[str, str]:
        hv, lv = self.group[0], self.group.lstrip("YND")[0]
        return KINDS_OF_WINDING.get(hv, "star"), KINDS_OF_WINDING.get(lv, "star")

    def z1(self) -> complex:
        """Per unit, complex."""
        if self.x_over_r is not None:
            return at_angle(abs(self.impedance), self.x_over_r)
        if self.load_loss is not None:
            r = self.load_loss / self.rating
            return complex(r, sqrt(abs(self.impedance) ** 2 - r * r))
        return complex(self.impedance)

    def entry(self) -> dict[str, Any]:
        hv = stated(bus=self.hv_bus, voltage=quantity(self.hv_voltage, "V", "k"))
        lv = stated(bus=self.lv_bus, voltage=quantity(self.lv_voltage, "V"))
        return stated(
            vector_group=f"{self.group}{self.clock}",
            rating=quantity(self.rating, "VA", "k"),
            hv=hv | stated(neutral=self.hv_neutral),
            lv=lv | stated(neutral=self.lv_neutral),
            impedance=share(self.impedance, self.percent),
            x_over_r=self.x_over_r,
            load_loss=None if self.load_loss is None else quantity(self.load_loss, "W", "k"),
            z0=None if self.z0 is None else share(self.z0, self.percent),
            z0_over_z1=self.z0_over_z1,
            tap=None if self.tap is None else share(self.tap, True),
            magnetic_circuit=self.magnetic_circuit,
            count=None if self.count == 1 else self.count,
        )

    def put(self, name: str, referee: Referee) -> None:
        base = self.lv_voltage**2 / self.rating / self.count  # lv ohms do not follow the tap
        z1 = self.z1()
        z0 = z1 * (1.0 if self.z0_over_z1 is None else self.z0_over_z1)
        z0 = z0 if self.z0 is None else self.z0
        tapped = self.hv_voltage * (1 + (self.tap or 0.0))
        stars = (self.hv_neutral or "isolated", self.lv_neutral or "isolated")
        sides = (self.hv_bus, self.lv_bus, *self.kinds(), self.clock, tapped, self.lv_voltage)
        referee.transformer(name, *sides, z1 * base, z0 * base, *stars)


@dataclass(frozen=True)
class PlainWinding:
    """One side of a unit; ``letters`` in capitals, "YN", "D", "A" ..., as its group writes them."""

    bus: str
    letters: str
    clock: int
    voltage: float
    neutral: str | None  # None where the winding brings out no neutral

    def entry(self) -> dict[str, Any]:
        voltage = quantity(self.voltage, "V", "k")
        return stated(bus=self.bus, voltage=voltage, neutral=self.neutral)


@dataclass(frozen=True)
class PlainUnit:
    """One of ``count`` units of two or three windings, of any kind, on any core.

    Impedances are fractions by pair, "hv_lv" and so on, on the rating of that pair where ``ratings``
    has one, else on that of the unit. With a zigzag winding ``z0`` is that of this winding alone,
    under the key "zigzag", on the rating of the unit; the others have z0 = z1.
    """

    sides: dict[str, PlainWinding]
    rating: float
    impedance: dict[str, complex]  # complex as stated; else sizes, with x_over_r
    ratings: dict[str, float]
    x_over_r: float | None
    z0: dict[str, complex] | None
    z0_over_z1: float | None
    tap: float | None
    magnetic_circuit: str | None
    z0_magnetising: complex | None
    zero_tests: tuple[complex, complex, complex] | None  # from_hv, from_lv, from_hv_lv_shorted
    count: int
    percent: bool

    def group(self) -> str:
        hv, *others = self.sides.values()
        return hv.letters + "".join(f"{w.letters.lower()}{w.clock}" for w in others)

    def auto(self) -> bool:
        return self.sides["lv"].letters == "A"

    def entry(self) -> dict[str, Any]:
        def pairs(values: dict[str, complex] | None) -> Any:
            if values is None:
                return None
            texts = {pair: share(z, self.percent) for pair, z in values.items()}
            return texts if len(texts) == 3 else next(iter(texts.values()))

        def part(value: complex | None) -> str | None:
            return None if value is None else share(value, self.percent)

        tests = None
        if self.zero_tests is not None:
            names = ("from_hv", "from_lv", "from_hv_lv_shorted")
            tests = {name: part(z) for name, z in zip(names, self.zero_tests, strict=True)}
        on = {pair: quantity(power, "VA", "k") for pair, power in self.ratings.items()}
        return stated(
            vector_group=self.group(),
            rating=quantity(self.rating, "VA", "k"),
            **{side: winding.entry() for side, winding in self.sides.items()},
            impedance=pairs(self.impedance),
            impedance_on=on or None,
            x_over_r=self.x_over_r,
            z0=pairs(self.z0),
            z0_over_z1=self.z0_over_z1,
            tap=None if self.tap is None else share(self.tap, True),
            magnetic_circuit=self.magnetic_circuit,
            z0_magnetising=part(self.z0_magnetising),
            zero_tests=tests,
            count=None if self.count == 1 else self.count,
        )

    def put(self, name: str, referee: Referee) -> None:
        volts = self.sides["lv"].voltage  # lv ohms do not follow the tap
        base = volts**2 / self.rating / self.count
        rated = {
            side: w.voltage * (1 + (self.tap or 0.0) * (side == "hv")) for side, w in self.sides.items()
        }

        def ohms(values: dict[str, complex]) -> dict[tuple[str, str], complex]:
            found = {}
            for pair, z in values.items():
                a, b = pair.split("_")
                found[a, b] = z * base * self.rating / self.ratings.get(pair, self.rating)
            return found

        one = self.impedance
        if self.x_over_r is not None:
            one = {pair: at_angle(abs(z), self.x_over_r) for pair, z in one.items()}
        zigzag = 0j if self.z0 is None else self.z0.get("zigzag", 0j) * base
        zero = one if self.z0 is None or zigzag else self.z0
        if self.z0_over_z1 is not None:
            zero = {pair: z * self.z0_over_z1 for pair, z in one.items()}
        zero_ohms = ohms(zero)
        if self.z0_magnetising is not None:  # half of the leakage on either side of it
            half = zero_ohms["hv", "lv"] / 2
            zero_ohms = star_pairs(hv=half, lv=half, tank=self.z0_magnetising * base)
        if self.zero_tests is not None:
            from_hv, from_lv, shorted = (z * base for z in self.zero_tests)
            middle = cmath.sqrt(from_lv * (from_hv - shorted))
            middle = -middle if middle.imag < 0 else middle
            last = "tv" if "tv" in self.sides else "tank"
            zero_ohms = star_pairs(hv=from_hv - middle, lv=from_lv - middle, **{last: middle})
        windings = []
        for side, w in self.sides.items():
            kind = "auto" if self.auto() and side != "tv" else KIND_OF_LETTER[w.letters[0]]
            own = zigzag * (rated[side] / volts) ** 2 if kind == "zigzag" else 0j
            star = w.neutral or "isolated"
            windings.append(Winding(side, w.bus, kind, rated[side], w.clock, star, own))
        referee.windings(name, windings, ohms(one), zero_ohms, volts)


@dataclass(frozen=True)
class PlainEarthingTransformer:
    """``z0`` in ohm a phase, or a fraction on ``rating`` at the voltage of the bus."""

    bus: str
    nominal: float
    z0: complex  # complex as stated; else its size
    x_over_r: float | None
    neutral: str
    rating: float | None
    in_ohm: bool

    def entry(self) -> dict[str, Any]:
        return stated(
            bus=self.bus,
            z0=quantity(self.z0, "ohm") if self.in_ohm else share(self.z0, True),
            x_over_r=self.x_over_r,
            neutral=self.neutral,
            rating=None if self.rating is None else quantity(self.rating, "VA", "k"),
        )

    def put(self, name: str, referee: Referee) -> None:
        z0 = self.z0 if self.x_over_r is None else at_angle(abs(self.z0), self.x_over_r)
        if not self.in_ohm:
            assert self.rating is not None
            z0 = z0 * self.nominal**2 / self.rating
        referee.earthing_transformer(name, self.bus, z0, self.neutral)


@dataclass(frozen=True)
class PlainReactor:
    """A series reactor: ohm, or fractions on ``rating`` at the voltage of its buses."""

    bus_i: str
    bus_j: str
    nominal: float
    impedance: complex  # complex as stated; else its size
    x_over_r: float | None
    z0: complex | None
    rating: float | None

    def entry(self) -> dict[str, Any]:
        def part(value: complex) -> str:
            return quantity(value, "ohm") if self.rating is None else share(value, True)

        return stated(
            from_=self.bus_i,
            to=self.bus_j,
            impedance=part(self.impedance),
            x_over_r=self.x_over_r,
            z0=None if self.z0 is None else part(self.z0),
            rating=None if self.rating is None else quantity(self.rating, "VA", "M"),
        )

    def put(self, name: str, referee: Referee) -> None:
        base = 1.0 if self.rating is None else self.nominal**2 / self.rating
        z1 = self.impedance if self.x_over_r is None else at_angle(abs(self.impedance), self.x_over_r)
        z0 = z1 if self.z0 is None else self.z0
        referee.reactor(name, self.bus_i, self.bus_j, z1 * base, z0 * base)


@dataclass(frozen=True)
class PlainCapacitor:
    """A bank by its power at nominal voltage, or by the capacitance of a phase."""

    bus: str
    nominal: float
    power: float | None  # var
    capacitance: float | None
    connection: str

    def entry(self) -> dict[str, Any]:
        return stated(
            bus=self.bus,
            power=None if self.power is None else quantity(self.power, "var", "k"),
            capacitance=None if self.capacitance is None else quantity(self.capacitance, "F", "u"),
            connection=self.connection,
        )

    def farads(self, frequency: float) -> float:
        """Of each of the three, those of a delta between two phases."""
        if self.capacitance is not None:
            return self.capacitance
        assert self.power is not None
        each = 3 if self.connection == "delta" else 1
        return self.power / each / (2 * pi * frequency * self.nominal**2)

    def put(self, name: str, referee: Referee, frequency: float) -> None:
        referee.capacitor(name, self.bus, self.farads(frequency), self.connection)


@dataclass(frozen=True)
class PlainLoad:
    """Power drawn before a fault, VA; an impedance during it."""

    bus: str
    power: complex
    connection: str

    def entry(self) -> dict[str, Any]:
        return stated(bus=self.bus, power=quantity(self.power, "VA"), connection=self.connection)

    def put(self, name: str, referee: Referee, volts: float) -> None:
        """``volts`` line to earth before the fault."""
        z = 3 * volts**2 / self.power.conjugate()
        referee.load(name, self.bus, z, self.connection)


@dataclass(frozen=True)
class PlainTie:
    """A bus coupler."""

    bus_i: str
    bus_j: str
    closed: bool

    def entry(self) -> dict[str, Any]:
        return stated(from_=self.bus_i, to=self.bus_j, closed=self.closed)

    def put(self, name: str, referee: Referee) -> None:
        referee.tie(name, self.bus_i, self.bus_j, self.closed)


@dataclass(frozen=True)
class PlainNeutral:
    """Resistance and reactance in series, beside a resistance; or a resistor by its plate.

    With a ``ratio`` these stand behind a transformer of one phase. With ``detuning`` it is an
    arc-suppression coil.
    """

    resistance: float | None
    reactance: float | None
    parallel_resistance: float | None
    current: float | None  # A at the line-to-line voltage beside it
    voltage: float | None
    ratio: float | None = None
    detuning: float | None = None
    loss: float | None = None

    def entry(self) -> dict[str, Any]:
        def text(value: float | None, unit: str) -> str | None:
            return None if value is None else quantity(value, unit)

        return stated(
            kind=None if self.detuning is None else "arc-suppression",
            detuning=None if self.detuning is None else share(self.detuning, True),
            loss=None if self.loss is None else share(self.loss, True),
            ratio=self.ratio,
            resistance=text(self.resistance, "ohm"),
            reactance=text(self.reactance, "ohm"),
            parallel_resistance=text(self.parallel_resistance, "ohm"),
            current=text(self.current, "A"),
            voltage=text(self.voltage, "V"),
        )

    def put(self, name: str, referee: Referee, charging: float) -> None:
        """``charging`` is the susceptance to earth of the three phases, S; a coil is tuned to it."""
        z = complex(self.resistance or 0.0, self.reactance or 0.0)
        if self.current and self.voltage:
            z = complex(self.voltage / sqrt(3) / self.current)
        if self.detuning is not None:
            z = 1 / ((1 + self.detuning) * charging * complex(self.loss or 0.0, -1))
        if self.parallel_resistance:
            z = z * self.parallel_resistance / (z + self.parallel_resistance)
        referee.neutral(name, z * (self.ratio or 1.0) ** 2)


@dataclass(frozen=True)
class PlainNetwork:
    """An installation: nameplates by name, and the frequency in Hz."""

    frequency: float
    buses: dict[str, float]
    infeeds: dict[str, PlainInfeed]
    generators: dict[str, PlainGenerator]
    motors: dict[str, PlainMotor]
    lines: dict[str, PlainLine]
    transformers: dict[str, PlainTransformer | PlainUnit]
    neutrals: dict[str, PlainNeutral]
    mutual_couplings: dict[str, PlainCoupling] = field(default_factory=dict)
    earthing_transformers: dict[str, PlainEarthingTransformer] = field(default_factory=dict)
    series_reactors: dict[str, PlainReactor] = field(default_factory=dict)
    capacitors: dict[str, PlainCapacitor] = field(default_factory=dict)
    ties: dict[str, PlainTie] = field(default_factory=dict)
    loads: dict[str, PlainLoad] = field(default_factory=dict)

    def star_points(self, neutral: str) -> list[str]:
        """Buses of the windings and machines that name ``neutral``, one entry each."""
        ends: list[tuple[str, str | None]] = [(g.bus, g.neutral) for g in self.generators.values()]
        ends += [(e.bus, e.neutral) for e in self.earthing_transformers.values()]
        for unit in self.transformers.values():
            if isinstance(unit, PlainUnit):
                ends += [(w.bus, w.neutral) for w in unit.sides.values()]
            else:
                ends += [(unit.hv_bus, unit.hv_neutral), (unit.lv_bus, unit.lv_neutral)]
        return [bus for bus, name in ends if name == neutral]

    def galvanic(self, start: str) -> set[str]:
        """Buses joined to one by lines, reactors, closed ties and auto-transformers."""
        joints = [tuple(line.closed_ends()) for line in self.lines.values()]
        joints += [(r.bus_i, r.bus_j) for r in self.series_reactors.values()]
        joints += [(t.bus_i, t.bus_j) for t in self.ties.values() if t.closed]
        joints += [(u.sides["hv"].bus, u.sides["lv"].bus) for u in self.autos()]
        found, grew = {start}, True
        while grew:
            reached = {bus for joint in joints if found & set(joint) for bus in joint}
            grew = not reached <= found
            found |= reached
        return found

    def autos(self) -> list[PlainUnit]:
        units = self.transformers.values()
        return [u for u in units if isinstance(u, PlainUnit) and u.auto()]

    def charging(self, neutral: str) -> float:
        """Susceptance to earth of the three phases of the network around ``neutral``, S."""
        return self._charging(set().union(*self._networks(neutral)))

    def tuned_to(self, coil: str) -> float:
        """What a coil is tuned to, S: coils of one network share its susceptance equally."""
        coils = [name for name, n in self.neutrals.items() if n.detuning is not None]
        total = 0.0
        for buses in self._networks(coil):
            sharing = [name for name in coils if buses in self._networks(name)]
            total += self._charging(set(buses)) / max(len(sharing), 1)
        return total

    def _networks(self, neutral: str) -> set[frozenset[str]]:
        return {frozenset(self.galvanic(bus)) for bus in self.star_points(neutral)}

    def _charging(self, buses: set[str]) -> float:
        c = sum(line.to_earth() for line in self.lines.values() if buses & set(line.closed_ends()))
        c += sum(g.c0 or 0.0 for g in self.generators.values() if g.bus in buses)
        c += sum((m.c0 or 0.0) * m.count for m in self.motors.values() if m.bus in buses)
        for bank in self.capacitors.values():
            if bank.connection == "star-earthed" and bank.bus in buses:
                c += bank.farads(self.frequency)
        return 3 * 2 * pi * self.frequency * c


@dataclass(frozen=True)
class FaultRequest:
    """What to ask of a network: ohms, and the pre-fault voltage per unit."""

    bus: str
    kind: str
    phases: str
    zf: complex
    zg: complex
    prefault: float


def to_case_tree(
    net: PlainNetwork, prefault: float | None = None, base_power: float | None = None
) -> dict[str, Any]:
    """The tree of the case file that states ``net``."""
    tree: dict[str, Any] = {"title": "drawn", "frequency": quantity(net.frequency, "Hz")}
    if base_power is not None:
        tree["base_power"] = quantity(base_power, "VA", "M")
    if prefault is not None:
        tree["prefault"] = {"voltage": quantity(prefault, "pu")}
    tree["buses"] = {name: quantity(v, "V", "k") for name, v in net.buses.items()}
    for table in (
        "infeeds", "generators", "motors", "transformers", "neutrals", "mutual_couplings",
        "earthing_transformers", "series_reactors", "capacitors", "ties", "loads",
    ):  # fmt: skip
        tree[table] = {name: item.entry() for name, item in getattr(net, table).items()}
    tree["lines"] = {name: line.entry(net.frequency) for name, line in net.lines.items()}
    return {key: value for key, value in tree.items() if value}


def to_referee(net: PlainNetwork, tuned_in: PlainNetwork | None = None) -> Referee:
    """The network of the independent judge; coils tuned as in ``tuned_in``, else in ``net``."""
    referee = Referee(net.frequency)
    for name, nominal in net.buses.items():
        referee.bus(name, nominal)
    for name, neutral in net.neutrals.items():
        neutral.put(name, referee, (tuned_in or net).tuned_to(name))
    for table in (
        "infeeds", "generators", "motors", "lines", "mutual_couplings", "transformers",
        "earthing_transformers", "series_reactors", "ties",
    ):  # fmt: skip
        for name, item in getattr(net, table).items():
            item.put(name, referee)
    for name, bank in net.capacitors.items():
        bank.put(name, referee, net.frequency)
    return referee


# --- drawing ------------------------------------------------------------------------------------


def spread(low: float, high: float) -> SearchStrategy[float]:
    """Numbers of every order of magnitude between the two, of six digits."""
    start, stop = cmath.log10(low).real, cmath.log10(high).real
    return st.floats(start, stop).map(lambda x: min(max(float(f"{10**x:.6g}"), low), high))


def fractions(low: float, high: float) -> SearchStrategy[float]:
    """Numbers between the two, of five decimals."""
    return st.floats(low, high).map(lambda x: round(x, 5))


def chance(percent: int) -> SearchStrategy[bool]:
    return st.integers(0, 99).map(lambda n: n >= 100 - percent)


@dataclass
class _Sketch:
    """A network in the making."""

    draw: DrawFn
    style: str
    net: PlainNetwork
    every: bool  # element and form of one

    def name(self, letter: str, table: dict[str, Any]) -> str:
        return f"{letter}{len(table) + 1}{self.style}"

    def maybe(self, percent: int, strategy: SearchStrategy[Any]) -> Any:
        return self.draw(strategy) if self.draw(chance(percent)) else None

    def impedance(self, low: float, high: float) -> complex:
        """Between the two sizes in ohm, X/R from cable to overhead line."""
        z = at_angle(self.draw(spread(low, high)), self.draw(spread(0.2, 25)))
        return complex(float(f"{z.real:.6g}"), float(f"{z.imag:.6g}"))

    def star(self, nominal: float) -> str:
        """How a star point is earthed; a neutral may be shared by whatever names it."""
        draw, neutrals = self.draw, self.net.neutrals
        kind = draw(st.sampled_from(("solid", "isolated", "neutral", "shared")))
        if kind in ("solid", "isolated"):
            return kind
        if kind == "shared" and neutrals:
            return draw(st.sampled_from(sorted(neutrals)))
        name = self.name("N", neutrals)
        ohms = spread(nominal / sqrt(3) / 2000, nominal / sqrt(3) / 5)
        form = draw(st.sampled_from(("r", "r", "plate", "rx", "x", "x|r")))
        ratio = draw(fractions(2, 80)) if self.every and form != "plate" and draw(chance(25)) else None
        r = draw(ohms) if form in ("r", "rx") else None
        x = draw(ohms) if form in ("x", "rx", "x|r") else None
        beside = draw(ohms) * 3 if form == "x|r" else None
        current = draw(spread(5, 2000)) if form == "plate" else None
        voltage = None if current is None else nominal
        ohms_stated = (None if z is None else z / (ratio or 1.0) ** 2 for z in (r, x, beside))
        neutrals[name] = PlainNeutral(*ohms_stated, current, voltage, ratio)
        return name

    def infeed(self, bus: str) -> None:
        draw, nominal = self.draw, self.net.buses[bus]
        level, x_over_r = draw(spread(500, 40e3)), draw(spread(0.5, 30))
        z1 = at_angle(nominal / sqrt(3) / level, x_over_r)
        by_level = draw(st.booleans())
        z2 = self.maybe(40, fractions(0.6, 1.5).map(lambda x: z1 * x))
        zero = draw(st.sampled_from(("open", "ohm", "level")))
        z0 = self.impedance(abs(z1) / 3, abs(z1) * 10) if zero == "ohm" else None
        earth = k0 = None
        if zero == "level":
            k0 = draw(spread(0.5, 20))
            rest = z1 + (z1 if z2 is None else z2)
            whole = abs(rest + at_angle(abs(z1) * draw(spread(0.3, 10)), k0))
            earth = sqrt(3) * nominal / whole
        self.net.infeeds[self.name("Q", self.net.infeeds)] = PlainInfeed(
            bus=bus,
            nominal=nominal,
            z1=None if by_level else z1,
            three_phase=level if by_level else None,
            as_power=by_level and draw(st.booleans()),
            x_over_r=x_over_r if by_level else None,
            z2=z2,
            z0=z0,
            line_ground=earth,
            x0_over_r0=k0,
        )

    def generator(self, bus: str) -> None:
        draw, nominal = self.draw, self.net.buses[bus]
        neutral = None if draw(chance(20)) else self.star(nominal)
        must = neutral not in (None, "isolated")
        self.net.generators[self.name("G", self.net.generators)] = PlainGenerator(
            bus=bus,
            nominal=nominal,
            rating=draw(spread(*((5e4, 2e6) if nominal < 1e3 else (1e6, 1e8)))),
            voltage=self.maybe(40, fractions(0.95, 1.05).map(lambda x: x * nominal)),
            subtransient=draw(fractions(0.08, 0.35)),
            x2=self.maybe(60, fractions(0.08, 0.4)),
            x0=draw(fractions(0.02, 0.15)) if must else self.maybe(30, fractions(0.02, 0.15)),
            resistance=self.maybe(85, fractions(0.003, 0.05)),
            in_ohm=draw(chance(20)),
            percent=draw(st.booleans()),
            neutral=neutral,
            c0=self.maybe(30, spread(1e-9, 1e-6)),
        )

    def motor(self, bus: str) -> None:
        draw, nominal = self.draw, self.net.buses[bus]
        power = draw(spread(*((2e4, 4e5) if nominal < 1e3 else (2e5, 1e7))))
        shaft = draw(st.booleans())
        self.net.motors[self.name("M", self.net.motors)] = PlainMotor(
            bus=bus,
            nominal=nominal,
            rating=None if shaft else power,
            shaft_power=power if shaft else None,
            efficiency=draw(fractions(0.85, 0.97)) if shaft else None,
            power_factor=draw(fractions(0.75, 0.93)) if shaft else None,
            voltage=self.maybe(40, fractions(0.92, 1.0).map(lambda x: x * nominal)),
            locked_rotor=draw(fractions(3.5, 8)),
            x_over_r=draw(spread(1.5, 12)),
            count=draw(st.integers(1, 4)),
            c0=self.maybe(20, spread(1e-10, 1e-7)),
        )

    def line(self, i: str, j: str, may_open: bool) -> None:
        draw = self.draw
        low_voltage = self.net.buses[i] < 1e3
        length = self.maybe(70, spread(*((0.02, 0.5) if low_voltage else (0.1, 60))))
        z1 = self.impedance(0.05, 1.0) if length is not None else self.impedance(0.005, 10)
        z0 = self.impedance(abs(z1), abs(z1) * 6)
        c1 = self.maybe(65, spread(1e-9, 6e-7) if length is not None else spread(1e-9, 1e-5))
        self.net.lines[self.name("L", self.net.lines)] = PlainLine(
            bus_i=i,
            bus_j=j,
            z1=z1,
            z0=z0,
            c1=c1,
            c0=None if c1 is None else c1 * draw(fractions(0.3, 1.0)),
            susceptance=draw(chance(30)),
            length=length,
            count=draw(st.sampled_from((1, 1, 1, 2, 3))),
            open_end=draw(st.sampled_from((i, j))) if may_open and draw(chance(25)) else None,
        )

    def transformer(self, hv: str, lv: str, clock: int) -> None:
        draw, buses = self.draw, self.net.buses
        groups = ("YNd", "Dyn", "Yd", "Dy") if clock % 2 else ("YNyn", "YNy", "Yyn", "Yy", "Dd")
        group = draw(st.sampled_from(groups))
        rated = [
            buses[bus] * (1 + 0.02 * draw(st.integers(-4, 4))) if draw(chance(50)) else buses[bus]
            for bus in (hv, lv)
        ]
        rating = draw(spread(*((1e5, 2.5e6) if buses[lv] < 1e3 else (1e6, 1e8))))
        size = draw(fractions(0.04, 0.15))
        form = draw(st.sampled_from(("x_over_r", "load_loss", "complex")))
        zero = draw(st.sampled_from(("default", "ratio", "z0")))
        z0_part = complex(draw(fractions(0.002, 0.02)), draw(fractions(0.03, 0.2)))
        self.net.transformers[self.name("T", self.net.transformers)] = PlainTransformer(
            hv_bus=hv,
            lv_bus=lv,
            group=group,
            clock=clock,
            rating=rating,
            hv_voltage=rated[0],
            lv_voltage=rated[1],
            hv_neutral=self.star(buses[hv]) if group.startswith("YN") else None,
            lv_neutral=self.star(buses[lv]) if group.endswith("yn") else None,
            impedance=complex(draw(fractions(0.002, 0.02)), size) if form == "complex" else size,
            x_over_r=draw(spread(1, 40)) if form == "x_over_r" else None,
            load_loss=rating * size * draw(fractions(0.02, 0.5)) if form == "load_loss" else None,
            z0=z0_part if zero == "z0" else None,
            z0_over_z1=draw(fractions(0.7, 1.0)) if zero == "ratio" else None,
            tap=self.maybe(40, st.integers(-4, 4).map(lambda n: 0.025 * n)),
            magnetic_circuit=(
                draw(st.sampled_from(("five-limb", "shell-form", "three-single-phase")))
                if group.startswith("Y") and "y" in group
                else None
            ),
            count=draw(st.sampled_from((1, 1, 1, 2))),
            percent=draw(st.booleans()),
        )

    def joint(self, i: str, j: str) -> None:
        """A line; of ``every`` element one in five a reactor or a closed tie, which make no loops."""
        kind = self.draw(st.integers(0, 9)) if self.every else 9
        if kind == 0:
            self.reactor(i, j)
        elif kind == 1:
            self.tie(i, j, closed=True)
        else:
            self.line(i, j, may_open=False)

    def tie(self, i: str, j: str, closed: bool) -> None:
        self.net.ties[self.name("K", self.net.ties)] = PlainTie(i, j, closed)

    def reactor(self, i: str, j: str) -> None:
        draw, nominal = self.draw, self.net.buses[i]
        rating = self.maybe(50, spread(*((1e5, 2e6) if nominal < 1e3 else (1e6, 1e8))))
        base = 1.0 if rating is None else nominal**2 / rating
        ohms = draw(spread(nominal / 2e5, nominal / 2e3))
        by_angle = draw(st.booleans())
        z = at_angle(ohms, 30.0) / base
        self.net.series_reactors[self.name("R", self.net.series_reactors)] = PlainReactor(
            bus_i=i,
            bus_j=j,
            nominal=nominal,
            impedance=abs(z) if by_angle else z,
            x_over_r=draw(spread(5, 80)) if by_angle else None,
            z0=self.maybe(40, fractions(0.5, 1.5).map(lambda x: z * x)),
            rating=rating,
        )

    def capacitor(self, bus: str) -> None:
        """Small banks: large ones resonate with what feeds them."""
        draw, nominal = self.draw, self.net.buses[bus]
        power = draw(spread(*((1e3, 5e4) if nominal < 1e3 else (5e4, 2e6))))
        connection = draw(st.sampled_from(("star-earthed", "star", "delta")))
        by_farads = connection != "delta" and draw(chance(40))
        farads = float(f"{power / (2 * pi * self.net.frequency * nominal**2):.6g}")
        self.net.capacitors[self.name("C", self.net.capacitors)] = PlainCapacitor(
            bus=bus,
            nominal=nominal,
            power=None if by_farads else power,
            capacitance=farads if by_farads else None,
            connection=connection,
        )

    def earthing_transformer(self, bus: str) -> None:
        draw, nominal = self.draw, self.net.buses[bus]
        in_ohm, by_angle = draw(st.booleans()), draw(st.booleans())
        rating = (
            None
            if in_ohm and draw(st.booleans())
            else draw(spread(*((2e4, 5e5) if nominal < 1e3 else (2e5, 1e7))))
        )
        if in_ohm:
            size = draw(spread(nominal / sqrt(3) / 2000, nominal / sqrt(3) / 50))
        else:
            size = draw(fractions(0.03, 0.3))
        self.net.earthing_transformers[self.name("E", self.net.earthing_transformers)] = (
            PlainEarthingTransformer(
                bus=bus,
                nominal=nominal,
                z0=size if by_angle else at_angle(size, draw(spread(1, 30))),
                x_over_r=draw(spread(1, 30)) if by_angle else None,
                neutral=self.star(nominal),
                rating=rating,
                in_ohm=in_ohm,
            )
        )

    def coupling(self) -> None:
        """Couple two or three lines of one circuit, perhaps with one more that is earthed."""
        draw, lines = self.draw, self.net.lines
        single = [name for name, line in lines.items() if line.count == 1]
        if not single:
            return
        chosen = draw(st.permutations(single))[: draw(st.sampled_from((2, 2, 3)))]
        if len(chosen) < 2 or draw(chance(40)):
            beside = lines[chosen[0]]
            earthed = draw(chance(60))
            chosen = [*chosen[:2], self.name("L", lines)]
            lines[chosen[-1]] = replace(beside, open_end=None, earthed=earthed)
        together = len(chosen) == 2 or draw(chance(30))  # all in one record, or one a pair
        for group in [tuple(chosen)] if together else list(combinations(chosen, 2)):
            lengths = [lines[name].length for name in group]
            shorter = min((v for v in lengths if v is not None), default=None)
            form = draw(st.sampled_from(("whole", "length", "half", "default")))
            form = "whole" if shorter is None or (form == "default" and None in lengths) else form
            length = None if shorter is None else shorter * (0.5 if form == "half" else 1.0)
            own = [  # over the coupled length; no line stores less energy than all of them together
                lines[name].z0 * (1.0 if of is None else length or 1.0)
                for name, of in zip(group, lengths, strict=True)
            ]
            r, x = (
                draw(fractions(0.02, 0.45)) * min(sqrt(a * b) for a, b in combinations(parts, 2))
                for parts in ([z.real for z in own], [z.imag for z in own])
            )
            z = complex(float(f"{r:.6g}"), float(f"{x:.6g}"))
            z = -z if len(chosen) == 2 and draw(chance(25)) else z  # one runs the other way
            per_km = form != "whole" and length is not None
            name = self.name("X", self.net.mutual_couplings)
            self.net.mutual_couplings[name] = PlainCoupling(
                lines=group,
                z0=z / length if per_km and length else z,
                length=length if per_km else None,
                by_default=form == "default",
                lengths=tuple(v or 0.0 for v in lengths) if form == "default" else (),
            )

    def star_equivalent(self, count: int, resistive: bool) -> list[complex]:
        """Branches per unit; one of three may be negative, the pairs all store energy together."""
        draw = self.draw
        x = [draw(fractions(0.02, 0.1)) for _ in range(count)]
        if count == 3 and draw(chance(40)):
            k = draw(st.integers(0, 2))
            a, b = (x[m] for m in range(3) if m != k)
            x[k] = -draw(fractions(0.05, 0.6)) * a * b / (a + b)
        r = [draw(fractions(0.0005, 0.006)) if resistive else 0.0 for _ in range(count)]
        return [complex(*parts) for parts in zip(r, x, strict=True)]

    def unit(self, ends: dict[str, tuple[str, int]], letters: list[str], limbs: bool = False) -> None:
        """A transformer of the windings ``letters``; ``ends`` are bus and clock by side.

        ``limbs``: its core has three and its zero sequence was tested.
        """
        draw, buses = self.draw, self.net.buses
        sides = {}
        for (side, (bus, clock)), letter in zip(ends.items(), letters, strict=True):
            brought_out = letter in "YZ" and draw(chance(70))
            star = self.star(buses[bus]) if brought_out else None
            rated = (
                buses[bus] * (1 + 0.02 * draw(st.integers(-4, 4))) if draw(st.booleans()) else buses[bus]
            )
            sides[side] = PlainWinding(bus, letter + "N" * brought_out, clock, rated, star)
        lowest = min(buses[bus] for bus, _ in ends.values())
        rating = draw(spread(*((1e5, 2.5e6) if lowest < 1e3 else (1e6, 1e8))))
        by_angle = draw(st.booleans())
        ratings: dict[str, float] = {}
        if len(sides) == 3 and draw(chance(50)):
            pairs = draw(st.sampled_from((("hv_tv",), ("hv_tv", "lv_tv"), ("hv_lv", "hv_tv", "lv_tv"))))
            ratings = {pair: rating * draw(st.sampled_from((0.25, 0.3, 0.5, 1.0))) for pair in pairs}

        def pairs_of(branches: list[complex]) -> dict[str, complex]:
            found = {}
            for (a, b), z in star_pairs(**dict(zip(sides, branches, strict=True))).items():
                z = z * ratings.get(f"{a}_{b}", rating) / rating
                found[f"{a}_{b}"] = complex(float(f"{z.real:.6g}"), float(f"{z.imag:.6g}"))
            return found

        impedance: dict[str, Any] = pairs_of(self.star_equivalent(len(sides), not by_angle))
        if by_angle:
            impedance = {pair: z.imag for pair, z in impedance.items()}
        zigzag, delta = "Z" in letters, "D" in letters
        magnetising = tests = z0 = ratio = circuit = None
        tested = all(w.letters[0] != "Y" or w.neutral for w in sides.values())
        if limbs and (tested or not delta):
            circuit = "three-limb"
            x = draw(fractions(0.02, 0.15) if delta else fractions(0.3, 1.5))
            middle = complex(x * draw(fractions(0.01, 0.2)), x)
            if delta or (tested and draw(st.booleans())):
                first, second = self.star_equivalent(2, True)
                beside = second * middle / (second + middle)
                tests = (first + middle, second + middle, first + beside)
            else:
                magnetising = middle
        elif not delta:
            circuit = draw(st.sampled_from(WITH_OWN_RETURN))
        if tests is None:
            form = "z0" if zigzag else draw(st.sampled_from(("default", "ratio", "z0")))
            if zigzag:
                z0 = {"zigzag": complex(draw(fractions(0.0005, 0.01)), draw(fractions(0.005, 0.1)))}
            elif form == "z0":
                z0 = pairs_of(self.star_equivalent(len(sides), True))
            ratio = draw(fractions(0.7, 1.0)) if form == "ratio" else None
        self.net.transformers[self.name("T", self.net.transformers)] = PlainUnit(
            sides=sides,
            rating=rating,
            impedance=impedance,
            ratings=ratings,
            x_over_r=draw(spread(2, 40)) if by_angle else None,
            z0=z0,
            z0_over_z1=ratio,
            tap=self.maybe(40, st.integers(-4, 4).map(lambda n: 0.025 * n)),
            magnetic_circuit=circuit,
            z0_magnetising=magnetising,
            zero_tests=tests,
            count=draw(st.sampled_from((1, 1, 1, 2))),
            percent=draw(st.booleans()),
        )

    def any_transformer(self, hv: str, lv: str, clock: int, third: str | None, late: int) -> None:
        """Whatever can stand between two buses; ``third`` is one for a tertiary, ``late`` its clock."""
        draw, buses = self.draw, self.net.buses
        even = clock % 2 == 0
        ends = {"hv": (hv, 0), "lv": (lv, clock)}
        choices = ["plain", "zigzag", "three", "three"] + ["limbs"] * even
        choices += ["auto", "auto", "auto"] * (clock == 0 and 2 * buses[lv] < buses[hv] <= 12 * buses[lv])
        choice = draw(st.sampled_from(choices))
        if choice == "three" or (choice == "auto" and draw(st.booleans())):
            if third is None:
                third = self.name("B", buses)
                buses[third] = draw(st.sampled_from(LEVELS))
            ends["tv"] = (third, late)
        if choice == "auto":
            last = [] if "tv" not in ends else ["D" if ends["tv"][1] % 2 else "Y"]
            self.unit(ends, ["Y", "A", *last], limbs=last != ["Y"] and draw(chance(40)))
        elif "tv" in ends:
            first = draw(st.sampled_from("YYD"))
            letters = [first]
            for _, late in (ends["lv"], ends["tv"]):
                letters.append("YD"[(late + LAG_OF_LETTER[first]) % 2])
            if "D" in letters and draw(chance(25)):
                letters[letters.index("D")] = "Z"
            tested = letters == ["Y", "Y", "D"]
            self.unit(ends, letters, limbs=tested and draw(chance(40)))
        elif choice == "zigzag":
            pairs = ("DZ", "DZ", "ZD") if even else ("YZ", "YZ", "ZY")
            self.unit(ends, list(draw(st.sampled_from(pairs))))
        elif choice == "limbs":
            self.unit(ends, ["Y", "Y"], limbs=True)
        else:
            self.transformer(hv, lv, clock)

    def coils(self) -> None:
        """Make arc-suppression coils of some neutrals that one network with capacitance uses."""
        draw, net = self.draw, self.net
        beside_auto = {w.bus for u in net.autos() for side, w in u.sides.items() if side != "tv"}
        for name in list(net.neutrals):
            users = net.star_points(name)
            around = net.galvanic(users[0]) if users else set()
            alone = set(users) <= around and not around & beside_auto
            if not (users and alone and net.charging(name) > 0 and draw(chance(40))):
                continue
            detuning = draw(st.sampled_from((-1, 1, 1))) * draw(fractions(0.02, 0.25))
            loss = self.maybe(70, fractions(0.005, 0.05))
            ohms = 1 / net.charging(name)
            beside = float(f"{ohms * draw(fractions(2, 20)):.6g}") if draw(chance(30)) else None
            net.neutrals[name] = PlainNeutral(None, None, beside, None, None, None, detuning, loss)


def _build(draw: DrawFn, min_buses: int, max_buses: int, every: bool) -> PlainNetwork:
    net = PlainNetwork(draw(st.sampled_from((50.0, 60.0))), {}, {}, {}, {}, {}, {}, {})
    sketch = _Sketch(draw, draw(st.sampled_from(("", "", ".x", ' "ü"'))), net, every)
    levels = draw(st.permutations(LEVELS))[: draw(st.sampled_from((2, 1, 2, 3, 3)))]
    # A zone holds buses of one voltage and one clock; lines stay inside it, transformers join two.
    count = draw(st.integers(min_buses, max_buses))
    clocks = st.one_of(st.just(0), st.integers(0, 11)) if every else st.integers(0, 11)
    zones: list[tuple[float, int, list[str]]] = [(level, draw(clocks), []) for level in levels[:count]]
    if count > len(zones) and draw(chance(40)):
        zones.append((draw(st.sampled_from(levels)), draw(clocks), []))
    for k in range(count):
        level, _, members = zones[k] if k < len(zones) else draw(st.sampled_from(zones))
        name = sketch.name("B", net.buses)
        net.buses[name] = level
        members.append(name)
    for _, _, members in zones:
        for k in range(1, len(members)):
            if not draw(chance(7)):
                sketch.joint(draw(st.sampled_from(members[:k])), members[k])
        for _ in range(draw(st.integers(0, 2)) if len(members) > 1 else 0):
            i, j = draw(st.permutations(members))[:2]
            if every and draw(chance(20)):
                sketch.tie(i, j, closed=False)
            else:
                sketch.line(i, j, may_open=True)
    for k in range(1, len(zones)):
        for _ in range(draw(st.sampled_from((1, 2, 1, 2, 1, 3, 1, 0)))):
            pair = sorted((draw(st.sampled_from(zones[:k])), zones[k]), key=lambda z: -z[0])
            (_, ahead, upper), (_, behind, lower) = pair
            hv, lv = draw(st.sampled_from(upper)), draw(st.sampled_from(lower))
            clock = (behind - ahead) % 12
            if not every:
                sketch.transformer(hv, lv, clock)
                continue
            others = [(bus, z[1]) for z in zones if z[2] not in (upper, lower) for bus in z[2]]
            third, late = draw(st.sampled_from(others)) if others and draw(chance(30)) else (None, 0)
            late = (late - ahead) % 12 if third else draw(st.integers(0, 11))
            sketch.any_transformer(hv, lv, clock, third, late)
    everywhere = st.sampled_from(sorted(net.buses))
    first = sketch.generator if draw(chance(30)) else sketch.infeed
    first(draw(everywhere))
    more = ((sketch.earthing_transformer, 1), (sketch.capacitor, 1)) if every else ()
    for add, most in ((sketch.infeed, 1), (sketch.generator, 2), (sketch.motor, 2), *more):
        for _ in range(draw(st.integers(0, most))):
            add(draw(everywhere))
    if every:
        if draw(chance(40)):
            sketch.coupling()
        sketch.coils()
    return net


@st.composite
def basic_networks(draw: DrawFn, min_buses: int = 2, max_buses: int = 8) -> PlainNetwork:
    """Installations of infeeds, machines, lines, two-winding star and delta units, neutrals."""
    return _build(draw, min_buses, max_buses, every=False)


@st.composite
def networks(draw: DrawFn, min_buses: int = 2, max_buses: int = 8) -> PlainNetwork:
    """Installations of every element, one to three voltages, meshed, split, dead or floating.

    Tertiary windings may add buses of their own.
    """
    return _build(draw, min_buses, max_buses, every=True)


def base_powers() -> SearchStrategy[float]:
    """Base powers in VA that must not change any answer."""
    return st.one_of(st.sampled_from((1e6, 1e8)), spread(1e5, 1e10))


@st.composite
def fault_requests(draw: DrawFn, net: PlainNetwork) -> FaultRequest:
    """Any fault at any bus of ``net``; bolted half of the time."""

    def ohms() -> complex:
        if draw(st.booleans()):
            return 0j
        r = draw(spread(1e-3, 100))
        return complex(r, draw(st.sampled_from((0.0, 0.0, r, 0.3 * r, -0.5 * r))))

    kind = draw(st.sampled_from(sorted(FAULT_PHASES)))
    return FaultRequest(
        bus=draw(st.sampled_from(sorted(net.buses))),
        kind=kind,
        phases=draw(st.sampled_from(FAULT_PHASES[kind])),
        zf=ohms(),
        zg=ohms() if kind.endswith("ground") else 0j,
        prefault=draw(st.one_of(st.just(1.0), fractions(0.9, 1.1))),
    )


def spots(net: PlainNetwork) -> SearchStrategy[Spot]:
    """A bus, a terminal or a point along a line that is in service."""
    terminals: list[Spot] = []
    for table in ("infeeds", "generators", "motors", "earthing_transformers", "capacitors", "loads"):
        terminals += [Spot(item.bus, name) for name, item in getattr(net, table).items()]
    lines = {name: line for name, line in net.lines.items() if not line.earthed}
    for name, item in [*lines.items(), *net.series_reactors.items()]:
        terminals += [Spot(bus, name) for bus in (item.bus_i, item.bus_j)]
    for name, unit in net.transformers.items():
        if isinstance(unit, PlainUnit):
            terminals += [Spot(w.bus, name) for w in unit.sides.values()]
        else:
            terminals += [Spot(unit.hv_bus, name), Spot(unit.lv_bus, name)]
    choices = [st.sampled_from(sorted(net.buses)).map(Spot), st.sampled_from(terminals)]
    if lines:
        along = st.tuples(st.sampled_from(sorted(lines)), fractions(0.01, 0.99))
        choices += [along.map(lambda at: Spot("", *at))] * 2
    return st.one_of(choices)


@st.composite
def troubles(draw: DrawFn, net: PlainNetwork) -> list[Trouble]:
    """One to three faults at once, shunt and series mixed, at different spots."""
    found: list[Trouble] = []
    broken: set[str] = set()  # a stub between two breaks floats on picofarads, beyond what is judged
    for spot in draw(st.lists(spots(net), min_size=1, max_size=3, unique=True)):
        opened_already = spot.element in net.lines and net.lines[spot.element].open_end == spot.bus
        whole = spot.element not in broken and not (opened_already and spot.fraction is None)
        if spot.element and whole and draw(chance(40)):
            broken.add(spot.element)
            size = draw(st.integers(1, 3))
            phases = draw(st.sampled_from({1: ("a", "b", "c"), 2: ("ab", "bc", "ac"), 3: ("abc",)}[size]))
            kind = ("open-one", "open-two", "open-three")[size - 1]
            fallen = draw(st.sampled_from((None, 0, 1)))
        else:
            kind = draw(st.sampled_from(sorted(FAULT_PHASES)))
            phases, fallen = draw(st.sampled_from(FAULT_PHASES[kind])), None
        earthed = kind.endswith("ground") or fallen is not None
        zf = zg = 0j
        if not kind.startswith("open") or fallen is not None:
            zf = complex(draw(spread(1e-3, 100))) if draw(st.booleans()) else 0j
            zg = complex(draw(spread(1e-3, 100))) if earthed and draw(st.booleans()) else 0j
        found.append(Trouble(spot, kind, phases, zf, zg, fallen))
    return found


@dataclass(frozen=True)
class Mesh:
    """An infeed at bus 0; lines (from, to, ohm, S), generators (bus, pu, W), loads (bus, VA)."""

    size: int
    held: float
    lines: tuple[tuple[int, int, complex, float], ...]
    generators: tuple[tuple[int, float, float], ...]
    loads: tuple[tuple[int, complex], ...]


@st.composite
def loaded_meshes(draw: DrawFn) -> Mesh:
    """Meshed networks of 110 kV lines under load."""
    n = draw(st.integers(2, 8))
    pairs = [(draw(st.integers(0, k - 1)), k) for k in range(1, n)]
    pairs += [tuple(draw(st.permutations(range(n)))[:2]) for _ in range(draw(st.integers(0, 3)))]
    lines = []
    for i, j in pairs:
        x = draw(fractions(2.0, 15.0))
        z = complex(round(x * draw(fractions(0.05, 0.6)), 5), x)
        lines.append((i, j, z, draw(st.sampled_from((0.0, 1e-5, 8e-5)))))
    others = draw(st.permutations(range(1, n)))[: draw(st.integers(0, min(2, n - 1)))]
    generators = tuple((b, draw(fractions(0.98, 1.04)), draw(fractions(0.0, 40.0)) * 1e6) for b in others)
    loads = tuple(
        (draw(st.integers(1, n - 1)), complex(draw(fractions(0, 40.0)), draw(fractions(-10, 20.0))) * 1e6)
        for _ in range(draw(st.integers(1, 4)))
    )
    return Mesh(n, draw(fractions(0.97, 1.05)), tuple(lines), generators, loads)
