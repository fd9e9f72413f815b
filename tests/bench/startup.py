"""What a cold start costs, beside the imports it cannot do without.

``python -m tests.bench.startup`` from the root of the repository. Every figure is a whole process;
the processes of a comparison take turns, and medians are compared. Ends with 1 past a limit.
"""

from __future__ import annotations

import os
import statistics
import subprocess
import sys
import time
from collections import Counter
from dataclasses import dataclass
from pathlib import Path

ROOT = Path(__file__).parents[2]
ROUNDS = 21
LIBRARIES = "import numpy, networkx, rich.table, msgspec"


@dataclass(frozen=True)
class Comparison:
    """A command line, what it is measured against, and the ratio it may reach, if any."""

    label: str
    arguments: tuple[str, ...]
    against: str
    program: str
    limit: float | None = None


COMPARISONS = (
    Comparison(
        "compare cases/quarry.toml main-a",
        ("compare", "cases/quarry.toml", "main-a"),
        "its libraries imported",
        LIBRARIES,
        1.5,
    ),
    Comparison("--help", ("--help",), "python -c pass", "pass"),
)


def command(arguments: tuple[str, ...], *flags: str) -> list[str]:
    return [sys.executable, *flags, "-m", "seqfault", *arguments]


def seconds(line: list[str]) -> float:
    start = time.perf_counter()
    subprocess.run(line, cwd=ROOT, check=True, stdout=subprocess.DEVNULL, stderr=subprocess.PIPE)
    return time.perf_counter() - start


def medians(*lines: list[str]) -> list[float]:
    """Median seconds of each command line, run in turns after one round that warms the disk."""
    for line in lines:
        seconds(line)
    rounds = [[seconds(line) for line in lines] for _ in range(ROUNDS)]
    return [statistics.median(column) for column in zip(*rounds, strict=True)]


def imports(arguments: tuple[str, ...]) -> Counter[str]:
    """Seconds spent importing, by package; modules of this package by name."""
    run = subprocess.run(
        command(arguments, "-X", "importtime"), cwd=ROOT, check=True, capture_output=True, text=True
    )
    spent: Counter[str] = Counter()
    for line in run.stderr.splitlines():
        own, _, name = line.removeprefix("import time:").split("|")
        if own.strip().isdigit():
            name = name.strip()
            spent[name if name.startswith("seqfault") else name.split(".")[0]] += int(own)
    return Counter({name: own / 1e6 for name, own in spent.items()})


def report(comparison: Comparison) -> bool:
    """Print one comparison; true where it keeps its limit."""
    ours, floor = medians(command(comparison.arguments), [sys.executable, "-c", comparison.program])
    ratio = ours / floor
    limit = "" if comparison.limit is None else f" (at most {comparison.limit:g})"
    print(f"seqfault {comparison.label}: {ratio:.2f} times {comparison.against}{limit}")
    print(f"  {1e3 * ours:.0f} ms against {1e3 * floor:.0f} ms, medians of {ROUNDS} turns")
    spent = imports(comparison.arguments)
    own = sum(cost for name, cost in spent.items() if name.startswith("seqfault"))
    print(f"  imports {1e3 * spent.total():.0f} ms under -X importtime, seqfault's own {1e3 * own:.0f} ms:")
    for name, cost in spent.most_common(12):
        print(f"    {1e3 * cost:6.1f} ms  {name}")
    return comparison.limit is None or ratio <= comparison.limit


if __name__ == "__main__":
    os.environ["PYTHONPATH"] = str(ROOT)
    kept = [report(comparison) for comparison in COMPARISONS]
    sys.exit(0 if all(kept) else 1)
