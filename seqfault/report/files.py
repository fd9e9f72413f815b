"""Answers as JSON and CSV, and files written whole or not at all.

CSV is long, one value a line, UTF-8 without a byte-order mark, lines ended by LF. A spreadsheet
runs a cell that begins with ``=``, ``+``, ``-``, ``@``, a tab or a return as a formula, so a *text*
that begins so (a name from the case file, say) gets a single quote ``'`` before it; numbers never
do. Strip that quote before comparing such a name with the case file.
"""

from __future__ import annotations

import os
from collections.abc import Callable, Iterable, Iterator, Sequence
from itertools import islice
from typing import Any

import msgspec

from seqfault.errors import RequestError, quoted
from seqfault.report.data import Quantity, QuantityColumn

SUFFIXES = {".json": "json", ".csv": "csv", ".txt": "table"}
COLUMNS = ("place", "kind", "quantity", "phase", "value", "unit", "angle", "where", "state")
_LINES = 2000  # lines made before they are passed on
FORMULA = ("=", "+", "-", "@", "\t", "\r")


def as_json(tree: dict[str, Any]) -> bytes:
    """``tree`` as UTF-8, indented, lists of numbers on one line; what is not finite is null."""
    return ("".join(_pieces(tree, "\n")) + "\n").encode()


def _pieces(value: Any, line: str) -> Iterator[str]:
    deeper = line + "  "
    if isinstance(value, dict) and value:
        separator = "{"
        for key, item in value.items():
            yield f"{separator}{deeper}{_scalar(key)}: "
            yield from _pieces(item, deeper)
            separator = ","
        yield f"{line}}}"
    elif isinstance(value, (list, tuple)) and any(isinstance(v, (dict, list, str)) for v in value):
        separator = "["
        for item in value:
            yield f"{separator}{deeper}"
            yield from _pieces(item, deeper)
            separator = ","
        yield f"{line}]"
    elif isinstance(value, (list, tuple)):
        yield f"[{', '.join(map(_scalar, value))}]"
    else:
        yield _scalar(value)


def _scalar(value: Any) -> str:
    return msgspec.json.encode(value).decode()


def as_csv(rows: Iterable[Quantity | QuantityColumn]) -> Iterator[bytes]:
    """``rows`` under one line of column names, some thousands of whole lines at a time."""
    line = _line_writer()
    held = [line(COLUMNS)]
    for row in rows:
        if isinstance(row, QuantityColumn):
            yield _taken(held)
            yield from (lines.encode() for lines in _column_lines(row))
        else:
            held.append(line([_field(getattr(row, column)) for column in COLUMNS]))
            if len(held) >= _LINES:
                yield _taken(held)
    yield _taken(held)


def _taken(held: list[str]) -> bytes:
    written = "".join(f"{line}\n" for line in held).encode()
    held.clear()
    return written


def _line_writer() -> Callable[[Sequence[str]], str]:
    """What makes a line, without its end, of cells; one with a lone carriage return is quoted as well."""
    import csv
    import io

    text = io.StringIO()
    write = csv.writer(text, lineterminator="\r\n").writerow  # what ends a line decides what is quoted

    def line(cells: Sequence[str]) -> str:
        write(cells)
        made = text.getvalue()[:-2]
        text.seek(0)
        text.truncate()
        return made

    return line


def _column_lines(row: QuantityColumn) -> Iterator[str]:
    places = _cells(row.places)
    where = places if row.where is row.places else _cells(row.where)
    kind, quantity, unit, state = _cells((row.kind, row.quantity, row.unit, row.state))
    before, behind, end = f",{kind},{quantity},,", f",{unit},,", f",{state}\n"
    lines = (
        f"{place}{before}{'' if value is None else repr(value)}{behind}{at}{end}"
        for place, value, at in zip(places, row.values, where, strict=True)
    )
    while block := "".join(islice(lines, _LINES)):
        yield block


def _cells(texts: Sequence[str]) -> list[str]:
    """Each text as it stands between two commas."""
    line = _line_writer()
    return [one if one.isalnum() else line((_field(one), ""))[:-1] for one in texts]


def _field(value: float | str | None) -> str:
    if value is None:
        return ""
    if isinstance(value, str):
        return f"'{value}" if value.startswith(FORMULA) else value
    return repr(float(value))


def form_of(path: str) -> str | None:
    """The format that the suffix of ``path`` asks for, if any."""
    return SUFFIXES.get(os.path.splitext(path)[1].lower())


def check_target(path: str, overwrite: bool, case: str, option: str = "--output") -> None:
    """Raises ``RequestError`` where ``path`` cannot be written; asked before the work begins."""
    folder = os.path.dirname(os.path.realpath(path))
    name = quoted(path)
    if os.path.isdir(path):
        raise RequestError(f"{option} {name}: this is a folder; give the name of a file in it")
    if not os.path.isdir(folder):
        raise RequestError(f"{option} {name}: there is no folder {quoted(folder)}")
    if not os.path.exists(path):
        return
    if not os.path.isfile(path):
        raise RequestError(f"{option} {name}: this is no ordinary file; leave {option} out")
    if os.path.exists(case) and os.path.samefile(path, case):
        raise RequestError(f"{option} {name}: this is the case file itself; give another name")
    if not overwrite:
        raise RequestError(f"{option} {name}: the file exists; give another name, or --overwrite")


def write_whole(
    path: str, content: bytes | Iterable[bytes], overwrite: bool, option: str = "--output"
) -> None:
    """Write ``content``, its pieces as they come, to ``path``, whole or not at all.

    Raises ``RequestError`` where that fails, or where ``path`` has come to exist meanwhile.
    """
    target = os.path.realpath(path)
    draft = f"{target}.{os.getpid()}.part"
    try:
        descriptor = os.open(draft, os.O_WRONLY | os.O_CREAT | os.O_EXCL, 0o666)
        try:
            with open(descriptor, "wb") as file:
                file.writelines((content,) if isinstance(content, bytes) else content)
                file.flush()
                os.fsync(file.fileno())
            if overwrite:
                if os.path.exists(target):
                    os.chmod(draft, os.stat(target).st_mode & 0o7777)
                os.replace(draft, target)
            else:
                _place(draft, target)
        finally:
            if os.path.lexists(draft):
                os.unlink(draft)
    except FileExistsError:
        raise RequestError(
            f"{option} {quoted(path)}: the file exists; give another name, or --overwrite"
        ) from None
    except OSError as error:
        reason = error.strerror or str(error)
        raise RequestError(f"{option} {quoted(path)}: cannot be written: {reason}") from None


def _place(draft: str, target: str) -> None:
    """Give ``draft`` its name where nothing has that name; a hard link cannot replace a file."""
    try:
        os.link(draft, target)
    except FileExistsError:
        raise
    except OSError:  # a file system without hard links
        if os.path.lexists(target):
            raise FileExistsError from None
        os.replace(draft, target)
