from __future__ import annotations

from typing import Any

import pytest

from seqfault.errors import CheckError, NoAnswerError
from seqfault.faults.network import Network
from tests.cli.console import PLANT, Run, Write, unearthed

WRONG: list[tuple[list[Any], str]] = [
    ([], "a command is wanted"),
    (["compar", PLANT, "main"], "did you mean compare?"),
    (["compare", PLANT], "PLACE"),
    (["compare", PLANT, "main", "more"], '"more" is one word too many'),
    (["compare", PLANT, "mian"], 'did you mean "main"?'),
    (["fault", PLANT, "main", "--kin", "line-line"], "did you mean --kind?"),
    (["fault", PLANT, "main", "--kind", "line-grund"], "did you mean line-ground?"),
    (["fault", PLANT, "main", "--phases", "a,b"], "without a comma"),
    (["fault", PLANT, "main", "--zf", "0.5"], '--zf "0.5": the unit is missing; write "0.5 ohm"'),
    (["fault", PLANT, "main", "--zf", "5 %"], "an impedance is wanted"),
    (["fault", PLANT, "main", "--zf", "-j0.1ohm"], "write --zf=-"),
    (["fault", PLANT, "main", "--kind", "line-line", "--zg", "1 ohm"], "does not touch earth"),
    (["fault", PLANT, "main", "--prefault", "1.05"], "the unit is missing"),
    (["fault", PLANT, "main", "--prefault", "11 kV"], "--prefault"),
    (["fault", PLANT, "main", "--prefault", "0 pu"], "more than 0"),
    (["fault", PLANT, "main", "--scenario", "iland"], 'did you mean "island"?'),
    (["fault", PLANT, "main", "--without", "T9"], '"T9"'),
    (["fault", PLANT, "main", "--open", "F1@nowhere"], "F1@main"),
    (["fault", PLANT, "main", "--machine", "steady"], "'subtransient'"),
    (["levels", PLANT, "--width", "9"], "40 to 1000"),
    (["levels", PLANT, "--machine", "synchronous"], "synchronous"),
    (["levels", "no-such-file.toml"], "no such file"),
    (["completion", "tcsh"], "bash"),
]


@pytest.mark.parametrize(("arguments", "words"), WRONG, ids=[" ".join(map(str, a)) for a, _ in WRONG])
def test_wrong_commands(run: Run, arguments: list[str], words: str) -> None:
    result = run(*arguments)
    assert result.code == 2
    assert result.out == ""
    assert words in result.err
    assert all(line.startswith("seqfault: ") for line in result.err.splitlines())
    assert len(result.err.splitlines()) == 1


def test_every_complaint_about_a_case_names_the_file(run: Run, write: Write) -> None:
    tree = unearthed()
    tree["transformers"]["T1"]["rating"] = "10 MWA"
    tree["buses"]["main"] = "11 kw"
    tree["infeeds"]["utility"]["x_over_r"] = "ten"
    path = write(tree)
    result = run("compare", path, "main")
    lines = result.err.splitlines()
    assert result.code == 2
    assert len(lines) >= 3
    assert all(line.startswith(f"seqfault: {path}: ") for line in lines)


@pytest.mark.parametrize(
    ("error", "code"),
    [(NoAnswerError("resonance at main"), 3), (KeyboardInterrupt(), 130), (MemoryError(), 70)],
)
def test_exit_codes(run: Run, monkeypatch: pytest.MonkeyPatch, error: BaseException, code: int) -> None:
    def fail(*_: object, **__: object) -> None:
        raise error

    monkeypatch.setattr(Network, "solve", fail)
    result = run("fault", PLANT, "main")
    assert result.code == code
    assert result.out == ""
    assert "Traceback" not in result.err


@pytest.mark.parametrize("error", [CheckError("currents do not add up"), ZeroDivisionError("oh")])
def test_internal_errors_say_how_to_report(
    run: Run, monkeypatch: pytest.MonkeyPatch, error: Exception
) -> None:
    def fail(*_: object, **__: object) -> None:
        raise error

    monkeypatch.setattr(Network, "solve", fail)
    short = run("fault", PLANT, "main")
    assert short.code == 70
    assert str(error) in short.err
    assert "please report it" in short.err
    assert "Traceback" not in short.err
    assert "Traceback" in run("fault", PLANT, "main", "--debug").err
