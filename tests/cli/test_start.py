"""What a command costs before it does anything, and the scripts that complete it."""

from __future__ import annotations

import shutil
import subprocess
import sys
from pathlib import Path

import pytest

import seqfault
from seqfault.cli.parser import COMMANDS
from tests.cli.console import PLANT, Run

ROOT = Path(__file__).parents[2]
HEAVY = {"numpy", "scipy", "networkx", "rich", "msgspec", "matplotlib"}


def loaded(code: str) -> set[str]:
    done = subprocess.run(
        [sys.executable, "-c", f"import sys\n{code}\nprint('\\n' + ' '.join(sys.modules))"],
        capture_output=True, text=True, cwd=ROOT, check=True,
    )  # fmt: skip
    return {name.partition(".")[0] for name in done.stdout.splitlines()[-1].split()}


@pytest.mark.parametrize("arguments", ["['--help']", "['fault', '--help']", "['completion', 'bash']"])
def test_help_imports_nothing_heavy(arguments: str) -> None:
    assert not HEAVY & loaded(f"from seqfault.cli import main\nmain({arguments})")


def test_importing_the_package_is_cheap() -> None:
    assert not HEAVY & loaded("import seqfault")


def test_a_small_case_needs_no_scipy() -> None:
    modules = loaded(f"from seqfault.cli import main\nmain(['compare', {str(PLANT)!r}, 'main'])")
    assert "numpy" in modules
    assert not {"scipy", "matplotlib"} & modules


def test_a_replay_of_a_small_case_needs_no_scipy() -> None:
    radial = ROOT / "tests" / "studies" / "radial.toml"
    modules = loaded(
        f"from seqfault.cli import main\nmain(['operate', {str(radial)!r}, 'N@50%', '--replay'])"
    )
    assert "numpy" in modules
    assert not {"scipy", "matplotlib"} & modules


@pytest.mark.parametrize("name", seqfault.__all__)
def test_public_names_exist(name: str) -> None:
    assert getattr(seqfault, name) is not None
    assert name in dir(seqfault)


def test_unknown_attributes_are_refused() -> None:
    with pytest.raises(AttributeError, match="no_such_name"):
        _ = seqfault.no_such_name


@pytest.mark.parametrize("command", COMMANDS)
def test_help_of_every_command(run: Run, command: str) -> None:
    page = run(command, "--help")
    assert page.code == 0
    assert f"usage: seqfault {command}" in page.out


@pytest.mark.parametrize("shell", ["bash", "zsh", "fish"])
def test_scripts_know_commands_options_and_choices(run: Run, shell: str) -> None:
    script = run("completion", shell).out
    for word in (
        *COMMANDS,
        "scenario",
        "components",
        "line-line-ground",
        "subtransient",
        "--places",
    ):
        assert word in script
    if shutil.which(shell):
        done = subprocess.run([shell, "-n"], input=script, text=True, check=False)
        assert done.returncode == 0


@pytest.mark.skipif(shutil.which("bash") is None, reason="needs bash")
@pytest.mark.parametrize(
    ("typed", "offered"),
    [
        ("seqfault comp", ["compare", "completion"]),
        ("seqfault fault --comp", ["--components"]),
        ("seqfault fault --kind line-g", ["line-ground"]),
        ("seqfault fault CASE ma", ["main"]),
        ("seqfault fault --kind line-line CASE wor", ["workshop"]),
        ("seqfault completion f", ["fish"]),
    ],
)
def test_bash_completes(run: Run, typed: str, offered: list[str]) -> None:
    words = [str(PLANT) if word == "CASE" else word for word in typed.split()]
    quoted = " ".join(f"'{word}'" for word in words)
    script = run("completion", "bash").out + (
        f'\nseqfault() {{ "{sys.executable}" -m seqfault "$@"; }}\n'
        f"COMP_WORDS=({quoted}); COMP_CWORD={len(words) - 1}; _seqfault 2>/dev/null\n"
        'printf "%s\\n" "${COMPREPLY[@]}"\n'
    )
    done = subprocess.run(["bash", "-c", script], capture_output=True, text=True, cwd=ROOT, check=True)
    assert done.stdout.split() == offered
