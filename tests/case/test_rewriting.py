"""A case file edited line by line: the settings change, everything else stays to the byte."""

from __future__ import annotations

import json
import tomllib

import pytest

from seqfault.case.rewriting import rewritten
from seqfault.errors import RequestError

TEXT = '''\
title = "x"  # kept

[relays.A]
at = "F@b"     # where
pickup = "5 A" # as found
multiplier = 0.2
[relays.A.instant]
pickup = "50 A"

[relays."B = \\"odd\\" # name"]
curve = "definite"   # no setting yet
note = """
pickup = "no setting"
[relays.A]
"""

[relays]
C = { pickup = "1 In", curve = "IEC very inverse", instant = { pickup = "9 In" } } # inline
D.curve = "definite"
D.delay = "1 s"
'''


def test_values_are_replaced_where_they_stand() -> None:
    changes = {
        "A": {"pickup": "6.5 A", "multiplier": 0.05},
        "D": {"delay": "0.3 s"},
        "C": {"pickup": "0.8 In"},
    }
    text = rewritten(TEXT.encode(), "c.toml", changes).decode()
    expected = TEXT
    for old, new in (
        ('pickup = "5 A" # as found\nmultiplier = 0.2', 'pickup = "6.5 A" # as found\nmultiplier = 0.05'),
        ('D.delay = "1 s"', 'D.delay = "0.3 s"'),
        ('C = { pickup = "1 In"', 'C = { pickup = "0.8 In"'),
    ):
        expected = expected.replace(old, new)
    assert text == expected


def test_settings_that_were_open_are_put_in() -> None:
    name = 'B = "odd" # name'
    text = rewritten(TEXT.encode(), "c.toml", {name: {"pickup": "3 A", "delay": "0.1 s"}}).decode()
    assert '# no setting yet\npickup = "3 A"\ndelay = "0.1 s"\nnote' in text
    tree = tomllib.loads(text)
    assert tree["relays"][name]["delay"] == "0.1 s"
    inline = rewritten(TEXT.encode(), "c.toml", {"C": {"multiplier": 0.4}}).decode()
    assert tomllib.loads(inline)["relays"]["C"]["multiplier"] == 0.4


def test_line_ends_and_byte_order_mark_stay() -> None:
    content = b"\xef\xbb\xbf" + TEXT.replace("\n", "\r\n").encode()
    made = rewritten(content, "c.toml", {"A": {"multiplier": 0.1, "delay": "1 s"}})
    assert made.startswith(b"\xef\xbb\xbf")
    assert b"\n" not in made.replace(b"\r\n", b"")


def test_json_is_written_as_json() -> None:
    tree = {"relays": {"A": {"pickup": "5 A"}}, "title": "ä"}
    made = rewritten(json.dumps(tree).encode(), "c.json", {"A": {"pickup": "6 A"}})
    assert json.loads(made) == {"relays": {"A": {"pickup": "6 A"}}, "title": "ä"}


@pytest.mark.parametrize(
    "text",
    [
        'relays = { A = { pickup = "5 A", curve = "definite" } }\n',
        '[relays]\nA = { instant = { pickup = "9 A" }, pickup = "5 A" }\n',
    ],
)
def test_what_cannot_be_followed_is_refused_in_words(text: str) -> None:
    with pytest.raises(RequestError, match="cannot be edited line by line"):
        rewritten(text.encode(), "c.toml", {"A": {"pickup": "6 A"}})
