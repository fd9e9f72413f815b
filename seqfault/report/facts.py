"""What every answer to a fault says around its tables: conditions, impedances, notes, caution."""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np

from seqfault.errors import quoted
from seqfault.faults.kinds import Fault
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
    how = impedance_words(first.fault, zg)
    return f"{how}, {circumstances(first)}" if how else circumstances(first)


def impedance_words(fault: Fault, zg: complex | None = None) -> str:
    """``bolted``, or the impedances of a fault; nothing for a conductor that hangs clear."""
    if fault.kind.series and not fault.fallen:
        return ""
    zg = fault.zg if zg is None else zg
    parts = [f"zf {ohms(fault.zf)}"] if fault.zf else []
    if zg:
        parts.append(f"zg {ohms(zg)} to earth")
    return ", ".join(parts) or "bolted"


def circumstances(s: FaultSolution) -> str:
    """``before the fault 1.00 of nominal, state: base``."""
    before = f"before the fault {s.prefault:.2f} of nominal" if s.prefault else "dead"
    loaded = ", loaded" if s.loaded else ""
    text = f"{before}{loaded}, state: {s.state}"
    return text if s.machine == "subtransient" else f"{text}, {s.machine} reactances"


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
    where = "from the bus"
    if solution.faults[0].through is not None:
        where = "across the break"
    if len(solution.faults) > 1:
        where += f" {solution.fault.place}"
    elif solution.faults[0].bus != solution.fault.place:
        where = "from the place" if solution.faults[0].through is None else where
    base = f"{solution.base_power / 1e6:g} MVA and {kilovolt(solution.nominal)}"
    return Table(
        tuple(Group(heading) for heading in headings),
        (Block("", (OHM,), tuple(rows)),),
        heading=f"The network seen {where} (per unit on {base})",
    )


def x_over_r(solution: FaultSolution) -> float | str:
    """X/R of the loop that limits the current, in words where it is no ratio to use."""
    ratio = solution.x_over_r
    if ratio != ratio:
        return "-"
    if abs(ratio) == float("inf"):
        return "no R"
    return ratio if ratio >= 0 else "capacitive"


def _notes(solutions: Sequence[FaultSolution], names: Sequence[str]) -> tuple[str, ...]:
    """Notes once each; one that not every solution has says which it is of, by ``names``."""
    kinds: dict[str, list[str]] = {}
    for s, name in zip(solutions, names, strict=True):
        for text in s.notes:
            kinds.setdefault(text, []).append(name)
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


def after(solutions: Sequence[FaultSolution], names: Sequence[str] | None = None) -> tuple[Sentences, ...]:
    """Notes, undefined potentials, assumptions and the caution, each once.

    ``names`` are what notes call the solutions, by default the kinds of fault.
    """
    called = [s.fault.kind.name for s in solutions] if names is None else names
    notes = _notes(solutions, called) + _undefined(solutions)
    assumed = once(str(a) for s in solutions for a in s.assumptions)
    return (
        Sentences("Note", notes),
        Sentences("Assumed", assumed),
        Sentences("", (CAUTION,), quiet=True),
    )
