"""The units a quantity may have, how they are misspelt, and look-alike characters."""

from __future__ import annotations

import unicodedata
from math import pi

_PREFIXES = {"": 0, "n": -9, "u": -6, "m": -3, "k": 3, "M": 6, "G": 9}
# A volt or a watt is never wanted in thousandths: "mva" is MVA, and nothing else.
_SYMBOLS = (
    ("V", "voltage", "kMG"),
    ("VA", "power", "kMG"),
    ("W", "power", "kMG"),
    ("var", "power", "kMG"),
    ("A", "current", "numkMG"),
    ("ohm", "impedance", "numkMG"),
    ("F", "capacitance", "num"),
    ("S", "admittance", "numk"),
    ("H", "inductance", "num"),
    ("Hz", "frequency", "mkM"),
    ("s", "time", "num"),
    ("m", "length", "k"),
)
_OTHERS = {
    "hp": ("power", 0, 745.7),  # mechanical horsepower, 550 ft lbf/s
    "mi": ("length", 0, 1609.344),
    "ft": ("length", 0, 0.3048),
    "kft": ("length", 3, 0.3048),
    "%": ("ratio", -2, 1.0),
    "pu": ("ratio", 0, 1.0),
    "min": ("time", 0, 60.0),
    "h": ("time", 0, 3600.0),
    "rpm": ("speed", 0, 1.0),
    "r/min": ("speed", 0, 1.0),
    "1/min": ("speed", 0, 1.0),
    "K": ("temperature", 0, 1.0),
    "°C": ("temperature", 0, 1.0),  # of a rise, so the same size as the kelvin
    "degC": ("temperature", 0, 1.0),
    "deg": ("angle", 0, pi / 180),
    "°": ("angle", 0, pi / 180),
    "rad": ("angle", 0, 1.0),
    "In": ("rated current", 0, 1.0),  # of a current transformer
}


def _units() -> dict[str, tuple[str, int, float]]:
    units = {
        prefix + symbol: (dimension, _PREFIXES[prefix], 1.0)
        for symbol, dimension, prefixes in _SYMBOLS
        for prefix in ("", *prefixes)
    } | _OTHERS
    lengths = [unit for unit, (dimension, _, _) in units.items() if dimension == "length"]
    for unit, (dimension, power, factor) in list(units.items()):
        if dimension in ("impedance", "capacitance", "admittance"):
            for length in lengths:
                _, length_power, size = units[length]
                per_length = (f"{dimension}/length", power - length_power, factor / size)
                units[f"{unit}/{length}"] = per_length
    return units


# unit: its dimension, and the power of ten and the factor that lead to SI. The power is added to
# the exponent as written, so that "10.1 %" is 0.101 to the last bit.
UNITS = _units()

KINDS = {
    "voltage": "a voltage",
    "power": "a power",
    "current": "a current",
    "impedance": "an impedance",
    "impedance/length": "an impedance per length",
    "capacitance": "a capacitance",
    "capacitance/length": "a capacitance per length",
    "admittance": "an admittance",
    "admittance/length": "an admittance per length",
    "ratio": "a ratio",
    "length": "a length",
    "frequency": "a frequency",
    "time": "a time",
    "speed": "a speed",
    "temperature": "a temperature rise",
    "inductance": "an inductance",
    "angle": "an angle",
    "rated current": "a multiple of the rated current",
}
# dimension: an example, and one of a complex value
EXAMPLES = {
    "voltage": ("11 kV", "11 kV"),
    "power": ("10 MVA", "10 MVA"),
    "current": ("400 A", "400 A"),
    "impedance": ("6.35 ohm", "0.1+j1.2 ohm"),
    "impedance/length": ("0.4 ohm/km", "0.125+j0.096 ohm/km"),
    "capacitance": ("0.42 uF", "0.42 uF"),
    "capacitance/length": ("0.42 uF/km", "0.42 uF/km"),
    "admittance": ("12 uS", "12 uS"),
    "admittance/length": ("12 uS/km", "12 uS/km"),
    "ratio": ("10.1 %", "10.1 %"),
    "length": ("1.8 km", "1.8 km"),
    "frequency": ("50 Hz", "50 Hz"),
    "time": ("10 s", "10 s"),
    "speed": ("1487 rpm", "1487 rpm"),
    "temperature": ("760 K", "760 K"),
    "inductance": ("0.85 H", "0.85 H"),
    "angle": ("30 deg", "30 deg"),
    "rated current": ("0.1 In", "0.1 In"),
}
COMMON = {
    "voltage": ("kV", "V"),
    "power": ("MVA", "kVA"),
    "current": ("A", "kA"),
    "impedance": ("ohm",),
    "impedance/length": ("ohm/km",),
    "capacitance": ("uF", "nF"),
    "capacitance/length": ("uF/km", "nF/km"),
    "admittance": ("uS",),
    "admittance/length": ("uS/km",),
    "ratio": ("%", "pu"),
    "length": ("km", "m"),
    "frequency": ("Hz",),
    "time": ("s",),
    "speed": ("rpm",),
    "temperature": ("K",),
    "inductance": ("H", "mH"),
    "angle": ("deg",),
    "rated current": ("In",),
}

_SPOKEN = {
    "amp": "A",
    "amps": "A",
    "ampere": "A",
    "amperes": "A",
    "kamp": "kA",
    "volt": "V",
    "volts": "V",
    "mv": "kV",
    "watt": "W",
    "watts": "W",
    "ohms": "ohm",
    "kohms": "kohm",
    "mho": "S",
    "siemens": "S",
    "farad": "F",
    "henry": "H",
    "mile": "mi",
    "miles": "mi",
    "feet": "ft",
    "foot": "ft",
    "kilometre": "km",
    "kilometres": "km",
    "kilometer": "km",
    "kilometers": "km",
    "metre": "m",
    "metres": "m",
    "meter": "m",
    "meters": "m",
    "kms": "km",
    "1000ft": "kft",
    "horsepower": "hp",
    "sec": "s",
    "secs": "s",
    "second": "s",
    "seconds": "s",
    "minutes": "min",
    "p.u.": "pu",
    "p.u": "pu",
    "perunit": "pu",
    "percent": "%",
    "pct": "%",
    "hertz": "Hz",
    "cps": "Hz",
    "rev/min": "rpm",
    "min-1": "rpm",
    "kelvin": "K",
    "c": "K",
    "degree": "deg",
    "degrees": "deg",
    "ohm/phase": "ohm",
    "us/km": "uS/km",
}
_FOLDED: dict[str, list[str]] = {}
for _unit in UNITS:
    _FOLDED.setdefault(_unit.casefold(), []).append(_unit)


def respelt(unit: str) -> list[str]:
    """Return the units that ``unit`` may have meant: other case, or written out as a word."""
    folded = unit.casefold().replace(" per ", "/").replace(" ", "")
    for word in (folded, "/".join(_SPOKEN.get(part, part) for part in folded.split("/"))):
        found = _SPOKEN.get(word)
        if found is not None:
            return [found]
        if word.casefold() in _FOLDED:
            return _FOLDED[word.casefold()]
    return []


_LOOK_ALIKES = {
    **dict.fromkeys("\u2010\u2011\u2012\u2013\u2014\u2212\ufe63\uff0d", "-"),
    **dict.fromkeys("\u200b\u200e\u200f\u2060\ufeff", ""),  # invisible
    **dict.fromkeys("\u00ba\u02da", "°"),
    **dict.fromkeys("\u221f\u2220\u29a3", "∠"),
    "\u03a9": "ohm",
    "\u2126": "ohm",
    "\u00b5": "u",
    "\u03bc": "u",
}
# Folding a superscript or a fraction would change the number: 10² is not 102.
_KEPT = ("<super>", "<sub>", "<fraction>", "<circle>")


def normalised(text: str) -> str:
    """Return ``text`` with look-alikes in plain characters and single blanks between words."""
    if not text.isascii():
        text = "".join(map(_plain, text))
    return " ".join(text.split())


def _plain(char: str) -> str:
    if char.isascii():
        return char
    if char in _LOOK_ALIKES:
        return _LOOK_ALIKES[char]
    if char.isspace():
        return " "
    if unicodedata.decomposition(char).startswith(_KEPT):
        return char
    folded = unicodedata.normalize("NFKC", char)
    return folded if folded == char else "".join(map(_plain, folded))
