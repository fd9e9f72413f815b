"""What was not stated and had to be assumed, kept for every answer to say."""

from __future__ import annotations

from collections.abc import Iterable

import msgspec

from seqfault.errors import quoted

SHOWN = 6


class Assumption(msgspec.Struct, frozen=True):
    """One assumed value, and every record it was assumed for."""

    record: str
    names: tuple[str, ...]
    text: str

    def __str__(self) -> str:
        shown = ", ".join(quoted(name) for name in self.names[:SHOWN])
        more = len(self.names) - SHOWN
        plural = "s" if len(self.names) > 1 else ""
        return f"{self.record}{plural} {shown}{f' and {more} more' if more > 0 else ''}: {self.text}"

    def sentences(self) -> Iterable[str]:
        """One sentence a record, nothing shortened."""
        return (f"{self.record} {quoted(name)}: {self.text}" for name in self.names)


class Ledger:
    """Gathers assumptions in the order they are made, one entry a text."""

    def __init__(self) -> None:
        self._names: dict[tuple[str, str], list[str]] = {}

    def note(self, record: str, name: str, text: str) -> None:
        """``record`` in the singular, ``text`` the value and why."""
        names = self._names.setdefault((record, text), [])
        if name not in names[-1:]:  # one record is read in one go
            names.append(name)

    def entries(self) -> tuple[Assumption, ...]:
        """All of them."""
        return tuple(
            Assumption(record, tuple(names), text) for (record, text), names in self._names.items()
        )
