"""Relay times in line, and how much of a generator's winding its earth-fault relay leaves uncovered."""

from __future__ import annotations

from math import sqrt

from seqfault.equations.relay_curves import multiplier_for, operate_time
from seqfault.equations.winding_cover import resistor_for_share, uncovered_share
from tests.published.figures import FROM_MEMORY, PRINTED, Example, Figure

SI = "IEC standard inverse"


def _four_relays() -> tuple[float, dict[str, float]]:
    """Time of the last relay (s), and the multipliers of the three behind it."""
    multiples = {"D": 2000 / 100, "C": 3000 / 200, "B": 5000 / 300, "A": 6000 / 400}
    time = first = float(operate_time(SI, multiples["D"], 0.1))
    multipliers = {}
    for relay in "CBA":
        time += 0.5
        multipliers[relay] = float(multiplier_for(SI, multiples[relay], time))
    return first, multipliers


GRADING = Example(
    "Four relays in line with standard inverse curves",
    "Subir Ray, Ex. 14.2",
    f"{PRINTED}, where one decimal is given; four decimals computed by hand from the same data",
    "6000, 5000, 3000, 2000 A; 400/1 to 100/1 A, set to 1 A; 0.5 s apart; multiplier 0.1 at the last",
    (
        Figure("multiple at B", 16.67, "", lambda: 5000 / 300),
        Figure("time at D", 0.2267, "s", lambda: _four_relays()[0]),
        Figure("multiplier at C, printed", 0.3, "", lambda: _four_relays()[1]["C"], 0.05),
        Figure("multiplier at B, printed", 0.5, "", lambda: _four_relays()[1]["B"], 0.02),
        Figure("multiplier at A, printed", 0.7, "", lambda: _four_relays()[1]["A"], 0.02),
        Figure("multiplier at C", 0.2889, "", lambda: _four_relays()[1]["C"], 2e-4),
        Figure("multiplier at B", 0.5072, "", lambda: _four_relays()[1]["B"], 2e-4),
        Figure("multiplier at A", 0.6864, "", lambda: _four_relays()[1]["A"], 2e-4),
    ),
)

V66, V11 = 6600 / sqrt(3), 11000 / sqrt(3)


def _percent(pickup: float, resistor: float, voltage: float, winding: complex = 0j) -> float:
    return 100 * uncovered_share(pickup, resistor, voltage, winding)


MEHTA = Example(
    "Earth-fault relay of a generator: the share of the winding it leaves uncovered (Mehta)",
    'V. K. Mehta, R. Mehta, "Principles of Power System", ch. 22, Ex. 22.1 to 22.4',
    PRINTED,
    "resistor for a share with the winding's reactance; share for a resistor and a relay behind 1000/5 A",
    (
        Figure(
            "22.1: 10 MVA, 6.6 kV, 10 %, 175 A, 10 % uncovered", 2.177, "ohm",
            lambda: resistor_for_share(175, 0.1, V66, 0.1j * 6600**2 / 10e6),
        ),
        Figure("22.2: relay 0.5 A, 7.5 ohm", 19.68, "%", lambda: _percent(0.5 * 200, 7.5, V66)),
        Figure("22.3: relay 0.75 A, 6 ohm", 23.6, "%", lambda: _percent(0.75 * 200, 6, V66)),
        Figure("22.3: 10 % uncovered", 2.54, "ohm", lambda: resistor_for_share(150, 0.1, V66)),
        Figure(
            "22.4: 20 % of full load, 15 % uncovered", 3.27, "ohm",
            lambda: resistor_for_share(0.2 * 10e6 / (3 * V66), 0.15, V66),
        ),
    ),
)  # fmt: skip

SONI = Example(
    "Earth-fault relay of a generator: the share of the winding it leaves uncovered (Soni)",
    "Chakrabarti, Soni and others, ch. 3.8, Ex. 3.8.1 to 3.8.3",
    PRINTED,
    "the same with other plant, and with the winding's resistance",
    (
        Figure(
            "3.8.1: 2.5 MVA, 6.6 kV, 12.5 %, 200 A, 10 % uncovered", 1.89, "ohm",
            lambda: resistor_for_share(200, 0.1, V66, 0.125j * 6600**2 / 2.5e6), 2e-3,
        ),
        Figure("3.8.2: 1200/5 A, relay 0.75 A, 6 ohm", 17, "%", lambda: _percent(180, 6, V11)),
        Figure("3.8.2: 3 ohm", 8.5, "%", lambda: _percent(180, 3, V11)),
        Figure("3.8.2: 12 ohm", 34, "%", lambda: _percent(180, 12, V11)),
        Figure(
            "3.8.3: 5 MVA, 30 % of full load, 0.5 ohm of winding, 6.5 ohm", 22.8, "%",
            lambda: _percent(0.3 * 5e6 / (3 * V66), 6.5, V66, 0.5), 2e-3,
        ),
    ),
)  # fmt: skip

CURVE_TIMES = Example(
    "Operate times of inverse curves at a multiplier of 1",
    "IEC 60255-151:2009 curves A to C; IEEE C37.112-1996; long-time inverse: common practice (BS 142)",
    FROM_MEMORY,
    "the constants of each curve at a handbook point",
    (
        Figure("IEC standard inverse, 10 times", 2.97, "s", lambda: float(operate_time(SI, 10, 1))),
        Figure(
            "IEC very inverse, 10 times", 1.5, "s",
            lambda: float(operate_time("IEC very inverse", 10, 1)), 1e-12,
        ),
        Figure(
            "IEC extremely inverse, 9 times", 1.0, "s",
            lambda: float(operate_time("IEC extremely inverse", 9, 1)), 1e-12,
        ),
        Figure(
            "IEC long-time inverse, 5 times", 30.0, "s",
            lambda: float(operate_time("IEC long-time inverse", 5, 1)), 1e-12,
        ),
        Figure(
            "IEEE very inverse, 5 times", 1.308, "s",
            lambda: float(operate_time("IEEE very inverse", 5, 1)),
        ),
        Figure(
            "IEEE extremely inverse, 5 times", 1.2967, "s",
            lambda: float(operate_time("IEEE extremely inverse", 5, 1)), 1e-6,
        ),
    ),
)  # fmt: skip

EXAMPLES = (CURVE_TIMES, GRADING, MEHTA, SONI)
