"""A case file with other settings of its relays: the text edited line by line, its comments kept.

What comes out is read again and compared with what was meant, so that a way of writing TOML that the
editing does not follow is refused and never spoilt.
"""

from __future__ import annotations

import json
import re
import tomllib
from collections.abc import Mapping
from copy import deepcopy
from typing import Any

from seqfault.case.text import parse_text
from seqfault.errors import RequestError, quoted

Changes = Mapping[str, Mapping[str, str | float]]
"""New values of fields, by relay."""

_VALUE = r'"(?:[^"\\]|\\.)*"|\'[^\']*\'|[^\s,#}]+'


def rewritten(content: bytes, name: str, changes: Changes) -> bytes:
    """``content`` of the case file ``name`` with ``changes`` made to its relays.

    Raises ``RequestError`` where the file writes them in a way that cannot be edited.
    """
    wanted = deepcopy(dict(parse_text(content, name)))
    for relay, fields in changes.items():
        wanted["relays"][relay].update(fields)
    text = content.decode("utf-8")
    if text.lstrip("\ufeff \t\r\n").startswith("{"):
        return (json.dumps(wanted, indent=2, ensure_ascii=False) + "\n").encode()
    edited = _edited(text, changes).encode()
    try:
        made = dict(parse_text(edited, name))
    except Exception:  # whatever the editing did, it did not follow the file
        made = {}
    if made != wanted:
        raise RequestError(
            f"--write: the relays of {quoted(name)} are written in a way that cannot be edited line by"
            " line; give each a table [relays.NAME] with a line for pickup, multiplier and delay"
        )
    return edited


def _edited(text: str, changes: Changes) -> str:
    left = {(relay, field): _toml(value) for relay, own in changes.items() for field, value in own.items()}
    lines = text.splitlines(keepends=True)
    table: tuple[str, ...] = ()
    inside = ""
    after: dict[str, int] = {}
    for k, line in enumerate(lines):
        if inside:
            if inside in line:
                inside = ""
            continue
        opened = next((mark for mark in ('"""', "'''") if line.count(mark) % 2), "")
        header = _header(line)
        if header is not None:
            table = header
            if table[:1] == ("relays",) and len(table) == 2:
                after[table[1]] = k
            continue
        own_path, at = _assigned(line)
        path = table + own_path
        inside = opened
        if path[:1] != ("relays",) or not own_path or len(path) < 2:
            continue
        relay = path[1]
        if len(path) == 3 and table == ("relays", relay):
            after[relay] = k if path[2] == "curve" else after.get(relay, k)
        if len(path) == 3 and (relay, path[2]) in left:
            value = left.pop((relay, path[2]))
            lines[k] = line[:at] + re.sub(_VALUE, lambda _, v=value: v, line[at:], count=1)  # type: ignore[misc]
        elif len(path) == 2:
            lines[k] = _inline(line, at, relay, left)
    for relay in dict.fromkeys(relay for relay, _ in left):
        if relay in after:
            own = {field: value for (other, field), value in left.items() if other == relay}
            k = after[relay]
            end = "\r\n" if lines[k].endswith("\r\n") else "\n"
            lines[k] = lines[k].rstrip("\r\n") + end
            lines[k] += "".join(f"{field} = {value}{end}" for field, value in own.items())
    return "".join(lines)


def _inline(line: str, at: int, relay: str, left: dict[tuple[str, str], str]) -> str:
    """A relay written as ``NAME = { … }`` on one line."""
    for key in [key for key in left if key[0] == relay]:
        pattern = rf"([{{,]\s*{re.escape(key[1])}\s*=\s*)({_VALUE})"
        head, tail = line[:at], line[at:]
        value = left[key]
        tail, count = re.subn(pattern, lambda m, v=value: m[1] + v, tail, count=1)  # type: ignore[misc]
        if not count:
            tail = tail.replace("{", "{ " + f"{key[1]} = {value},", 1)
        line = head + tail
        del left[key]
    return line


def _header(line: str) -> tuple[str, ...] | None:
    """The path of a table header, None where the line is none."""
    if not line.lstrip().startswith("[") or line.lstrip().startswith("[["):
        return None
    try:
        return _path(tomllib.loads(line))
    except tomllib.TOMLDecodeError:
        return None


def _assigned(line: str) -> tuple[tuple[str, ...], int]:
    """The path of the key that a line assigns to, and where its value begins; () where it does not."""
    at = line.find("=")
    while at >= 0:
        try:
            return _path(tomllib.loads(f"{line[:at]}= {{}}")), at + 1
        except tomllib.TOMLDecodeError:
            at = line.find("=", at + 1)
    return (), 0


def _path(tree: dict[str, Any]) -> tuple[str, ...]:
    out: list[str] = []
    while tree:
        key, tree = next(iter(tree.items()))
        out.append(key)
    return tuple(out)


def _toml(value: str | float) -> str:
    return json.dumps(value, ensure_ascii=False) if isinstance(value, str) else f"{value:.12g}"
