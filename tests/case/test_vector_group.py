"""Vector groups by the letters of IEC 60076-1."""

import pytest

from seqfault.case.vector_group import Connection, VectorGroup, parse_vector_group
from seqfault.errors import FieldError


def two(hv: Connection, lv: Connection, hv_star: bool, lv_star: bool, clock: int) -> VectorGroup:
    return VectorGroup(hv, lv, None, hv_star, lv_star, False, clock, 0)


RIGHT = [
    ("Dyn11", two("delta", "star", False, True, 11)),
    ("YNd1", two("star", "delta", True, False, 1)),
    ("YNyn0", two("star", "star", True, True, 0)),
    ("YNy6", two("star", "star", True, False, 6)),
    ("Yyn2", two("star", "star", False, True, 2)),
    ("Yy0", two("star", "star", False, False, 0)),
    ("Dd10", two("delta", "delta", False, False, 10)),
    ("Yd7", two("star", "delta", False, False, 7)),
    ("Dzn0", two("delta", "zigzag", False, True, 0)),
    ("Yz11", two("star", "zigzag", False, False, 11)),
    ("ZNyn11", two("zigzag", "star", True, True, 11)),
    ("ZNd0", two("zigzag", "delta", True, False, 0)),
    ("ZNzn6", two("zigzag", "zigzag", True, True, 6)),
    ("YNa0", two("star", "auto", True, False, 0)),
    ("Ya0", two("star", "auto", False, False, 0)),
    ("YNyn0d11", VectorGroup("star", "star", "delta", True, True, False, 0, 11)),
    ("YNd11yn0", VectorGroup("star", "delta", "star", True, False, True, 11, 0)),
    ("YNa0d11", VectorGroup("star", "auto", "delta", True, False, False, 0, 11)),
    ("Dyn11d0", VectorGroup("delta", "star", "delta", False, True, False, 11, 0)),
    ("YNyn0zn11", VectorGroup("star", "star", "zigzag", True, True, True, 0, 11)),
    ("Yyn6y10", VectorGroup("star", "star", "star", False, True, False, 6, 10)),
]
ODD = "the clock number of a star and a delta is odd: 1, 3, 5, 7, 9 or 11"
EVEN = "the clock number of two windings alike is even: 0, 2, 4, 6, 8 or 10"
AUTO = 'an auto-transformer is a star, then a, then any third winding: "YNa0", "YNa0d11"'
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
    ("Yz0", "the clock number of a star and a zigzag is odd: 1, 3, 5, 7, 9 or 11"),
    ("ZNy6", "the clock number of a star and a zigzag is odd: 1, 3, 5, 7, 9 or 11"),
    ("Dzn11", "the clock number of a delta and a zigzag is even: 0, 2, 4, 6, 8 or 10"),
    ("ZNd1", "the clock number of a delta and a zigzag is even: 0, 2, 4, 6, 8 or 10"),
    ("Zz1", EVEN),
    ("YNa5", "the clock number of an auto-transformer is 0"),
    ("YNa", 'the clock number is missing; write "YNa0", for example'),
    ("Da0", AUTO),
    ("YNyn0a0", AUTO),
    ("Aa0", AUTO),
    ("YNyn0d10", ODD),
    ("YNyn1d11", EVEN),
    ("YNd11yn1", EVEN),
    ("Dyn11d1", EVEN),
    ("YNyn0zn0", "the clock number of a star and a zigzag is odd: 1, 3, 5, 7, 9 or 11"),
    ("YNyn0d", 'the clock number is missing; write "YNyn0d11", for example'),
    ("YNynd11", 'the clock number is missing; write "YNyn0d11", for example'),
    ("YNdyn", 'the clock number is missing; write "YNd11yn0", for example'),
    ("YNyn0d13", "the clock number is 0 to 11"),
    ("YNyn0/d11", 'write "YNyn0d11"'),
    ("ynyn0D11", 'write "YNyn0d11"'),
    ("YNyn0d11d11", "more than three windings are not modelled"),
    ("Ii0i0", "a single-phase transformer is not modelled"),
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
    assert parse_vector_group("YNyn0d11").has_delta
    assert not parse_vector_group("YNyn0").has_delta
    assert not parse_vector_group("YNyn0zn11").has_delta
