"""What the survey of all buses costs, as multiples of factorising its three matrices.

``python -m tests.bench.survey`` from the root of the repository, or with numbers of buses behind it.
Inverse: three matrices to every entry on their union pattern, ordering included. Survey: records in
memory to the arrays of ``levels`` and ``contributions``. They take turns with the reference, SuperLU
with the settings that suit these matrices best; medians are compared. Then the command, process
start to written CSV, beside ``import scipy.sparse.linalg``, and the peak of memory over the loaded case.
"""

from __future__ import annotations

import resource
import statistics
import subprocess
import sys
import tempfile
import time
from collections.abc import Callable
from pathlib import Path

import seqfault
from seqfault.networks.pattern import grounded, union
from seqfault.networks.selected import selected_inverse
from seqfault.networks.survey import survey_of
from tests.bench.grid import grid, write_json
from tests.bench.scale import factorise, matrix, peak

ROOT = Path(__file__).parents[2]
SIZES = (5_000, 20_000, 100_000)
COMMAND = 20_000


def seconds(work: Callable[[], object]) -> float:
    start = time.perf_counter()
    work()
    return time.perf_counter() - start


def report(buses: int, meshed: bool = False) -> None:
    """Measure one grid and print a line for each stage."""
    case = seqfault.case_from_tree(grid(buses, meshed=meshed))
    loaded = peak()
    first = seqfault.Network(case)
    seqfault.levels(first)
    seqfault.contributions(first)
    over = peak() - loaded
    factors = [first.sequences[s] for s in range(3)]
    matrices = [matrix(each) for each in factors]

    def inverse() -> None:
        selected_inverse(union(stamped))

    def survey() -> None:
        network = seqfault.Network(case)
        seqfault.levels(network)
        seqfault.contributions(network)

    stages: dict[str, Callable[[], object]] = {
        "reference": lambda: factorise(matrices),
        "inverse": inverse,
        "checked": lambda: survey_of(factors, first.model.nodes),
        "model": lambda: seqfault.Network(case),
        "survey": survey,
    }
    found: dict[str, list[float]] = {name: [] for name in stages}
    for _ in range(7 if buses <= 20_000 else 3):
        stamped = [grounded(each.stamps, each.free.reference, first.model.nodes) for each in factors]
        for name, work in stages.items():
            found[name].append(seconds(work))
    medians = {name: statistics.median(times) for name, times in found.items()}
    kind = ", all of them mesh" if meshed else ""
    print(f"{buses} buses{kind}: three splu {1e3 * medians['reference']:.1f} ms")
    for name in ("inverse", "checked", "model", "survey"):
        print(f"  {name:<9}{medians[name] / medians['reference']:8.2f} x  {medians[name]:8.3f} s")
    print(f"  peak memory over the loaded case {over / 2**20:.0f} MiB", flush=True)


def command(buses: int) -> None:
    """Measure whole processes: the command to CSV, and the import beside it."""
    with tempfile.TemporaryDirectory() as folder:
        path, out = Path(folder) / "grid.json", Path(folder) / "out.csv"
        write_json(path, buses)
        ours = [sys.executable, "-m", "seqfault", "levels", str(path), "--output", str(out), "--overwrite"]
        floor = [sys.executable, "-c", "import scipy.sparse.linalg"]
        found: list[list[float]] = [[], []]
        for _ in range(3):
            for times, line in zip(found, (ours, floor), strict=True):
                times.append(
                    seconds(
                        lambda line=line: subprocess.run(line, cwd=ROOT, check=True, stderr=subprocess.PIPE)
                    )
                )
    cost, least = map(statistics.median, found)
    children = resource.getrusage(resource.RUSAGE_CHILDREN).ru_maxrss / 1024
    print(f"levels --output out.csv, {buses} buses: {cost:.2f} s, {cost / least:.1f} times the import")
    print(f"  of scipy.sparse.linalg; at most {children:.0f} MiB", flush=True)


if __name__ == "__main__":
    for size in [int(text) for text in sys.argv[1:]] or SIZES:
        for meshed in (False, True):
            report(size, meshed)
    command(COMMAND)
