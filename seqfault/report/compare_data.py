"""Kinds of fault side by side, as a tree and as rows."""

from __future__ import annotations

from collections.abc import Iterator
from typing import Any

from seqfault.faults.network import Network
from seqfault.report.data import Quantity, fault_rows, fault_tree, header, polar
from seqfault.studies.compare import Comparison, Extreme


def compare_tree(network: Network, comparison: Comparison) -> dict[str, Any]:
    """The comparison as plain values for JSON; each of ``faults`` as ``fault`` gives it."""

    def extreme(value: Extreme | None) -> dict[str, Any] | None:
        if value is None:
            return None
        return {"value": value.value, "kind": value.kind, "phase": value.phase}

    faults = []
    for solution in comparison.solutions:
        tree = fault_tree(network, solution)
        for shared in ("format", "case", "scenario", "assumptions", "warnings"):
            del tree[shared]
        faults.append(tree)
    seen = [
        {p: polar(complex(x.phases[k])) for k, p in enumerate("abc")}
        | {f"i{k}": polar(complex(x.sequence[k])) for k in range(3)}
        for x in comparison.seen
    ]
    first = comparison.solutions[0]
    return {
        **header(network),
        "place": comparison.place,
        "nominal": first.nominal,
        "prefault": first.prefault,
        "reference": comparison.reference,
        "greatest": extreme(comparison.greatest),
        "least": extreme(comparison.least),
        "least_clear_of_earth": extreme(comparison.least_clear_of_earth),
        "earth_fault_factor": extreme(comparison.earth_fault_factor),
        "faults": faults,
        **({"seen_at": comparison.at, "seen": seen} if seen else {}),
        "assumptions": [text for a in first.assumptions for text in a.sentences()],
        "warnings": list(first.warnings),
    }


def compare_rows(comparison: Comparison) -> Iterator[Quantity]:
    """The comparison in long form: the rows of each fault in turn."""
    for solution in comparison.solutions:
        yield from fault_rows(solution)
