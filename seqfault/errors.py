"""Every error this package raises on purpose.

SeqfaultError
├── InputError              the command or the case is wrong           exit code 2
│   ├── CaseError           complaints about a case file, all of them
│   ├── QuantityError       a text that is no number with a unit, or the wrong one
│   ├── RequestError        a place, kind, option or file asked for that cannot be
│   └── WorkerError         a process that worked on an item ended twice
├── NoAnswerError           the case is fine, yet no answer exists      exit code 3
└── CheckError              an answer failed its own check: a defect    exit code 70
"""

from __future__ import annotations

from collections.abc import Iterable


class SeqfaultError(Exception):
    """Root of the tree; ``exit_code`` is what the command line returns."""

    exit_code = 70


class InputError(SeqfaultError):
    """What was asked for or read is wrong, and the message says what would be right."""

    exit_code = 2


class CaseError(InputError):
    """A case file with one or more faults of its own.

    ``complaints`` holds one line for each, in the order of the file.
    """

    def __init__(self, complaints: Iterable[str], source: str = "case") -> None:
        self.complaints = tuple(complaints)
        self.source = source
        super().__init__("\n".join(self.complaints))

    def __reduce__(self) -> tuple[type[CaseError], tuple[tuple[str, ...], str]]:
        return type(self), (self.complaints, self.source)


class FieldError(InputError):
    """A value that its field cannot take; the message repeats it and says what would be right."""


class QuantityError(FieldError):
    """A text that does not read as a quantity, or reads as one of the wrong dimension."""


class RequestError(InputError):
    """A place, a fault, an option or a file that cannot be served."""


class WorkerError(InputError):
    """A worker of a batch ended on an item, and another one on the same item."""


class NoAnswerError(SeqfaultError):
    """The network has no answer to the question, for example at exact resonance."""

    exit_code = 3


class CheckError(SeqfaultError):
    """A computed answer did not pass its own check and is withheld."""


_ESCAPES = {'"': '\\"', "\\": "\\\\", "\n": "\\n", "\r": "\\r", "\t": "\\t"}


def quoted(text: str, limit: int = 250) -> str:
    """Return ``text`` in double quotes, on one line, unprintable characters escaped."""
    if len(text) > limit:
        text = text[: limit - 1] + "…"
    if text.isprintable() and '"' not in text and "\\" not in text:
        return f'"{text}"'
    return '"' + "".join(map(_escaped, text)) + '"'


def _escaped(char: str) -> str:
    if char in _ESCAPES:
        return _ESCAPES[char]
    if char.isprintable():
        return char
    return f"\\u{ord(char):04x}" if ord(char) < 0x10000 else f"\\U{ord(char):08x}"
