"""The tables of the case file, one frozen struct each, and the case they make.

A field holds what stands in the file: a quantity with its unit, a name, a number. Which dimensions
a quantity may have is part of its type (``Dimensions``), so the reader, the schema and the messages
all speak from this page, and from ``protection`` for the tables of relays. Nothing is converted to
per unit here.
"""

from __future__ import annotations

from collections.abc import Iterator, Mapping
from typing import Annotated, Any, ClassVar, Literal

import msgspec

from seqfault.case.protection import CurrentTransformer, Demands, Relay
from seqfault.case.quantities import Dimensions, Quantity, Refers
from seqfault.case.record import Angle, Current, Duration, Power, Ratio, Resistance, Voltage
from seqfault.case.record import Record as Record

ComplexPower = Annotated[Quantity, Dimensions("power", complex=True)]
CurrentOrPower = Annotated[Quantity, Dimensions("current", "power")]
Ohms = Annotated[Quantity, Dimensions("impedance", complex=True)]
OhmsOrRatio = Annotated[Quantity, Dimensions("impedance", "ratio", complex=True)]
RealOhmsOrRatio = Annotated[Quantity, Dimensions("impedance", "ratio")]
LineOhms = Annotated[Quantity, Dimensions("impedance/length", "impedance", complex=True)]
LineFarads = Annotated[Quantity, Dimensions("capacitance/length", "capacitance")]
LineSiemens = Annotated[Quantity, Dimensions("admittance/length", "admittance")]
Farads = Annotated[Quantity, Dimensions("capacitance")]
Length = Annotated[Quantity, Dimensions("length")]
Frequency = Annotated[Quantity, Dimensions("frequency")]
Speed = Annotated[Quantity, Dimensions("speed")]
Temperature = Annotated[Quantity, Dimensions("temperature")]
BusName = Annotated[str, Refers("buses")]
LineName = Annotated[str, Refers("lines")]
StarPoint = Annotated[str, Refers("neutrals", "solid", "isolated")]
MagneticCircuit = Literal["three-limb", "five-limb", "shell-form", "three-single-phase"]


class Bus(Record, frozen=True, kw_only=True):
    """A node of the three-phase network; ``voltage`` is nominal, line to line."""

    voltage: Voltage


class Infeed(Record, frozen=True, kw_only=True):
    """The utility, or any network, seen from its connection point alone."""

    bus: BusName
    three_phase: CurrentOrPower | None = None
    x_over_r: float | None = None
    z1: Ohms | None = None
    z2: Ohms | None = None
    line_ground: Current | None = None
    x0_over_r0: float | None = None
    z0: Ohms | Literal["open"] | None = None
    voltage: Ratio | None = None  # held in the loaded state


class Generator(Record, frozen=True, kw_only=True):
    """A synchronous machine, motors included, behind its star point."""

    bus: BusName
    rating: Power
    voltage: Voltage | None = None
    subtransient: OhmsOrRatio
    transient: OhmsOrRatio | None = None
    synchronous: OhmsOrRatio | None = None
    x2: OhmsOrRatio | None = None
    x0: OhmsOrRatio | None = None
    resistance: RealOhmsOrRatio | None = None
    neutral: StarPoint | None = None
    c0: Farads | None = None
    power: Power | None = None  # fed in the loaded state
    holds: Ratio | None = None  # voltage held in the loaded state


class Motor(Record, frozen=True, kw_only=True):
    """An induction motor, or ``count`` of them alike."""

    bus: BusName
    rating: Power | None = None
    shaft_power: Power | None = None
    efficiency: float | Ratio | None = None
    power_factor: float | Ratio | None = None
    voltage: Voltage | None = None
    locked_rotor: float
    x_over_r: float | None = None
    count: int = 1
    speed: Speed | None = None
    c0: Farads | None = None


class Line(Record, frozen=True, kw_only=True, rename={"from_": "from"}):
    """An overhead line or a cable; ``to`` and ``from_`` are buses of one nominal voltage."""

    from_: BusName
    to: BusName
    z1: LineOhms
    z0: LineOhms
    c1: LineFarads | None = None
    c0: LineFarads | None = None
    b1: LineSiemens | None = None
    b0: LineSiemens | None = None
    length: Length | None = None
    count: int = 1
    open: tuple[BusName, ...] = ()
    earthed: bool = False  # out of service and earthed at both ends
    screen_current: Current | None = None  # its metal screen carries this for a second


class MutualCoupling(Record, frozen=True, kw_only=True):
    """Zero-sequence coupling of two lines, both in their sense from → to."""

    lines: tuple[LineName, ...]
    z0: LineOhms
    length: Length | None = None
    start: Mapping[LineName, Length] | None = None


class Winding(msgspec.Struct, frozen=True, kw_only=True, forbid_unknown_fields=True, gc=False):
    """One side of a transformer; ``voltage`` is rated, line to line."""

    bus: BusName
    voltage: Voltage
    neutral: StarPoint | None = None


class Pairs(msgspec.Struct, frozen=True, kw_only=True, forbid_unknown_fields=True, gc=False):
    """Short-circuit impedances of the three pairs of windings of a three-winding transformer."""

    hv_lv: OhmsOrRatio
    hv_tv: OhmsOrRatio
    lv_tv: OhmsOrRatio


class PairRatings(msgspec.Struct, frozen=True, kw_only=True, forbid_unknown_fields=True, gc=False):
    """Ratings that the per cent impedances of the pairs refer to."""

    hv_lv: Power | None = None
    hv_tv: Power | None = None
    lv_tv: Power | None = None


class ZeroTests(msgspec.Struct, frozen=True, kw_only=True, forbid_unknown_fields=True, gc=False):
    """Zero-sequence tests of IEC 60076-1: other sides open, and lv shorted; any delta closed."""

    from_hv: OhmsOrRatio
    from_lv: OhmsOrRatio
    from_hv_lv_shorted: OhmsOrRatio


class Transformer(Record, frozen=True, kw_only=True):
    """A transformer of two or three windings, or ``count`` of them alike in parallel."""

    vector_group: str
    rating: Power
    hv: Winding
    lv: Winding
    tv: Winding | None = None
    impedance: OhmsOrRatio | Pairs
    impedance_on: PairRatings | None = None
    x_over_r: float | None = None
    load_loss: Power | None = None
    z0: OhmsOrRatio | Pairs | None = None
    z0_over_z1: float | None = None
    tap: Ratio | None = None
    magnetic_circuit: MagneticCircuit | None = None
    z0_magnetising: OhmsOrRatio | None = None
    zero_tests: ZeroTests | None = None
    count: int = 1


class EarthingTransformer(Record, frozen=True, kw_only=True):
    """A zigzag or star-delta transformer that gives a bus a star point; ``z0`` is per phase."""

    bus: BusName
    z0: OhmsOrRatio
    x_over_r: float | None = None
    neutral: StarPoint | None = None
    rating: Power | None = None
    duration: Duration | None = None


class SeriesReactor(Record, frozen=True, kw_only=True, rename={"from_": "from"}):
    """A reactor in series between two buses of one nominal voltage."""

    from_: BusName
    to: BusName
    impedance: OhmsOrRatio
    x_over_r: float | None = None
    z0: OhmsOrRatio | None = None
    rating: Power | None = None


class Capacitor(Record, frozen=True, kw_only=True):
    """A capacitor bank; ``power`` at nominal voltage, or ``capacitance`` a phase."""

    bus: BusName
    power: Power | None = None
    capacitance: Farads | None = None
    connection: Literal["star-earthed", "star", "delta"]


class Load(Record, frozen=True, kw_only=True):
    """A load, in the loaded state alone: constant power before a fault, constant impedance during it."""

    bus: BusName
    power: ComplexPower
    power_factor: float | Ratio | None = None  # lagging
    connection: Literal["star-earthed", "star", "delta"] | None = None


class Converter(Record, frozen=True, kw_only=True):
    """An inverter-fed infeed: a current-limited source of positive sequence during the fault."""

    bus: BusName
    rating: Power
    fault_current: float
    angle: Angle | None = None
    threshold: Ratio | None = None


class Tie(Record, frozen=True, kw_only=True, rename={"from_": "from"}):
    """A bus coupler or section switch: closed, its two buses are one node."""

    from_: BusName
    to: BusName
    closed: bool


class Neutral(Record, frozen=True, kw_only=True):
    """What joins star points to earth: resistance and reactance in series, beside a resistance.

    ``kind = "arc-suppression"`` is a coil tuned to the capacitance of the base case; ``ratio`` is that
    of a distribution transformer between the star point and the impedance stated.
    """

    kind: Literal["impedance", "arc-suppression"] = "impedance"
    detuning: Ratio | None = None
    loss: Ratio | None = None
    ratio: float | None = None
    resistance: Resistance | None = None
    reactance: Resistance | None = None
    parallel_resistance: Resistance | None = None
    current: Current | None = None
    voltage: Voltage | None = None
    duration: Duration | None = None
    continuous: Current | None = None
    temperature_rise: Temperature | None = None


class Prefault(msgspec.Struct, frozen=True, kw_only=True, forbid_unknown_fields=True):
    """The state before the fault.

    flat: every live bus at ``voltage`` of its nominal voltage; loaded: what infeeds and generators hold
    and loads draw.
    """

    voltage: Ratio = Quantity(1.0, "ratio", "1.0 pu")
    state: Literal["flat", "loaded"] = "flat"


TABLES: dict[str, type[Record]] = {
    "buses": Bus,
    "infeeds": Infeed,
    "generators": Generator,
    "motors": Motor,
    "lines": Line,
    "mutual_couplings": MutualCoupling,
    "transformers": Transformer,
    "earthing_transformers": EarthingTransformer,
    "neutrals": Neutral,
    "series_reactors": SeriesReactor,
    "capacitors": Capacitor,
    "loads": Load,
    "converters": Converter,
    "ties": Tie,
    "relays": Relay,
    "current_transformers": CurrentTransformer,
}


class Case(msgspec.Struct, frozen=True, kw_only=True):
    """One installation in one operating state, read and checked.

    ``frequency`` is in Hz, ``base_power`` in VA. Records keep the order of the file; those out of
    service are here too, with ``out`` set. ``tree`` is the file as read, before any overlay, and
    ``sha256`` its fingerprint. ``assumptions`` and ``warnings`` are sentences of the reader.
    """

    tables: ClassVar[tuple[str, ...]] = tuple(TABLES)

    title: str = ""
    frequency: float
    base_power: float
    prefault: Prefault
    demands: Demands = Demands()
    buses: Mapping[str, Bus]
    infeeds: Mapping[str, Infeed]
    generators: Mapping[str, Generator]
    motors: Mapping[str, Motor]
    lines: Mapping[str, Line]
    mutual_couplings: Mapping[str, MutualCoupling]
    transformers: Mapping[str, Transformer]
    earthing_transformers: Mapping[str, EarthingTransformer]
    neutrals: Mapping[str, Neutral]
    series_reactors: Mapping[str, SeriesReactor]
    capacitors: Mapping[str, Capacitor]
    loads: Mapping[str, Load]
    converters: Mapping[str, Converter]
    ties: Mapping[str, Tie]
    relays: Mapping[str, Relay]
    current_transformers: Mapping[str, CurrentTransformer]
    scenarios: tuple[str, ...] = ()
    state: str = "base"
    tree: Mapping[str, Any]
    source: str = "case"
    sha256: str = ""
    assumptions: tuple[str, ...] = ()
    warnings: tuple[str, ...] = ()

    def records(self) -> Iterator[tuple[str, str, Record]]:
        """Yield ``(table, name, record)`` of everything in the file, in its order."""
        for table in TABLES:
            for name, record in getattr(self, table).items():
                yield table, name, record
