"""From arguments to an exit code; every error ends here as a line on standard error.

0 done; 1 done, and a verdict failed or is not proven; 2 command or case wrong; 3 no answer exists;
70 internal error; 130 interrupted.
"""

from __future__ import annotations

import os
import sys

from seqfault.errors import CaseError, SeqfaultError

INTERNAL, INTERRUPTED = 70, 130


def run(arguments: list[str]) -> int:
    """Run the command that ``arguments`` state."""
    debug = "--debug" in arguments
    try:
        code = _command(arguments)
        if sys.stdout is not None:
            sys.stdout.flush()
        return code
    except BrokenPipeError:
        _abandon_stdout()
        return 0
    except KeyboardInterrupt:
        say("interrupted")
        return INTERRUPTED
    except CaseError as error:
        for complaint in error.complaints:
            say(f"{error.source}: {complaint}")
        return error.exit_code
    except SeqfaultError as error:
        for line in str(error).splitlines():
            say(line)
        if error.exit_code == INTERNAL:
            _report(error, debug)
        return error.exit_code
    except OSError as error:
        if error.filename is None and error.strerror:
            say(f"the answer cannot be written: {error.strerror}")
            _abandon_stdout()
            return 2
        return _internal(error, debug)
    except Exception as error:
        return _internal(error, debug)


def say(line: str) -> None:
    """One line on standard error."""
    from seqfault.report.spelling import printable

    if sys.stderr is not None:
        print(f"seqfault: {printable(line)}", file=sys.stderr)


def _command(arguments: list[str]) -> int:
    from seqfault.cli.parser import read_arguments

    try:
        options = read_arguments(arguments)
    except SystemExit as end:  # --help, --version, or an error argparse has told already
        return end.code if isinstance(end.code, int) else 0
    if sys.stdout is None:
        say("standard output is closed; nothing can be answered")
        return 2
    code: int = options.run(options)
    return code


def _internal(error: Exception, debug: bool) -> int:
    say(f"internal error: {type(error).__name__}: {error}")
    _report(error, debug)
    return INTERNAL


def _report(error: Exception, debug: bool) -> None:
    from seqfault import __version__

    if debug:
        import traceback

        traceback.print_exception(error)
        return
    say(
        f"this is a defect of seqfault {__version__}, not of your case; please report it with the"
        " case file and what the same command prints with --debug"
    )


def _abandon_stdout() -> None:
    """Let the interpreter's last flush go nowhere instead of failing once more."""
    try:
        descriptor = os.open(os.devnull, os.O_WRONLY)
        os.dup2(descriptor, sys.stdout.fileno())
        os.close(descriptor)
    except (OSError, ValueError, AttributeError):
        pass
