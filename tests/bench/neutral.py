"""What a sweep over the ohms of a neutral costs, as a share of one fault of the same case.

``python -m tests.bench.neutral`` from the root of the repository, or with numbers of buses behind it.
The networks are built and factorised before; that of the sweep lacks the neutral, and its
factorisation, which all points share, is printed apart. Ten points and one fault take turns, and medians
are compared. Ends with 1 where ten points cost more than half of one fault.
"""

from __future__ import annotations

import statistics
import sys
import tempfile
import time
from collections.abc import Callable
from pathlib import Path

import numpy as np

from seqfault.case.reader import read_case
from seqfault.faults.network import Network
from seqfault.faults.neutral_faults import earth_faults
from seqfault.faults.neutral_ports import neutral_ports, open_zero_sequence
from tests.bench.grid import write_json

ROOT = Path(__file__).parents[2]
SIZES = (1_000, 20_000)
LIMIT = 0.5
TURNS = 41


def medians(*works: Callable[[], object]) -> list[float]:
    """Median seconds of each work, run in turns after one round that warms it."""
    rounds = []
    for turn in range(TURNS + 1):
        row = []
        for work in works:
            start = time.perf_counter()
            work()
            row.append(time.perf_counter() - start)
        if turn:
            rounds.append(row)
    return [statistics.median(column) for column in zip(*rounds, strict=True)]


def report(label: str, path: Path) -> bool:
    """Print what a sweep of the first neutral in use costs; true where it keeps its limit."""
    network = Network(read_case(str(path)))
    model = network.model
    star = model.stars.kinds.index("neutral")
    bus = int(model.stars.bus[star])
    place = model.buses[bus]
    network.fault(place)  # factorises the three networks
    start = time.perf_counter()
    zero = open_zero_sequence(model, (star,))
    opening = time.perf_counter() - start
    ohms = np.geomspace(2, 200, 10).astype(complex)
    ports = neutral_ports(network.sequences, zero, bus, star)

    def whole() -> None:
        earth_faults(neutral_ports(network.sequences, zero, bus, star), ohms)

    fault, swept, points = medians(lambda: network.fault(place), whole, lambda: earth_faults(ports, ohms))
    ratio = swept / fault
    print(
        f"{label}, {model.stars.names[star]}: ten points cost {ratio:.3f} of one fault at {place}"
        f" (at most {LIMIT:g})"
    )
    print(
        f"  {1e3 * swept:.2f} ms against {1e3 * fault:.2f} ms, medians of {TURNS} turns; the ports of place"
        f" and star point included, the ten points alone {1e3 * points:.3f} ms, {points / fault:.3f}"
    )
    print(f"  the network without the neutral, once: {1e3 * opening:.1f} ms, {opening / fault:.2f} faults")
    return ratio <= LIMIT


if __name__ == "__main__":
    sizes = [int(word) for word in sys.argv[1:]] or SIZES
    kept = [report("cases/quarry.toml", ROOT / "cases" / "quarry.toml")]
    with tempfile.TemporaryDirectory() as folder:
        for buses in sizes:
            path = Path(folder) / "grid.json"
            write_json(path, buses)
            kept.append(report(f"grid of {buses} buses", path))
    sys.exit(0 if all(kept) else 1)
