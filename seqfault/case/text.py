"""The bytes of a case file to the tree of TOML or JSON, with plain words where that fails."""

from __future__ import annotations

import json
import os
import re
import sys
import tomllib
from collections import Counter
from collections.abc import Mapping
from typing import Any

import msgspec

from seqfault.case.wording import Spelling
from seqfault.errors import CaseError, RequestError, quoted

_AT = re.compile(r" \(at (?:line (\d+), column (\d+)|end of document)\)$")
_UTF16 = (b"\xff\xfe", b"\xfe\xff")


def read_bytes(source: str) -> bytes:
    """Return what stands in a file, or on standard input for ``-``.

    Raises RequestError when it cannot be read.
    """
    if source == "-":
        stream = getattr(sys.stdin, "buffer", None)
        if stream is None:
            raise RequestError("standard input: there is none to read the case from")
        return bytes(stream.read())
    if os.path.isdir(source):
        raise RequestError(f"{quoted(source)}: this is a directory; a case file is wanted")
    try:
        with open(source, "rb") as file:
            return file.read()
    except FileNotFoundError:
        raise RequestError(f"{quoted(source)}: there is no such file{_neighbour(source)}") from None
    except OSError as error:
        raise RequestError(f"{quoted(source)}: cannot be read: {error.strerror}") from None
    except ValueError:
        raise RequestError(f"{quoted(source)}: this cannot be the name of a file") from None


def _neighbour(source: str) -> str:
    folder, name = os.path.split(source)
    try:
        names = [n for n in os.listdir(folder or ".") if n.endswith((".toml", ".json"))]
    except OSError:
        return ""
    return Spelling(names).hint(name)


def parse_text(content: bytes, source: str) -> Mapping[str, Any]:
    """Return the tree of a case file. Raises CaseError when it is neither good TOML nor JSON."""
    if content.startswith(_UTF16) or b"\0" in content[:200]:
        raise CaseError(["the file is not plain text in UTF-8; save it as UTF-8"], source)
    try:
        text = content.decode("utf-8-sig")
    except UnicodeDecodeError as error:
        line = content.count(b"\n", 0, error.start) + 1
        byte = content[error.start]
        raise CaseError(
            [f"line {line}: byte 0x{byte:02x} is not UTF-8; save the file as UTF-8"], source
        ) from None
    if not text.strip():
        raise CaseError(["the file is empty"], source)
    suffix = os.path.splitext(source)[1].lower()
    is_json = suffix == ".json" or (suffix != ".toml" and text.lstrip()[0] == "{")
    try:
        if not is_json:
            return tomllib.loads(text)
        return _json_at_once(content) or _json(text, source)
    except tomllib.TOMLDecodeError as error:
        raise CaseError([_explained(error, text)], source) from None
    except json.JSONDecodeError as error:
        raise CaseError([_explained_json(error)], source) from None
    except RecursionError:
        raise CaseError(["the tables are nested too deeply"], source) from None
    except ValueError:
        raise CaseError(["a number has too many digits to be read"], source) from None


def _json_at_once(content: bytes) -> Mapping[str, Any] | None:
    """Return the tree of good JSON in which no key stands twice; None where either is in doubt.

    Two equal keys leave one in the tree, and each key of the text has a colon behind its quotes. So
    no key is lost where the tree has as many as the text has colons, or colons after quotes.
    """
    try:
        tree = msgspec.json.decode(content.removeprefix(b"\xef\xbb\xbf"))
    except (msgspec.DecodeError, ValueError, RecursionError):
        return None
    if not isinstance(tree, dict):
        return None
    keys, tables = 0, [tree]
    while tables:
        table = tables.pop()
        keys += len(table)
        tables.extend([value for value in table.values() if type(value) is dict])
    if keys == content.count(b":") or keys == len(re.findall(rb'"\s*:', content)):
        return tree
    return None


def _json(text: str, source: str) -> Mapping[str, Any]:
    repeated: list[str] = []

    def table(pairs: list[tuple[str, Any]]) -> dict[str, Any]:
        made = dict(pairs)
        if len(made) < len(pairs):
            counts = Counter(key for key, _ in pairs)
            repeated.extend(key for key, count in counts.items() if count > 1)
        return made

    tree = json.loads(text, object_pairs_hook=table)
    if repeated:
        raise CaseError([f"{quoted(key)} stands twice in one JSON object" for key in repeated], source)
    if not isinstance(tree, dict):
        raise CaseError(["the JSON file is not an object in braces, { }"], source)
    return tree


def _explained_json(error: json.JSONDecodeError) -> str:
    where = f"line {error.lineno}, column {error.colno}"
    return f"{where}: JSON breaks here: {error.msg[:1].lower()}{error.msg[1:]}"


def _explained(error: tomllib.TOMLDecodeError, text: str) -> str:
    """Return one sentence that says where TOML broke and, where it can be seen, why."""
    message = str(error)
    at = _AT.search(message)
    lines = text.split("\n")
    number = int(at[1]) if at and at[1] else max(len(lines), 1)
    line = lines[number - 1].strip() if 0 < number <= len(lines) else ""
    reason = message[: at.start()] if at else message
    return f"line {number}: {_reason(reason, line, lines[:number], text)}"


def _reason(reason: str, line: str, before: list[str], text: str) -> str:
    if _inline_open(before):
        return "a table in braces { } must be closed on its own line, without a comma at its end"
    if re.search("[“”„‘’]", line):
        return f'{quoted(line, 80)}: write straight quotes ", not curly ones'
    if reason.startswith(("Cannot overwrite", "Cannot declare", "Cannot mutate", "Cannot redefine")):
        return f"{quoted(line, 80)}: this name or table stands twice; each can stand once"
    if "array" in reason:
        return "a list opened with [ in or above this line is not closed, or a comma is missing in it"
    if line.startswith("["):
        return (
            f"{quoted(line, 80)}: the table header does not read; close it with ], and put a name "
            'with blanks or other signs in quotes, as in [lines."F 1"]'
        )
    key, equals, value = line.partition("=")
    key, value = key.strip(), value.strip()
    if not equals:
        return f"{quoted(line, 80)}: a line is a [table], or a key = value"
    if not re.fullmatch(r"[A-Za-z0-9_.\-\"' ]+", key) or (" " in key and key[0] not in "\"'"):
        return f'{quoted(key, 80)}: a name with blanks or other signs needs quotes, as in "F 1" = …'
    if not value:
        return f"{quoted(line, 80)}: the value is missing after ="
    if value[0] not in "\"'[{":
        bare = value.split("#")[0].strip()
        if re.fullmatch(r"[+-]?[0-9]+,[0-9]+", bare):
            return f"{quoted(line, 80)}: the decimal sign is a point; write {bare.replace(',', '.')}"
        if re.fullmatch(r"[+-]?[0-9.]+\W+", bare):
            return f"{quoted(line, 80)}: nothing can follow the number"
        if bare.lower() in ("yes", "no", "on", "off") or bare in ("True", "False"):
            return f"{quoted(line, 80)}: write true or false"
        return f"{quoted(line, 80)}: text and quantities stand in quotes; write {key} = {quoted(bare, 80)}"
    if "\\" in value:
        return f"{quoted(line, 80)}: a backslash in double quotes is written \\\\"
    if reason.startswith(("Unterminated", "Illegal character", "Expected newline")):
        return f"{quoted(line, 80)}: the quotes or brackets of the value do not close, or text follows"
    return f"{quoted(line, 80)}: this is not TOML: {reason[:1].lower()}{reason[1:]}"


def _inline_open(before: list[str]) -> bool:
    """Tell whether a brace opened in the last lines is not closed on its own line."""
    for line in before[-2:]:
        bare = re.sub(r'"(?:[^"\\]|\\.)*"|\'[^\']*\'', "", line).split("#")[0]
        if bare.count("{") > bare.count("}") or re.search(r",\s*}", bare):
            return True
    return False
