"""How the messages of this layer quote, list and guess words."""

from __future__ import annotations

import difflib
import re
from collections.abc import Collection, Iterable

from seqfault.errors import quoted

# Comparing letter by letter is slow: beyond these counts only case is forgiven.
_MOST_CHOICES, _MOST_GUESSES = 2000, 50
_FEW = 6


def keyed(name: str) -> str:
    """Return a name as a key of TOML: in quotes where it cannot stand without them."""
    return name if re.fullmatch("[A-Za-z0-9_-]+", name) else quoted(name)


def shown(value: object) -> str:
    """Return a value of the file as a message names it."""
    if isinstance(value, str):
        return quoted(value, 80)
    if isinstance(value, bool):
        return "true" if value else "false"
    if isinstance(value, int):
        return str(value) if abs(value) < 10**20 else "a number of more than 20 digits"
    if isinstance(value, float):
        return repr(value)
    if isinstance(value, dict):
        return "a table"
    if isinstance(value, (list, tuple)):
        return "a list"
    return "nothing" if value is None else "a date or time"


def listed(words: Iterable[str], last: str = "or") -> str:
    """Return ``a, b or c``."""
    words = list(words)
    if len(words) < 2:
        return "".join(words)
    return ", ".join(words[:-1]) + f" {last} {words[-1]}"


class Spelling:
    """Known words, and the one among them a misspelt word was meant to be."""

    def __init__(self, choices: Collection[str]) -> None:
        self._choices = choices
        self._folded: dict[str, str] | None = None
        self._guesses = 0

    def nearest(self, word: str) -> str | None:
        """Return the nearest known word, or None when none is near."""
        if self._folded is None:
            self._folded = {choice.casefold(): choice for choice in self._choices}
        found = self._folded.get(word.casefold())
        if found is not None or len(self._folded) > _MOST_CHOICES or len(word) > 200:
            return found
        self._guesses += 1
        if self._guesses > _MOST_GUESSES:
            return None
        cutoff = 0.6 if len(word) > 3 else 0.5
        close = difflib.get_close_matches(word.casefold(), self._folded, 1, cutoff)
        return self._folded[close[0]] if close else None

    def hint(self, word: str) -> str:
        """Return ``; did you mean "x"?``, or all the words when they are few and none is near."""
        found = self.nearest(word)
        if found is not None:
            return f"; did you mean {quoted(found)}?"
        if not 0 < len(self._choices) <= _FEW:
            return ""
        verb = "is" if len(self._choices) == 1 else "are"
        return f"; there {verb} {listed(map(quoted, self._choices), 'and')}"


def amount(value: float, unit: str) -> str:
    """Return a number of three digits with a prefix: ``11.2 kA``."""
    for size, prefix in ((1e9, "G"), (1e6, "M"), (1e3, "k"), (1.0, ""), (1e-3, "m"), (1e-6, "u")):
        if abs(value) >= size * 0.9995:
            return f"{digits(value / size)} {prefix}{unit}"
    return f"{digits(value * 1e9)} n{unit}" if value else f"0 {unit}"


def digits(value: float) -> str:
    """Return a number of three digits, without an exponent when it is large."""
    text = f"{value:.3g}"
    return text if "e" not in text else f"{value:.0f}" if abs(value) >= 1 else text
