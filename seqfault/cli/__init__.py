"""The command line: arguments to calls to exit codes, nothing imported before it is needed."""

from __future__ import annotations

from collections.abc import Sequence


def main(arguments: Sequence[str] | None = None) -> int:
    """Run one command and return its exit code; ``arguments`` default to those of the process."""
    import sys

    from seqfault.cli.run import run

    return run(list(sys.argv[1:] if arguments is None else arguments))
