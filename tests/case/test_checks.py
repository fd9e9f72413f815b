"""Each rule across records, with its message word for word."""

from pathlib import Path

import pytest

from seqfault.errors import CaseError
from tests.case.installation import BASE, GENERATOR, MOTOR, entries, read_text, spoilt

BAD = Path(__file__).parent / "bad"


def page(name: str) -> list[object]:
    """Return the entries of a page as parameters of a test."""
    text = (BAD / f"{name}.txt").read_text(encoding="utf-8")
    return [pytest.param(*rest, id=entry) for entry, *rest in entries(text)]


@pytest.mark.parametrize(("text", "messages"), page("rules"))
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
}  # fmt: skip


@pytest.mark.parametrize("name", SOUND)
def test_says_nothing_about_what_is_sound(tmp_path: Path, name: str) -> None:
    assert read_text(tmp_path, SOUND[name]).warnings == ()


def test_limit_of_the_earth_fault_level(tmp_path: Path) -> None:
    """|Z1 + Z2 + Z0| = 3 V / Ik1 with Z1 = Z2: no Z0 is left at one and a half times Ik3."""
    read_text(tmp_path, spoilt(('"4 kA"', '"11.999 kA"')))
    with pytest.raises(CaseError, match="the largest earth-fault current is 12 kA"):
        read_text(tmp_path, spoilt(('"4 kA"', '"12.001 kA"')))


def test_a_broken_record_brings_no_second_complaint(tmp_path: Path) -> None:
    """What refers to a record that could not be read is not told that it is missing."""
    with pytest.raises(CaseError) as caught:
        read_text(tmp_path, spoilt(('main = "11 kV"', "main = 11"), ("15.9 ohm", "15.9")))
    assert len(caught.value.complaints) == 2
