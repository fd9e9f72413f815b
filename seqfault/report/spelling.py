"""Any text made safe to print: one line, no control characters, only what the stream can encode."""

from __future__ import annotations

ASCII_FORMS = {
    "∠": "at ",
    "Ω": "ohm",
    "√": "sqrt ",
    "°": " deg",
    "×": "x",
    "·": ".",
    "±": "+-",
    "−": "-",
    "–": "-",
    "—": "-",
    "…": "...",
    "≤": "<=",
    "≥": ">=",
    "²": "^2",
    "µ": "u",
    "μ": "u",
    "’": "'",
    "‘": "'",
    "“": '"',
    "”": '"',
}


def printable(text: str) -> str:
    """``text`` on one line: what is no printable character becomes a backslash escape."""
    if text.isprintable():
        return text
    return "".join(c if c.isprintable() else c.encode("unicode_escape").decode() for c in text)


class Spelling:
    """Spells text for a stream of a given encoding.

    Characters the encoding lacks become their ASCII form where there is one, an escape where not.
    """

    def __init__(self, encoding: str | None) -> None:
        self._encoding = encoding or "ascii"
        self._known: dict[str, str] = {}

    def __call__(self, text: str) -> str:
        """``text`` as it can be printed."""
        safe = printable(text)
        if safe.isascii():
            return safe
        try:
            safe.encode(self._encoding)
        except (UnicodeEncodeError, LookupError):
            return "".join(self._spelt(c) for c in safe)
        return safe

    def _spelt(self, char: str) -> str:
        if char.isascii():
            return char
        if char not in self._known:
            self._known[char] = self._form(char)
        return self._known[char]

    def _form(self, char: str) -> str:
        try:
            char.encode(self._encoding)
        except (UnicodeEncodeError, LookupError):
            return ASCII_FORMS.get(char) or char.encode("ascii", "backslashreplace").decode()
        return char
