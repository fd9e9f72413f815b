"""Every hypothesis strategy of the project, and the plain networks they draw.

A ``PlainNetwork`` is a list of nameplates in SI units. From it come both the tree of a case file
(``to_case_tree``) and the network of the independent judge (``to_referee``), by arithmetic that
stands here alone: an error of the package in reading a nameplate shows as well as one in solving.
"""

from __future__ import annotations

import cmath
from dataclasses import dataclass
from decimal import Decimal
from math import pi, sqrt
from typing import Any

from hypothesis import strategies as st
from hypothesis.strategies import DrawFn, SearchStrategy

from tests.referee import Referee

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
        )
        for order, farads in (("1", self.c1), ("0", self.c0)):
            if farads is not None and self.susceptance:
                entry[f"b{order}"] = quantity(2 * pi * frequency * farads, f"S{per}", "u")
            elif farads is not None:
                entry[f"c{order}"] = quantity(farads, f"F{per}", "u")
        return entry

    def put(self, name: str, referee: Referee) -> None:
        size = 1.0 if self.length is None else self.length
        z1, z0 = self.z1 * size / self.count, self.z0 * size / self.count
        c1, c0 = ((c or 0.0) * size * self.count for c in (self.c1, self.c0))
        ends = (self.open_end,) if self.open_end else ()
        referee.line(name, self.bus_i, self.bus_j, z1, z0, c1, c0, ends)


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
class PlainNeutral:
    """Resistance and reactance in series, beside a resistance; or a resistor by its plate."""

    resistance: float | None
    reactance: float | None
    parallel_resistance: float | None
    current: float | None  # A at the line-to-line voltage beside it
    voltage: float | None

    def entry(self) -> dict[str, Any]:
        def text(value: float | None, unit: str) -> str | None:
            return None if value is None else quantity(value, unit)

        return stated(
            resistance=text(self.resistance, "ohm"),
            reactance=text(self.reactance, "ohm"),
            parallel_resistance=text(self.parallel_resistance, "ohm"),
            current=text(self.current, "A"),
            voltage=text(self.voltage, "V"),
        )

    def put(self, name: str, referee: Referee) -> None:
        z = complex(self.resistance or 0.0, self.reactance or 0.0)
        if self.current and self.voltage:
            z = complex(self.voltage / sqrt(3) / self.current)
        if self.parallel_resistance:
            z = z * self.parallel_resistance / (z + self.parallel_resistance)
        referee.neutral(name, z)


@dataclass(frozen=True)
class PlainNetwork:
    """An installation: nameplates by name, and the frequency in Hz."""

    frequency: float
    buses: dict[str, float]
    infeeds: dict[str, PlainInfeed]
    generators: dict[str, PlainGenerator]
    motors: dict[str, PlainMotor]
    lines: dict[str, PlainLine]
    transformers: dict[str, PlainTransformer]
    neutrals: dict[str, PlainNeutral]


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
    for table in ("infeeds", "generators", "motors", "transformers", "neutrals"):
        tree[table] = {name: item.entry() for name, item in getattr(net, table).items()}
    tree["lines"] = {name: line.entry(net.frequency) for name, line in net.lines.items()}
    return {key: value for key, value in tree.items() if value}


def to_referee(net: PlainNetwork) -> Referee:
    """The network of the independent judge."""
    referee = Referee(net.frequency)
    for name, nominal in net.buses.items():
        referee.bus(name, nominal)
    for table in ("neutrals", "infeeds", "generators", "motors", "lines", "transformers"):
        for name, item in getattr(net, table).items():
            item.put(name, referee)
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
        r = draw(ohms) if form in ("r", "rx") else None
        x = draw(ohms) if form in ("x", "rx", "x|r") else None
        beside = draw(ohms) * 3 if form == "x|r" else None
        current = draw(spread(5, 2000)) if form == "plate" else None
        voltage = None if current is None else nominal
        neutrals[name] = PlainNeutral(r, x, beside, current, voltage)
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


@st.composite
def networks(draw: DrawFn, min_buses: int = 2, max_buses: int = 8) -> PlainNetwork:
    """Installations of every element, one to three voltages, meshed, split, dead or floating."""
    net = PlainNetwork(draw(st.sampled_from((50.0, 60.0))), {}, {}, {}, {}, {}, {}, {})
    sketch = _Sketch(draw, draw(st.sampled_from(("", "", ".x", ' "ü"'))), net)
    levels = draw(st.permutations(LEVELS))[: draw(st.sampled_from((2, 1, 2, 3, 3)))]
    # A zone holds buses of one voltage and one clock; lines stay inside it, transformers join two.
    count = draw(st.integers(min_buses, max_buses))
    zones: list[tuple[float, int, list[str]]] = [
        (level, draw(st.integers(0, 11)), []) for level in levels[:count]
    ]
    if count > len(zones) and draw(chance(40)):
        zones.append((draw(st.sampled_from(levels)), draw(st.integers(0, 11)), []))
    for k in range(count):
        level, _, members = zones[k] if k < len(zones) else draw(st.sampled_from(zones))
        name = sketch.name("B", net.buses)
        net.buses[name] = level
        members.append(name)
    for _, _, members in zones:
        for k in range(1, len(members)):
            if not draw(chance(7)):
                sketch.line(draw(st.sampled_from(members[:k])), members[k], may_open=False)
        for _ in range(draw(st.integers(0, 2)) if len(members) > 1 else 0):
            i, j = draw(st.permutations(members))[:2]
            sketch.line(i, j, may_open=True)
    for k in range(1, len(zones)):
        for _ in range(draw(st.sampled_from((1, 2, 1, 2, 1, 3, 1, 0)))):
            pair = sorted((draw(st.sampled_from(zones[:k])), zones[k]), key=lambda z: -z[0])
            (_, ahead, upper), (_, behind, lower) = pair
            hv, lv = draw(st.sampled_from(upper)), draw(st.sampled_from(lower))
            sketch.transformer(hv, lv, (behind - ahead) % 12)
    everywhere = st.sampled_from(sorted(net.buses))
    first = sketch.generator if draw(chance(30)) else sketch.infeed
    first(draw(everywhere))
    for add, most in ((sketch.infeed, 1), (sketch.generator, 2), (sketch.motor, 2)):
        for _ in range(draw(st.integers(0, most))):
            add(draw(everywhere))
    return net


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
