"""A small sound installation in the text of a case file, and how tests spoil it."""

from collections.abc import Iterator
from pathlib import Path

from seqfault.case.reader import read_case
from seqfault.case.records import Case

BASE = """\
title = "Small works, 33/11 kV"
frequency = "50 Hz"
base_power = "100 MVA"

[buses]
grid = "33 kV"
main = "11 kV"
pump = "11 kV"

[infeeds.utility]
bus = "grid"
three_phase = "8 kA"
x_over_r = 10
line_ground = "4 kA"
x0_over_r0 = 5

[transformers.T1]
vector_group = "Dyn11"
rating = "10 MVA"
hv = { bus = "grid", voltage = "33 kV" }
lv = { bus = "main", voltage = "11 kV", neutral = "NER" }
impedance = "10 %"
x_over_r = 20

[lines.F1]
from = "main"
to = "pump"
z1 = "0.125+j0.096 ohm/km"
z0 = "0.6+j0.3 ohm/km"
c1 = "0.42 uF/km"
c0 = "0.42 uF/km"
length = "1.8 km"

[neutrals.NER]
resistance = "15.9 ohm"
"""

GENERATOR = """
[generators.G1]
bus = "main"
rating = "5 MVA"
subtransient = "18 %"
"""
MOTOR = """
[motors.M1]
bus = "pump"
rating = "300 kVA"
locked_rotor = 6
"""
OTHERS = """
[lines.F2]
from = "main"
to = "pump"
z1 = "0.125+j0.096 ohm/km"
z0 = "0.6+j0.3 ohm/km"
length = "2 km"

[mutual_couplings.M1]
lines = ["F1", "F2"]
z0 = "0.05+j0.12 ohm/km"
length = "1 km"
start = { F1 = "0.5 km", F2 = "0 km" }

[earthing_transformers.E1]
bus = "pump"
z0 = "4 %"
x_over_r = 20
rating = "200 kVA"
duration = "10 s"
neutral = "NER"

[series_reactors.R1]
from = "main"
to = "pump"
impedance = "6 %"
x_over_r = 40
rating = "10 MVA"

[capacitors.C1]
bus = "main"
power = "2 Mvar"
connection = "star"

[converters.PV]
bus = "pump"
rating = "2 MVA"
fault_current = 1.1
angle = "90 deg"
threshold = "0.9 pu"

[ties.K1]
from = "main"
to = "pump"
closed = false
"""
PROTECTION = """
[current_transformers.CB]
ratio = "50/1 A"
class = "10P10"
connection = "core-balance"

[current_transformers.C3]
ratio = "400/1 A"
class = "5P20"
connection = "residual"
burden = "10 VA"
connected_burden = "2.5 ohm"
winding_resistance = "2 ohm"

[current_transformers.CN]
ratio = "300/1 A"
class = "PX"
knee_point = "200 V"
winding_resistance = "2 ohm"
connection = "neutral"

[relays.F1-core]
at = "F1@main"
measures = "core-balance"
ct = "CB"
pickup = "0.2 In"
curve = "definite"
delay = "0.1 s"
protects = ["F1", "pump"]
breaker_time = "70 ms"

[relays.F1-residual]
at = "F1@main"
measures = "residual"
ct = "C3"
vt = "11 kV/110 V"
direction = "forward"
characteristic_angle = "-15 deg"
pickup = "40 A"
curve = "IEC standard inverse"
multiplier = 0.1
instant = { pickup = "4 In", delay = "0.1 s" }
steps = { pickup = "0.05 In", multiplier = { step = 0.01, least = 0.05, greatest = 1 } }
protects = ["F1"]

[relays.T1-neutral]
at = "NER"
measures = "neutral"
ct = "CN"
pickup = "45 A"
curve = "IEC long-time inverse"
multiplier = 0.1
minimum_time = "0.6 s"
protects = ["main", "T1.lv"]
backs_up = ["F1-core", "F1-residual"]

[relays.main-voltage]
at = "T1@main"
measures = "neutral-voltage"
vt = "11 kV/110 V"
pickup = "10 %"
curve = "definite"
backs_up = ["T1-neutral"]

[demands]
fault_resistances = ["0 ohm", "10 ohm"]
see = 2
least = ["base"]
margin = { relay_error = "5 %", breaker = "80 ms" }
"""


def third_winding(group: str, more: str = "") -> str:
    """Return the base text with a third winding on its transformer, and ``more`` of its fields."""
    pairs = '{ hv_lv = "10 %", hv_tv = "15 %", lv_tv = "6 %" }'
    third = 'tv = { bus = "pump", voltage = "11 kV" }\n'
    return spoilt(("Dyn11", group), ('impedance = "10 %"\n', f"{third}impedance = {pairs}\n{more}"))


def spoilt(*changes: tuple[str, str], more: str = "") -> str:
    """Return the base text with each old part, which must be there, replaced by its new part."""
    text = BASE
    for old, new in changes:
        assert text.count(old) >= 1, old
        text = text.replace(old, new, 1)
    return text + more


def read_text(folder: Path, text: str, name: str = "case.toml") -> Case:
    """Return the case read from a file that holds ``text``."""
    path = folder / name
    path.write_text(text, encoding="utf-8", errors="surrogatepass", newline="")
    return read_case(path)


def entries(page: str) -> Iterator[tuple[str, str, list[str]]]:
    """Yield the name, the text of the case file and the messages of each entry of a page.

    An entry opens with ``# name``. ``-`` is a part of the base text and ``+`` what stands in its
    place; ``>`` is added at the end; ``=`` is a whole file instead; ``!`` is what the reader says.
    """
    for entry in page.split("\n# "):
        name, _, body = entry.removeprefix("# ").partition("\n")
        changes: list[tuple[str, str]] = []
        parts: dict[str, list[str]] = {sign: [] for sign in "-+>=!"}
        for line in [*body.splitlines(), "."]:
            if line and line[0] != "+" and parts["-"] and (parts["+"] or line[0] != "-"):
                changes.append(("\n".join(parts["-"]), "\n".join(parts["+"])))
                parts["-"], parts["+"] = [], []
            if line and line[0] in parts:
                parts[line[0]].append(line[1:])
        more = "".join(f"{line}\n" for line in parts[">"])
        whole = "".join(f"{line}\n" for line in parts["="])
        yield name, whole or spoilt(*changes, more=more), parts["!"]
