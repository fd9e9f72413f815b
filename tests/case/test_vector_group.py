"""Vector groups by the letters of IEC 60076-1."""

import pytest

from seqfault.case.vector_group import VectorGroup, parse_vector_group
from seqfault.errors import FieldError

RIGHT = [
    ("Dyn11", VectorGroup("delta", "star", False, True, 11)),
    ("YNd1", VectorGroup("star", "delta", True, False, 1)),
    ("YNyn0", VectorGroup("star", "star", True, True, 0)),
    ("YNy6", VectorGroup("star", "star", True, False, 6)),
    ("Yyn2", VectorGroup("star", "star", False, True, 2)),
    ("Yy0", VectorGroup("star", "star", False, False, 0)),
    ("Dd10", VectorGroup("delta", "delta", False, False, 10)),
    ("Yd7", VectorGroup("star", "delta", False, False, 7)),
]
ODD = "the clock number of a star and a delta is odd: 1, 3, 5, 7, 9 or 11"
EVEN = "the clock number of two windings alike is even: 0, 2, 4, 6, 8 or 10"
WANTED = 'a group is wanted as in "Dyn11": high voltage in capitals, low voltage, clock number'
WRONG = [
    ("Dyn13", "the clock number is 0 to 11"),
    ("Dyn111", "the clock number is 0 to 11"),
    ("Dyn" + "1" * 5000, "the clock number is 0 to 11"),
    ("Dyn12", "the clock number is 0 to 11"),
    ("Dyn2", ODD),
    ("YNd0", ODD),
    ("Yyn1", EVEN),
    ("Dd11", EVEN),
    ("Dyn", 'the clock number is missing; write "Dyn11", for example'),
    ("YNyn", 'the clock number is missing; write "YNyn0", for example'),
    ("DYN11", 'write "Dyn11"'),
    ("dyn11", 'write "Dyn11"'),
    ("dYN11", 'write "Dyn11"'),
    ("Dy n 11", 'write "Dyn11"'),
    ("D/yn-11", 'write "Dyn11"'),
    ("Dyn01", 'write "Dyn1"'),
    ("Dzn0", "a zigzag winding is not modelled by this version"),
    ("Yz11", "a zigzag winding is not modelled by this version"),
    ("YNa0", "an auto-transformer is not modelled by this version"),
    ("YNyn0d11", "three windings are not modelled by this version"),
    ("YNa0d11", "three windings are not modelled by this version"),
    ("Ii0", "a single-phase transformer is not modelled"),
    ("", WANTED),
    ("11", WANTED),
    ("Dyn\u0661", WANTED),  # a digit of another script
    ("star-delta", WANTED),
    ("Dyn11x", WANTED),
]


@pytest.mark.parametrize(("text", "group"), RIGHT)
def test_reads(text: str, group: VectorGroup) -> None:
    assert parse_vector_group(text) == group


@pytest.mark.parametrize(("text", "problem"), WRONG, ids=lambda value: value[:20])
def test_refuses_and_says_what_would_be_right(text: str, problem: str) -> None:
    with pytest.raises(FieldError) as caught:
        parse_vector_group(text)
    assert str(caught.value) == f'"{text if len(text) < 80 else text[:79] + "…"}": {problem}'


def test_tells_a_delta() -> None:
    assert parse_vector_group("Dyn11").has_delta
    assert parse_vector_group("YNd5").has_delta
    assert not parse_vector_group("YNyn0").has_delta
