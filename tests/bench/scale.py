"""What each stage costs on large grids, as multiples of factorising their matrices.

``python -m tests.bench.scale`` from the root of the repository, or with numbers of buses behind it. A
grid is written as JSON and worked on in a process of its own. The stages take turns with the
reference, which factorises the same three matrices with SuperLU and the settings that suit them best;
medians are compared. Peak memory is that of the process after its first turn.
"""

from __future__ import annotations

import json
import resource
import statistics
import subprocess
import sys
import tempfile
import time
from collections.abc import Callable
from pathlib import Path
from typing import Any

import numpy as np
import scipy.sparse
import scipy.sparse.linalg

import seqfault
from seqfault.networks.factors import SequenceFactor, SequenceNetworks

ROOT = Path(__file__).parents[2]
SIZES = (1_000, 20_000, 100_000)
STAGES = ("read", "model", "networks", "fault")
REFERENCE = "three splu"


def turns(buses: int) -> int:
    return 21 if buses <= 1_000 else 7 if buses <= 20_000 else 5


def matrix(factor: SequenceFactor) -> Any:
    """The matrix a sequence network factorises: its references left out."""
    stamps = factor.stamps
    n = stamps.size
    every = np.arange(n)
    y = scipy.sparse.csc_array(
        (
            np.concatenate([stamps.value, stamps.weak]),
            (np.concatenate([stamps.row, every]), np.concatenate([stamps.column, every])),
        ),
        shape=(n, n),
    )
    kept = np.setdiff1d(every, factor.free.reference)
    return scipy.sparse.csc_array(y[kept][:, kept])


def factorise(matrices: list[Any]) -> None:
    """The reference."""
    for y in matrices:
        scipy.sparse.linalg.splu(
            y,
            permc_spec="MMD_AT_PLUS_A",
            diag_pivot_thresh=0,
            relax=1,
            panel_size=1,
            options={"SymmetricMode": True},
        )


class Turns:
    """Seconds of every stage, turn by turn."""

    def __init__(self, path: str) -> None:
        self.path = path
        self.seconds: dict[str, list[float]] = {}
        self.matrices: list[Any] = []

    def timed(self, stage: str, work: Callable[[], Any]) -> Any:
        start = time.perf_counter()
        result = work()
        self.seconds.setdefault(stage, []).append(time.perf_counter() - start)
        return result

    def once(self, turn: int) -> SequenceNetworks:
        """Every stage, from the file to a fault somewhere."""
        case = self.timed("read", lambda: seqfault.read_case(self.path))
        network = self.timed("model", lambda: seqfault.Network(case))
        networks = network.sequences
        # Each is factorised when it is first solved.
        first = np.zeros(1, np.int64)
        self.timed("networks", lambda: [networks[s].columns(first) for s in range(3)])
        bus = network.buses[(turn * 7919) % len(network.buses)]
        self.timed("fault", lambda: network.fault(bus, "line-ground"))
        return networks

    def reference(self) -> None:
        self.timed(REFERENCE, lambda: factorise(self.matrices))


def peak() -> int:
    """Bytes this process has held at most."""
    return 1024 * resource.getrusage(resource.RUSAGE_SELF).ru_maxrss


def measure(path: str) -> dict[str, Any]:
    """Seconds of every stage by turns, and bytes before the first of them and at its peak."""
    run, floor = Turns(path), peak()
    networks = run.once(0)
    top, buses = peak(), len(networks.model.buses)
    run.matrices = [matrix(networks[s]) for s in range(3)]
    del networks
    run.reference()
    for turn in range(1, turns(buses)):
        run.once(turn)
        run.reference()
    return {"seconds": run.seconds, "peak": top, "floor": floor}


def report(buses: int) -> None:
    """Measure one grid in a process of its own and print a line for each stage."""
    with tempfile.TemporaryDirectory() as folder:
        path = Path(folder) / "grid.json"
        # In a process of its own, as a child counts what its parent held before it began.
        subprocess.run(
            [sys.executable, "-m", "tests.bench.grid", str(buses), str(path)], cwd=ROOT, check=True
        )
        size = path.stat().st_size
        run = subprocess.run(
            [sys.executable, "-m", "tests.bench.scale", "--measure", str(path)],
            cwd=ROOT,
            check=True,
            stdout=subprocess.PIPE,
        )
    found = json.loads(run.stdout)
    medians = {stage: statistics.median(times) for stage, times in found["seconds"].items()}
    reference = medians[REFERENCE]
    print(f"{buses} buses, {size / 1e6:.1f} MB of JSON: {REFERENCE} {1e3 * reference:.1f} ms")
    for stage in STAGES:
        print(f"  {stage:<9}{medians[stage] / reference:8.1f} x  {medians[stage]:8.3f} s")
    peak, floor = found["peak"], found["floor"]
    print(f"  peak memory {peak / 1e6:.0f} MB, {floor / 1e6:.0f} MB of it before reading;", end=" ")
    print(f"{(peak - floor) / buses / 1e3:.1f} kB a bus", flush=True)


if __name__ == "__main__":
    if sys.argv[1:2] == ["--measure"]:
        print(json.dumps(measure(sys.argv[2])))
    else:
        for size in [int(text) for text in sys.argv[1:]] or SIZES:
            report(size)
