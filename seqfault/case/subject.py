"""The record a rule is looking at: its neighbours, its findings, and rules that recur."""

from __future__ import annotations

import math
from collections.abc import Callable, Mapping
from typing import TypeVar

from seqfault.case.draft import Draft
from seqfault.case.findings import SINGULAR, Findings, one_of
from seqfault.case.protection import CurrentTransformer, Relay
from seqfault.case.quantities import Quantity, Refers
from seqfault.case.records import Bus, Line, Record
from seqfault.case.units import normalised
from seqfault.case.wording import Spelling
from seqfault.errors import quoted

AnyRecord = TypeVar("AnyRecord", bound=Record)
ROOT3 = math.sqrt(3)
_LARGEST_X_OVER_R = 200


class Site:
    """The whole draft as rules see it."""

    def __init__(self, draft: Draft, findings: Findings) -> None:
        self.case = draft.case
        self.names = draft.names
        self.broken = draft.broken
        self.findings = findings
        self._spelling: dict[str, Spelling] = {}

    def unknown(self, table: str, name: str) -> str:
        """Return what to say of a name that is not in ``table``."""
        other = self.names.get(name)
        if other is not None:
            return f"{quoted(name)} is {one_of(other)}; {one_of(table)} is wanted"
        if table not in self._spelling:
            self._spelling[table] = Spelling([name for name, of in self.names.items() if of == table])
        hint = self._spelling[table].hint(name)
        return f"there is no {SINGULAR[table]} {quoted(name)}{hint}"


class Subject:
    """One record under examination."""

    __slots__ = ("_name", "_table", "site")

    def __init__(self, site: Site, table: str, name: str) -> None:
        self.site = site
        self._table = table
        self._name = name

    def error(self, field: str, problem: str) -> None:
        """Complain about a field, or about the record when ``field`` is empty."""
        self.site.findings.error(self._table, self._name, field, problem)

    def warn(self, field: str, problem: str) -> None:
        """Doubt a field, or the record when ``field`` is empty."""
        self.site.findings.warn(self._table, self._name, field, problem)

    def bus(self, field: str, name: str) -> Bus | None:
        """Return a bus; None, after a complaint, when there is none of this name."""
        return self._of(self.site.case.buses, "buses", field, name)

    def line(self, field: str, name: str) -> Line | None:
        """Return a line; None, after a complaint, when there is none of this name."""
        return self._of(self.site.case.lines, "lines", field, name)

    def relay(self, field: str, name: str) -> Relay | None:
        """Return a relay; None, after a complaint, when there is none of this name."""
        return self._of(self.site.case.relays, "relays", field, name)

    def current_transformer(self, field: str, name: str) -> CurrentTransformer | None:
        """Return a current transformer; None, after a complaint, when there is none of this name."""
        table = "current_transformers"
        return self._of(self.site.case.current_transformers, table, field, name)

    def _of(self, records: Mapping[str, AnyRecord], table: str, field: str, name: str) -> AnyRecord | None:
        found = records.get(name)
        if found is None and not (self.site.names.get(name) == table and name in self.site.broken):
            self.error(field, self.site.unknown(table, name))
        return found

    def star_point(self, field: str, name: str | None) -> None:
        """Complain when a star point is neither a word nor a neutral of the file."""
        if name in (None, "solid", "isolated") or self.site.names.get(name) == "neutrals":
            return
        problem = self.site.unknown("neutrals", name)
        guessed = "did you mean" in problem
        self.error(field, problem + ("" if guessed else '; "solid" and "isolated" are words too'))

    def refers(self, field: str, mark: Refers, name: str) -> None:
        """Complain when there is no record of this name in the table that a field refers to."""
        rules: dict[str, Callable[[str, str], object]] = {
            "buses": self.bus,
            "lines": self.line,
            "neutrals": self.star_point,
            "relays": self.relay,
            "current_transformers": self.current_transformer,
        }
        rules[mark.words[0]](field, name)

    def positive(self, quantities: Mapping[str, Quantity | None], zero: bool = False) -> bool:
        """Tell whether each quantity stated is above zero, or not below it with ``zero``."""
        sound = True
        for field, quantity in quantities.items():
            value = real(quantity)
            if value is None or value > 0 or (zero and value == 0):
                continue
            sound = False
            problem = "cannot be negative" if zero else "must be more than zero"
            self.error(field, f"{said(quantity)}: this {problem}")
        return sound

    def count(self, count: int) -> None:
        """Complain when there is less than one of something."""
        if count < 1:
            self.error("count", f"{count}: this must be 1 or more")

    def x_over_r(self, field: str, value: float | None) -> None:
        """Complain of a negative ratio, doubt a very large one."""
        if value is None:
            return
        if value < 0:
            self.error(field, f"{value:g}: this cannot be negative")
        elif value > _LARGEST_X_OVER_R:
            self.warn(field, f"{value:g} is above the usual {_LARGEST_X_OVER_R}")

    def impedance(self, field: str, quantity: Quantity | None, capacitive: bool = False) -> bool:
        """Tell whether an impedance can be: not 0, R not negative, nor X unless ``capacitive``."""
        if quantity is None:
            return True
        value = complex(quantity.value)
        if value == 0:
            problem = "this cannot be zero"
        elif value.real < 0:
            problem = "the resistance cannot be negative"
        elif value.imag < 0 and not capacitive:
            problem = "the reactance cannot be negative"
        else:
            return True
        self.error(field, f"{said(quantity)}: {problem}")
        return False

    def own_base(self, field: str, quantity: Quantity | None, rating: Quantity | None) -> bool:
        """Tell whether per cent have the rating that they refer to."""
        if quantity is None or quantity.dimension != "ratio" or rating is not None:
            return True
        self.error("rating", f"this is missing; {field} = {said(quantity)} refers to it")
        return False

    def resistive(self, field: str, quantity: Quantity | None) -> None:
        """Doubt an impedance written without a reactance."""
        if quantity is not None and not isinstance(quantity.value, complex) and quantity.value > 0:
            self.warn(
                field,
                f"{said(quantity)} has no reactance and counts as pure resistance; "
                'write both parts, as in "0.1+j0.4 ohm"',
            )

    def volt_amperes(self, quantity: Quantity | None, field: str = "rating") -> None:
        """Doubt a rating in watts, of which the program makes volt-amperes."""
        if quantity is not None and not normalised(quantity.text).endswith("VA"):
            self.warn(field, f"{said(quantity)}: a rating is in VA; this counts as so many VA")

    def rated_voltage(self, field: str, rated: Quantity | None, bus_name: str) -> None:
        """Complain of a rated voltage that is far from the nominal voltage of its bus."""
        bus = self.site.case.buses.get(bus_name)
        value, nominal = real(rated), real(bus.voltage) if bus else None
        if rated is None or bus is None or not value or not nominal or value < 0 or nominal < 0:
            return
        ratio = value / nominal
        away = max(ratio, 1 / ratio)
        if away <= 1.1 * (1 + 1e-9):
            return
        problem = (
            f"{said(rated)} is {ratio:.3g} times the {normalised(bus.voltage.text)} "
            f"of bus {quoted(bus_name)}{voltage_cure(ratio)}"
        )
        if away > 1.3:
            self.error(field, problem)
        else:
            self.warn(field, problem)

    def usual(
        self, field: str, value: float, limits: tuple[float, float], text: str, factor: float
    ) -> None:
        """Doubt a magnitude outside its usual ``limits``; ``text`` says what it is and they are."""
        if is_usual(value, limits):
            return
        low, high = limits
        cure = ""
        if low <= value / factor <= high:
            cure = f"; a factor of {factor:g} too large?"
        elif low <= value * factor <= high:
            cure = f"; a factor of {factor:g} too small?"
        self.warn(field, text + cure)


def is_usual(value: float, limits: tuple[float, float]) -> bool:
    """Tell whether a magnitude is inside its ``limits``, rounding aside."""
    return limits[0] * (1 - 1e-9) <= value <= limits[1] * (1 + 1e-9)


def voltage_cure(ratio: float) -> str:
    """Return the question to ask about a voltage that is ``ratio`` times what it should be."""
    if abs(ratio * ROOT3 - 1) < 0.03:
        return "; a phase voltage entered for a line voltage (factor √3)?"
    if abs(ratio / ROOT3 - 1) < 0.03:
        return "; a factor of √3 too large?"
    if 700 < max(ratio, 1 / ratio) < 1400:
        return "; V entered for kV, a factor of 1000?"
    return ""


def real(quantity: Quantity | None) -> float | None:
    """Return the value of a quantity whose field takes no complex one."""
    return None if quantity is None or isinstance(quantity.value, complex) else quantity.value


def said(quantity: Quantity | None) -> str:
    """Return a quantity as it stands in the file, in quotes."""
    return "" if quantity is None else quoted(quantity.text, 80)
