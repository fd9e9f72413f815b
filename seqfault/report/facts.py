"""What every answer to a fault says around its tables: conditions, impedances, notes, caution."""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np

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
    text = f"{how}, before the fault {first.prefault:.2f} of nominal, state: {first.state}"
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


def after(solutions: Sequence[FaultSolution]) -> tuple[Sentences, ...]:
    """Notes, undefined potentials, assumptions and the caution, each once."""
    notes = once(text for s in solutions for text in (*s.notes, *s.undefined_notes))
    assumed = once(str(a) for s in solutions for a in s.assumptions)
    return (
        Sentences("Note", notes),
        Sentences("Assumed", assumed),
        Sentences("", (CAUTION,), quiet=True),
    )
