"""Every way to write a quantity, right and wrong."""

import cmath
import math
from decimal import Decimal

import pytest
from hypothesis import example, given
from hypothesis import strategies as st

from seqfault.case.quantities import Dimensions, Quantity, parse_quantity, read_quantity
from seqfault.case.units import UNITS
from seqfault.errors import InputError, QuantityError

RIGHT = [
    ("11 kV", 11e3, "voltage"),
    ("11kV", 11e3, "voltage"),
    ("  11\u00a0kV ", 11e3, "voltage"),
    ("750 MVA", 750e6, "power"),
    ("250 kW", 250e3, "power"),
    ("300 hp", 223710.0, "power"),  # 745.7 W, mechanical horsepower
    ("1.2 Mvar", 1.2e6, "power"),
    ("400 A", 400.0, "current"),
    ("6.35 ohm", 6.35, "impedance"),
    ("6.35 Ω", 6.35, "impedance"),  # Greek capital omega
    ("6.35 \u2126", 6.35, "impedance"),  # ohm sign
    ("5 mohm", 0.005, "impedance"),
    ("5 Mohm", 5e6, "impedance"),
    ("0.1 ohm/km", 1e-4, "impedance/length"),
    ("0.3 ohm / km", 3e-4, "impedance/length"),
    ("1609.344 ohm/mi", 1.0, "impedance/length"),
    ("0.3048 ohm/kft", 0.001, "impedance/length"),
    ("0.42 uF/km", 0.42e-9, "capacitance/length"),
    ("0.42 µF/km", 0.42e-9, "capacitance/length"),  # micro sign
    ("0.42 μF/km", 0.42e-9, "capacitance/length"),  # Greek mu
    ("250 nF", 250e-9, "capacitance"),
    ("12 uS/km", 12e-9, "admittance/length"),
    ("12 uS", 12e-6, "admittance"),
    ("10.1 %", 0.101, "ratio"),
    ("10.1 ％", 0.101, "ratio"),  # full width
    ("+2.5 %", 0.025, "ratio"),
    ("\u22122.5 %", -0.025, "ratio"),  # minus sign
    ("0.101 pu", 0.101, "ratio"),
    ("1.8 km", 1800.0, "length"),
    ("2 mi", 3218.688, "length"),
    ("100 ft", 30.48, "length"),
    ("50 Hz", 50.0, "frequency"),
    ("10 s", 10.0, "time"),
    ("150 ms", 0.15, "time"),
    ("1487 rpm", 1487.0, "speed"),
    ("1487 1/min", 1487.0, "speed"),
    ("760 K", 760.0, "temperature"),
    ("0.85 H", 0.85, "inductance"),
    ("180 deg", math.pi, "angle"),
    ("５ｋＶ", 5e3, "voltage"),  # full width
    ("10㎸", 10e3, "voltage"),  # one character for kV
    (".5 kA", 500.0, "current"),
    ("5. kA", 5000.0, "current"),
    ("1.5e-3 ohm", 1.5e-3, "impedance"),
    ("-5 kV", -5e3, "voltage"),
    ("0 ohm", 0.0, "impedance"),
    ("0.125+j0.096 ohm/km", 0.125e-3 + 0.096e-3j, "impedance/length"),
    ("0.125 + j 0.096 ohm/km", 0.125e-3 + 0.096e-3j, "impedance/length"),
    ("0.125+0.096j ohm/km", 0.125e-3 + 0.096e-3j, "impedance/length"),
    ("(0.125+j0.096) ohm/km", 0.125e-3 + 0.096e-3j, "impedance/length"),
    ("j0.096+0.125 ohm/km", 0.125e-3 + 0.096e-3j, "impedance/length"),
    ("j20 ohm", 20j, "impedance"),
    ("20j ohm", 20j, "impedance"),
    ("-j0.1ohm", -0.1j, "impedance"),
    ("1-j2 ohm", 1 - 2j, "impedance"),
    ("0.5+j10 %", 0.005 + 0.1j, "ratio"),
    ("0.41∠73.8 ohm/km", cmath.rect(0.41e-3, math.radians(73.8)), "impedance/length"),
    ("0.41∠73.8° ohm/km", cmath.rect(0.41e-3, math.radians(73.8)), "impedance/length"),
    ("0.41 ohm/km ∠ 73.8°", cmath.rect(0.41e-3, math.radians(73.8)), "impedance/length"),
    ("0.41 ohm/km at 73.8 deg", cmath.rect(0.41e-3, math.radians(73.8)), "impedance/length"),
    ("0.41 ohm/km at -73.8°", cmath.rect(0.41e-3, math.radians(-73.8)), "impedance/length"),
    ("0.41 ohm at 1.2 rad", cmath.rect(0.41, 1.2), "impedance"),
]


@pytest.mark.parametrize(("text", "value", "dimension"), RIGHT)
def test_reads(text: str, value: complex, dimension: str) -> None:
    quantity = parse_quantity(text)
    assert cmath.isclose(quantity.value, value, rel_tol=3e-16)
    assert isinstance(quantity.value, complex) == isinstance(value, complex)
    assert (quantity.dimension, quantity.text) == (dimension, text)


WRONG = [
    ("", '"": a number with its unit is wanted'),
    ("kV", '"kV": a number is wanted before the unit, as in "11 kV"'),
    ("11 KV", '"11 KV": there is no unit "KV"; write "11 kV"'),
    ("11 kv", '"11 kv": there is no unit "kv"; write "11 kV"'),
    ("11 mV", '"11 mV": there is no unit "mV"; write "11 kV"'),
    ("5 mva", '"5 mva": there is no unit "mva"; write "5 MVA"'),
    ("5 mVA", '"5 mVA": there is no unit "mVA"; write "5 MVA"'),
    ("5 mW", '"5 mW": there is no unit "mW"; write "5 MW"'),
    ("5 kVAr", '"5 kVAr": there is no unit "kVAr"; write "5 kvar"'),
    ("5 Ohm", '"5 Ohm": there is no unit "Ohm"; write "5 ohm"'),
    ("5 ohms per km", '"5 ohms per km": there is no unit "ohms per km"; write "5 ohm/km"'),
    ("10 MOHM", '"10 MOHM": there is no unit "MOHM"; write "10 mohm" or "10 Mohm"'),
    ("1+j2 Ohm/Km", '"1+j2 Ohm/Km": there is no unit "Ohm/Km"; write "1+j2 ohm/km"'),
    ("12 us/km", '"12 us/km": there is no unit "us/km"; write "12 uS/km"'),
    ("1.0 p.u.", '"1.0 p.u.": there is no unit "p.u."; write "1.0 pu"'),
    ("10,1 %", '"10,1 %": the decimal sign is a point; write "10.1 %"'),
    ("10,1 KV", '"10,1 KV": the decimal sign is a point; write "10.1 kV"'),
    (
        "0,125+j0,096 ohm/km",
        '"0,125+j0,096 ohm/km": the decimal sign is a point; write "0.125+j0.096 ohm/km"',
    ),
    ("3,5", '"3,5": the decimal sign is a point; write "3.5" with its unit'),
    (
        "1,000 kVA",
        '"1,000 kVA": a number is written without groups of digits; '
        'write "1.000 kVA" or "1000 kVA"',
    ),
    (
        "1 000 kVA",
        '"1 000 kVA": a number is written without groups of digits; write "1000 kVA"',
    ),
    ("5", '"5": the unit is missing; write "5 kV", "5 A" or "5 ohm", for example'),
    (
        "5 kV line",
        '"5 kV line": there is no unit "kV line"; '
        'write it as in "11 kV", "6.35 ohm" or "10.1 %"',
    ),
    ("nan ohm", '"nan ohm": a finite number is wanted'),
    ("-Infinity ohm", '"-Infinity ohm": a finite number is wanted'),
    ("1e999 V", '"1e999 V": the number is too large; a finite number is wanted'),
    ("1e308 kV", '"1e308 kV": the number is too large; a finite number is wanted'),
    ("1e41 V", '"1e41 V": the number is too large; a finite number is wanted'),
    ("1e-41 V", '"1e-41 V": the number is too small to be held; write 0 if zero is meant'),
    ("1e-999 V", '"1e-999 V": the number is too small to be held; write 0 if zero is meant'),
    (
        f"1e{'9' * 5000} V",
        f'"1e{"9" * 77}…": the exponent is too large; a finite number is wanted',
    ),
    ("10² V", '"10² V": "²" cannot stand in a quantity; a number with its unit is wanted'),
    ("½ kV", '"½ kV": "½" cannot stand in a quantity; a number with its unit is wanted'),
    ("±5 %", '"±5 %": "±" cannot stand in a quantity; a number with its unit is wanted'),
    ("0.1+0.2 ohm", '"0.1+0.2 ohm": two real parts; write R+jX'),
    ("j1+j2 ohm", '"j1+j2 ohm": two imaginary parts; write R+jX'),
    ("(1+j2 ohm", '"(1+j2 ohm": the bracket "(" is not closed after the number'),
    ("1 ohm at 30", '"1 ohm at 30": the angle has no unit; write at 30 deg'),
    (
        "1 ohm at",
        '"1 ohm at": there is no unit "ohm at"; write it as in "11 kV", "6.35 ohm" or "10.1 %"',
    ),
    (
        "1∠ ohm",
        '"1∠ ohm": an angle is wanted after the magnitude, as in 0.41 ohm/km at 73.8 deg',
    ),
    (
        "1+j2 ohm at 30 deg",
        '"1+j2 ohm at 30 deg": both an imaginary part and an angle; write one of the two',
    ),
    ("1∠30 ohm at 30 deg", '"1∠30 ohm at 30 deg": two angles; write one'),
    (
        "-1∠30 ohm",
        '"-1∠30 ohm": a magnitude is not negative; add 180 to the angle instead',
    ),
    (
        "3 V at 30 deg at 4",
        '"3 V at 30 deg at 4": "at 4" follows the angle, where nothing can',
    ),
    (
        "5 \x1b[31mkV",
        '"5 \\u001b[31mkV": there is no unit "\\u001b[31mkV"; '
        'write it as in "11 kV", "6.35 ohm" or "10.1 %"',
    ),
]  # fmt: skip


@pytest.mark.parametrize(("text", "message"), WRONG, ids=lambda value: value[:20])
def test_refuses_and_says_what_would_be_right(text: str, message: str) -> None:
    with pytest.raises(QuantityError) as caught:
        parse_quantity(text)
    assert str(caught.value) == message


LINE = Dimensions("impedance/length", "impedance", complex=True)
MISPLACED = [
    ("11", Dimensions("voltage"), '"11": the unit is missing; write "11 kV" or "11 V"'),
    ("5", LINE, '"5": the unit is missing; write "5 ohm/km" or "5 ohm"'),
    (
        "11 kA",
        Dimensions("voltage"),
        '"11 kA": this is a current; a voltage is wanted, as in "11 kV"',
    ),
    (
        "5 V",
        LINE,
        '"5 V": this is a voltage; an impedance per length or an impedance is wanted, '
        'as in "0.125+j0.096 ohm/km" or "0.1+j1.2 ohm"',
    ),
    (
        "1+j2 kV",
        Dimensions("voltage"),
        '"1+j2 kV": this is complex; a plain voltage is wanted, as in "11 kV"',
    ),
    (
        "0.85 H",
        Dimensions("impedance"),
        '"0.85 H": this is an inductance; an impedance is wanted, as in "6.35 ohm" (X = 2 pi f L)',
    ),
    (
        "5 furlong",
        Dimensions("length"),
        '"5 furlong": there is no unit "furlong"; write it as in "1.8 km"',
    ),
    (
        "yes",
        Dimensions("length"),
        '"yes": a number is wanted before the unit, as in "1.8 km"',
    ),
]


@pytest.mark.parametrize(("text", "dimensions", "message"), MISPLACED)
def test_refuses_another_dimension(text: str, dimensions: Dimensions, message: str) -> None:
    with pytest.raises(QuantityError) as caught:
        read_quantity(text, dimensions)
    assert str(caught.value) == message


def test_real_value_may_stand_where_a_complex_one_can() -> None:
    assert read_quantity("5 ohm", LINE).value == 5.0


@given(
    st.floats(min_value=1e-6, max_value=1e9),
    st.sampled_from([unit for unit in UNITS if unit not in ("deg", "°", "rad")]),
    st.booleans(),
)
@example(10.1, "%", False)
def test_text_of_a_value_reads_back(value: float, unit: str, spaced: bool) -> None:
    blank = " " if spaced or unit[0] == "1" else ""
    text = f"{value!r}{blank}{unit}"
    dimension, power, factor = UNITS[unit]
    quantity = parse_quantity(text)
    assert quantity.dimension == dimension
    # the power of ten costs no digit: the decimal text is shifted, and rounded once
    assert quantity.value == float(Decimal(repr(value)).scaleb(power)) * factor


@given(
    st.builds(complex, st.floats(1e-3, 1e6), st.one_of(st.floats(1e-3, 1e6), st.floats(-1e6, -1e-3))),
    st.sampled_from(["ohm", "ohm/km", "%", "pu"]),
)
def test_complex_forms_agree(value: complex, unit: str) -> None:
    sign = "-" if math.copysign(1, value.imag) < 0 else "+"
    real, size = repr(value.real), repr(abs(value.imag))
    first = parse_quantity(f"{real}{sign}j{size} {unit}").value
    assert parse_quantity(f"{real} {sign} {size}j {unit}").value == first
    degrees = math.degrees(cmath.phase(value))
    turned = parse_quantity(f"{abs(value)!r} {unit} at {degrees!r} deg").value
    assert turned == parse_quantity(f"{abs(value)!r}∠{degrees!r} {unit}").value
    assert cmath.isclose(turned, first, rel_tol=1e-12)


@given(st.text() | st.text(alphabet="0123456789+-j.,e∠° ohmkVA%/at()\n\x1b"))
def test_any_text_is_read_or_refused_on_one_line(text: str) -> None:
    outcome: Quantity | str
    try:
        outcome = parse_quantity(text)
    except InputError as error:
        outcome = str(error)
    assert outcome.isprintable() if isinstance(outcome, str) else cmath.isfinite(outcome.value)
