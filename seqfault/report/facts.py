"""What every answer to a fault says around its tables: conditions, impedances, notes, caution."""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np

from seqfault.errors import quoted
from seqfault.faults.solution import FaultSolution
from seqfault.report.numbers import kilovolt, ohms
from seqfault.report.tables import (
    CAUTION,
    OHM,
    Block,
    Group,
    Row,
    Sentences,
    Table,
    once,
)

SHOWN = 6
"""Names in a sentence before "and 3 more"."""


def conditions(solutions: Sequence[FaultSolution]) -> str:
    """``bolted, before the fault 1.00 of nominal, state: base``."""
    first = solutions[0]
    zg = next((s.fault.zg for s in solutions if s.fault.zg), 0j)
    parts = []
    if first.fault.zf:
        parts.append(f"zf {ohms(first.fault.zf)}")
    if zg:
        parts.append(f"zg {ohms(zg)} to earth")
    how = ", ".join(parts) or "bolted"
    before = f"before the fault {first.prefault:.2f} of nominal" if first.prefault else "dead"
    text = f"{how}, {before}, state: {first.state}"
    return text if first.machine == "subtransient" else f"{text}, {first.machine} reactances"


def impedances(solution: FaultSolution) -> Table:
    """The three driving-point impedances in ohm and per unit."""
    rows = []
    ohm, per_unit = solution.impedance, solution.impedance_pu
    for k in (1, 2, 0):
        if not np.isfinite(ohm[k]):
            rows.append(Row(f"Z{k}", (("no path",), *((None,),) * 4)))
            continue
        z, pu = complex(ohm[k]), complex(per_unit[k])
        rows.append(Row(f"Z{k}", tuple((v,) for v in (z.real, z.imag, abs(z), pu.real, pu.imag))))
    headings = (("R", "ohm"), ("X", "ohm"), ("size", "ohm"), ("R", "per unit"), ("X", "per unit"))
    base = f"{solution.base_power / 1e6:g} MVA and {kilovolt(solution.nominal)}"
    return Table(
        tuple(Group(heading) for heading in headings),
        (Block("", (OHM,), tuple(rows)),),
        heading=f"The network seen from the bus (per unit on {base})",
    )


def x_over_r(solution: FaultSolution) -> float | str:
    """X/R of the loop that limits the current, in words where it is no ratio to use."""
    ratio = solution.x_over_r
    if ratio != ratio:
        return "-"
    if abs(ratio) == float("inf"):
        return "no R"
    return ratio if ratio >= 0 else "capacitive"


def _notes(solutions: Sequence[FaultSolution]) -> tuple[str, ...]:
    """Notes once each; one that not every kind of fault has says which it is of."""
    kinds: dict[str, list[str]] = {}
    for s in solutions:
        for text in s.notes:
            kinds.setdefault(text, []).append(s.fault.kind.name)
    return tuple(
        text if len(of) == len(solutions) else f"{', '.join(of)}: {text}" for text, of in kinds.items()
    )


def _undefined(solutions: Sequence[FaultSolution]) -> tuple[str, ...]:
    names = once(
        quoted(bus) for s in solutions for bus, loose in zip(s.buses, s.undefined, strict=True) if loose
    )
    if not names:
        return ()
    shown, more = ", ".join(names[:SHOWN]), len(names) - SHOWN
    end = f" and {more} more" if more > 0 else ""
    if len(names) == 1:
        return (f"potential of {shown} to earth: nothing fixes it",)
    return (f"potentials of {shown}{end} to earth: nothing fixes them",)


def after(solutions: Sequence[FaultSolution]) -> tuple[Sentences, ...]:
    """Notes, undefined potentials, assumptions and the caution, each once."""
    notes = _notes(solutions) + _undefined(solutions)
    assumed = once(str(a) for s in solutions for a in s.assumptions)
    return (
        Sentences("Note", notes),
        Sentences("Assumed", assumed),
        Sentences("", (CAUTION,), quiet=True),
    )
