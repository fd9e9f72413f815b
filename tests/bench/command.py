"""What the command ``levels`` costs on a large grid, from the start of its process to written CSV.

``python -m tests.bench.command`` from the root of the repository, or with numbers of buses behind it.
Each turn is a whole process of the command, one of ``python -c "import scipy.sparse.linalg"``, and one
that goes through the same stages with a clock beside them; they take turns and medians are compared.
Reading is told against ``json.loads`` of the same text in the same process as well.
"""

from __future__ import annotations

import json
import os
import resource
import statistics
import subprocess
import sys
import tempfile
import time
from collections.abc import Callable
from pathlib import Path
from typing import Any

ROOT = Path(__file__).parents[2]
SIZES = (20_000, 100_000)
REFERENCE = "import scipy.sparse.linalg"
STAGES = ("imports", "read", "model", "survey", "currents", "CSV")


def turns(buses: int) -> int:
    return 11 if buses <= 20_000 else 5


def peak() -> float:
    """The most memory this process has held, MB."""
    return resource.getrusage(resource.RUSAGE_SELF).ru_maxrss * 1024 / 1e6


def stages(path: str, target: str) -> dict[str, Any]:
    """Seconds of each stage of the command, done once as it does them, and memory after reading."""
    seconds: dict[str, float] = {}

    def timed(name: str, work: Callable[[], Any]) -> Any:
        start = time.perf_counter()
        made = work()
        seconds[name] = time.perf_counter() - start
        return made

    def imports() -> None:
        import scipy.sparse.linalg  # noqa: F401 - imported to be timed, as the others

        import seqfault.faults.network
        import seqfault.networks.survey
        import seqfault.report.files
        import seqfault.report.levels  # noqa: F401

    timed("imports", imports)
    from seqfault.case.reader import read_case
    from seqfault.faults.network import Network
    from seqfault.report.files import as_csv, write_whole
    from seqfault.report.levels import levels_rows
    from seqfault.studies.levels import levels

    text = Path(path).read_bytes()
    floor = peak()
    case = timed("read", lambda: read_case(path))
    read = peak()
    network = timed("model", lambda: Network(case))
    timed("survey", lambda: network.sequences.survey())
    found = timed("currents", lambda: levels(network))
    timed("CSV", lambda: write_whole(target, as_csv(levels_rows([found])), overwrite=True))
    top = peak()
    timed("json.loads", lambda: json.loads(text))
    return {"seconds": seconds, "floor": floor, "read": read, "peak": top}


def process(*arguments: str) -> tuple[float, bytes]:
    """Seconds of one process of Python, and what it printed."""
    start = time.perf_counter()
    run = subprocess.run([sys.executable, *arguments], cwd=ROOT, check=True, capture_output=True)
    return time.perf_counter() - start, run.stdout


def report(buses: int) -> None:
    """Measure one grid and print the ratios."""
    command, reference = [], []
    seconds: dict[str, list[float]] = {}
    memory: dict[str, float] = {}
    with tempfile.TemporaryDirectory() as folder:
        grid, target = f"{folder}/grid.json", f"{folder}/levels.csv"
        process("-m", "tests.bench.grid", str(buses), grid)
        process("-c", REFERENCE)
        for _ in range(turns(buses)):
            reference.append(process("-c", REFERENCE)[0])
            line = ("-m", "seqfault", "levels", grid, "--output", target, "--overwrite")
            command.append(process(*line)[0])
            found = json.loads(process("-m", "tests.bench.command", "--stages", grid, target)[1])
            memory = {key: found[key] for key in ("floor", "read", "peak")}
            for stage, spent in found["seconds"].items():
                seconds.setdefault(stage, []).append(spent)
        size = Path(grid).stat().st_size
    whole, unit = statistics.median(command), statistics.median(reference)
    medians = {stage: statistics.median(times) for stage, times in seconds.items()}
    print(f"{buses} buses, {size / 1e6:.1f} MB of JSON: levels is {whole / unit:.1f} times {REFERENCE}")
    print(f"  {whole:.2f} s against {unit:.2f} s, medians of {len(command)} turns")
    rest = whole - sum(medians[stage] for stage in STAGES)
    for stage, spent in [*((stage, medians[stage]) for stage in STAGES), ("all else", rest)]:
        print(f"  {stage:<9}{spent / unit:6.2f} x {spent:7.3f} s {100 * spent / whole:5.0f} %")
    print(f"  reading is {medians['read'] / medians['json.loads']:.1f} times json.loads of the same text")
    print(
        f"  peak memory {memory['peak']:.0f} MB: {memory['floor']:.0f} MB imports and the text,"
        f" {memory['read']:.0f} MB once the case is read",
        flush=True,
    )


if __name__ == "__main__":
    os.environ["PYTHONPATH"] = str(ROOT)
    if sys.argv[1:2] == ["--stages"]:
        print(json.dumps(stages(*sys.argv[2:])))
    else:
        for wanted in [int(text) for text in sys.argv[1:]] or SIZES:
            report(wanted)
