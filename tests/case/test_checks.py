"""Each rule across records, with its message word for word."""

from pathlib import Path

import pytest

from seqfault.errors import CaseError
from tests.case.installation import (
    BASE,
    GENERATOR,
    MOTOR,
    OTHERS,
    PROTECTION,
    entries,
    read_text,
    spoilt,
    third_winding,
)

BAD = Path(__file__).parent / "bad"


def page(name: str) -> list[object]:
    """Return the entries of a page as parameters of a test."""
    text = (BAD / f"{name}.txt").read_text(encoding="utf-8")
    return [pytest.param(*rest, id=entry) for entry, *rest in entries(text)]


RULES = [
    entry
    for name in ("rules", "transformers", "earthing", "lines", "shunts", "relays")
    for entry in page(name)
]


@pytest.mark.parametrize(("text", "messages"), RULES)
def test_complains(tmp_path: Path, text: str, messages: list[str]) -> None:
    with pytest.raises(CaseError) as caught:
        read_text(tmp_path, text)
    assert list(caught.value.complaints) == messages


@pytest.mark.parametrize(("text", "messages"), page("doubts"))
def test_warns(tmp_path: Path, text: str, messages: list[str]) -> None:
    assert list(read_text(tmp_path, text).warnings) == messages


SOUND = {
    "impedance in ohm seen from hv": spoilt(('"10 %"', '"10.89 ohm"')),
    "complex impedance alone": spoilt(('"10 %"\nx_over_r = 20', '"0.5+j10 %"')),
    "load loss": spoilt(("x_over_r = 20", 'load_loss = "50 kW"')),
    "infeed in MVA": spoilt(('three_phase = "8 kA"', 'three_phase = "750 MVA"')),
    "greatest earth-fault level": spoilt(('"4 kA"', '"12 kA"')),  # 3V/|2 Z1| = 1.5 x 8 kA
    "infeed by impedances": spoilt(
        ('three_phase = "8 kA"\nx_over_r = 10\nline_ground = "4 kA"\nx0_over_r0 = 5\n',
         'z1 = "0.2+j2.4 ohm"\nz2 = "0.2+j2.3 ohm"\nz0 = "-j900 ohm"\n'),
    ),
    "lines in ohm without length": spoilt(
        ("ohm/km", "ohm"), ("0.3 ohm/km", "0.3 ohm"), ("uF/km", "uF"), ("uF/km", "uF"),
        ('length = "1.8 km"\n', ""),
    ),
    "open end": spoilt(('length = "1.8 km"', 'length = "1.8 km"\nopen = ["pump"]')),
    "voltages 10 % apart": spoilt(('voltage = "33 kV"', 'voltage = "36.3 kV"')),
    "isolated generator without x0": BASE + GENERATOR + 'neutral = "isolated"\n',
    "earthed generator with x0": BASE + GENERATOR + 'neutral = "NER"\nx0 = "5 %"\n',
    "subtransient in ohm": BASE + GENERATOR.replace("18 %", "4 ohm"),
    "motor by rating": BASE + MOTOR,
    "motor by shaft power": BASE + MOTOR.replace(
        'rating = "300 kVA"', 'shaft_power = "400 hp"\nefficiency = 0.95\npower_factor = "85 %"'
    ),
    "star-star with its core": spoilt(
        ('"Dyn11"', '"YNyn0"\nmagnetic_circuit = "three-limb"')
    ),
    "neutral by current": spoilt(
        ('resistance = "15.9 ohm"', 'current = "400 A"\nvoltage = "11 kV"\nduration = "10 s"')
    ),
    "neutral by both, 0.2 % apart": spoilt(
        ('"15.9 ohm"', '"15.9 ohm"\ncurrent = "400 A"\nvoltage = "11 kV"')
    ),
    "every other table": BASE + OTHERS,
    "relays": BASE + PROTECTION,
    "three windings": third_winding("YNyn0d11"),
    "pairs in ohm and per cent": third_winding("YNyn0d11").replace('"15 %"', '"16.3 ohm"'),
    "pairs on their own ratings": third_winding(
        "YNyn0d11", 'impedance_on = { hv_tv = "5 MVA", lv_tv = "5 MVA" }\n'
    ).replace('"15 %"', '"7.5 %"').replace('"6 %"', '"3 %"'),
    # at the edge: 9 %, 1 % and just over 4 %, whose square roots are 3, 1 and 2
    "pairs at the edge": third_winding("YNyn0d11").replace('"10 %"', '"9 %"').replace(
        '"15 %"', '"1 %"').replace('"6 %"', '"4.001 %"'),
    "z0 of three pairs": third_winding(
        "YNd11yn0", 'z0 = { hv_lv = "9 %", hv_tv = "14 %", lv_tv = "6 %" }\n'
    ).replace(', neutral = "NER"', "").replace('"11 kV" }\nimp', '"11 kV", neutral = "NER" }\nimp'),
    "auto with a third winding": third_winding("YNa0d11").replace(
        'voltage = "33 kV"', 'voltage = "33 kV", neutral = "NER"').replace(
        '"11 kV", neutral = "NER"', '"11 kV"'),
    "auto without a delta": spoilt(
        ('"Dyn11"', '"YNa0"\nmagnetic_circuit = "five-limb"'),
        ('voltage = "33 kV"', 'voltage = "33 kV", neutral = "NER"'),
        ('"11 kV", neutral = "NER"', '"11 kV"'),
    ),
    "zigzag with its z0": spoilt(('"Dyn11"', '"Dzn0"\nz0 = "0.1+j0.4 ohm"')),
    "third winding a zigzag": third_winding(
        "YNyn0zn11", 'magnetic_circuit = "three-limb"\nz0 = "2 %"\n'),
    "tested in zero sequence": spoilt(
        ('"Dyn11"', '"YNyn0"\nmagnetic_circuit = "three-limb"\n'
         'zero_tests = { from_hv = "80 %", from_lv = "75 %", from_hv_lv_shorted = "9 %" }'),
    ),
    "magnetising impedance": spoilt(
        ('"Dyn11"', '"YNyn0"\nmagnetic_circuit = "three-limb"\nz0_magnetising = "65 %"')
    ),
    "15.9 ohm through a ratio": spoilt(('"15.9 ohm"', '"0.159 ohm"\nratio = 10')),
    "tuned coil": spoilt(
        ('resistance = "15.9 ohm"', 'kind = "arc-suppression"\ndetuning = "+5 %"\nloss = "3 %"')
    ),
    "line earthed at both ends": spoilt(
        ('length = "1.8 km"', 'length = "1.8 km"\nout = true\nearthed = true')
    ),
}  # fmt: skip
PARALLEL = """
[transformers.T2]
vector_group = "Dyn11"
rating = "5 MVA"
hv = { bus = "grid", voltage = "33 kV" }
lv = { bus = "main", voltage = "11 kV", neutral = "NER" }
impedance = "9.06 %"
x_over_r = 20
tap = "0.5 %"
"""
SOUND["parallel units within the limits"] = BASE + PARALLEL
SOUND["a parallel unit out of service"] = BASE + PARALLEL.replace("9.06 %", "5 %") + "out = true\n"
EARTHING = """
[earthing_transformers.E1]
bus = "pump"
z0 = "j30 ohm"
neutral = "N2"
"""
# a star point that polarises, a scale from its least setting, and a star point without a neutral
SOUND["a relay polarised by a current"] = (
    spoilt((', neutral = "NER"', ""), ("[neutrals.NER]", "[neutrals.N2]"))
    + EARTHING
    + """
[relays.R1]
at = "F1@pump"
measures = "residual"
ct = "C1"
direction = "reverse"
characteristic_angle = "0 deg"
polarisation = "T1.lv"
pickup = "0.13 In"
curve = "definite"
steps = { pickup = { step = "0.05 In", least = "0.03 In", greatest = "0.13 In" } }
[relays.R2]
at = "T1.lv"
measures = "neutral-voltage"
vt = "6.35 kV/110 V"
pickup = "5 %"
curve = "IEEE very inverse"
[relays.R3]
at = "N2"
measures = "neutral"
pickup = "5 A"
curve = "definite"
protects = ["E1", "T1.hv"]
[current_transformers.C1]
ratio = "0.2 kA/5 A"
connection = "residual"
"""
)
SOUND["three coupled lines in two records"] = (
    BASE
    + OTHERS.replace("M1", "M2")
    .replace('"F1", "F2"', '"F2", "F3"')
    .replace('start = { F1 = "0.5 km", F2 = "0 km" }', "")
    + """
[mutual_couplings.M1]
lines = ["F1", "F2"]
z0 = "0.05+j0.12 ohm/km"
[lines.F3]
from = "main"
to = "pump"
z1 = "0.125+j0.096 ohm/km"
z0 = "0.6+j0.3 ohm/km"
length = "3 km"
"""
)


@pytest.mark.parametrize("name", SOUND)
def test_says_nothing_about_what_is_sound(tmp_path: Path, name: str) -> None:
    assert read_text(tmp_path, SOUND[name]).warnings == ()


def test_limit_of_the_earth_fault_level(tmp_path: Path) -> None:
    """|Z1 + Z2 + Z0| = 3 V / Ik1 with Z1 = Z2: no Z0 is left at one and a half times Ik3."""
    read_text(tmp_path, spoilt(('"4 kA"', '"11.999 kA"')))
    with pytest.raises(CaseError, match="the largest earth-fault current is 12 kA"):
        read_text(tmp_path, spoilt(('"4 kA"', '"12.001 kA"')))


@pytest.mark.parametrize(("third", "sound"), [("4.001 %", True), ("3.999 %", False), ("15.99 %", True),
                                              ("16.01 %", False)])  # fmt: skip
def test_limits_of_the_pairs(tmp_path: Path, third: str, sound: bool) -> None:
    """With 9 % and 1 % the third lies between (3 - 1)² and (3 + 1)²: there the determinant is 0."""
    text = third_winding("YNyn0d11").replace('"10 %"', '"9 %"').replace('"15 %"', '"1 %"')
    text = text.replace('"6 %"', f'"{third}"')
    assert _reads(tmp_path, text) == sound


@pytest.mark.parametrize(("mutual", "sound"), [("j0.2999", True), ("j0.3001", False), ("-j0.2999", True),
                                               ("-j0.3001", False)])  # fmt: skip
def test_limit_of_a_coupling(tmp_path: Path, mutual: str, sound: bool) -> None:
    text = BASE + OTHERS.replace("0.05+j0.12 ohm/km", f"{mutual} ohm/km")
    assert _reads(tmp_path, text) == sound


def _reads(folder: Path, text: str) -> bool:
    try:
        read_text(folder, text)
    except CaseError:
        return False
    return True


def test_a_broken_record_brings_no_second_complaint(tmp_path: Path) -> None:
    """What refers to a record that could not be read is not told that it is missing."""
    with pytest.raises(CaseError) as caught:
        read_text(tmp_path, spoilt(('main = "11 kV"', "main = 11"), ("15.9 ohm", "15.9")))
    assert len(caught.value.complaints) == 2
