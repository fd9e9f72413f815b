"""Tables of a neutral that share their columns: states, failures, sweep, what a target gives."""

from __future__ import annotations

import cmath
from collections.abc import Sequence

import numpy as np

from seqfault.faults.neutral_faults import EarthFaults
from seqfault.report.numbers import figures, ohms
from seqfault.report.tables import TEXT, Block, Cell, Column, Fact, Facts, Group, Part, Row, Table
from seqfault.studies.neutral import NeutralReport
from seqfault.studies.neutral_relays import seen_by
from seqfault.studies.neutral_sweep import Sweep, Worst, sweep, worst
from seqfault.studies.neutral_target import Target
from seqfault.studies.winding_cover import WindingCover

SYMBOLS = ("k1", "k2E")
"""Subscripts of IEC 60909-0 for the kinds of earth fault."""
VALUE = Column("", 3)
KEY = "k1, k2E: the kind of fault that governs; volt, kW and MJ go with the neutral's current"


def _groups(duration: float) -> tuple[Group, ...]:
    headings = (
        ("to earth", "3I0, A"),
        ("neutral", "A"),
        ("sound", "phase, pu"),
        ("neutral", "volt"),
        ("neutral", "kW"),
        (f"in {duration:g} s", "MJ"),
    )
    return tuple(Group(heading) for heading in headings)


def _rows(labels: Sequence[str], by_state: Sequence[EarthFaults], duration: float) -> tuple[Row, ...]:
    """One row a column of the faults, each value the greatest over kinds and states."""
    several = len(by_state) > 1
    columns = [
        worst([np.abs(f.earth) for f in by_state]),
        worst([np.abs(f.neutral) for f in by_state]),
        worst([f.factor for f in by_state]),
        worst([np.abs(f.star) for f in by_state]),
        worst([f.power for f in by_state]),
    ]
    rows = []
    for n, label in enumerate(labels):
        cells: list[tuple[Cell, ...]] = [(float(c.value[n]), _ruler(c, n, several)) for c in columns[:2]]
        cells.append((f"{columns[2].value[n]:.2f}", _ruler(columns[2], n, several)))
        cells.append((float(columns[3].value[n]),))
        cells.append((float(columns[4].value[n]) / 1e3,))
        cells.append((float(columns[4].value[n]) * duration / 1e6,))
        rows.append(Row(label, tuple(cells)))
    return tuple(rows)


def _ruler(by: Worst, n: int, several: bool) -> str:
    if by.value[n] == 0:
        return ""
    kind = SYMBOLS[int(by.kind[n])]
    return f"{kind} ({int(by.state[n]) + 1})" if several else kind


def _table(heading: str, rows: tuple[Row, ...], duration: float) -> Table:
    return Table(_groups(duration), (Block("", (VALUE, TEXT), rows),), heading=heading)


def standing_by_state(report: NeutralReport) -> list[Part]:
    """The neutral as it stands, a row a state, and what its system is in each."""
    duration = report.duty.duration
    rows: list[Row] = []
    more = []
    for k, s in enumerate(report.standing, 1):
        label = f"({k}) {s.state.name}"
        rows += _rows([label], [s.faults], duration)
        g = s.grounding
        ratio = f"{figures(s.resistive_share)}" if s.charging.total else "-"
        more.append(
            Row(
                label,
                (
                    (figures(s.charging.total) if s.charging.total else "0",),
                    (ratio,),
                    (f"{g.coefficient:.3f}",),
                    ("yes" if g.effective else "no",),
                    (g.by_ratios,),
                ),
            )
        )
    groups = (
        Group(("charging", "A")),
        Group(("let-through", "over it")),
        Group(("coefficient", "of grounding")),
        Group(("effective,", "up to 0.80")),
        Group(("by its", "ratios"), left=True),
    )
    return [
        _table(f"As it stands, cold, by state ({KEY})", tuple(rows), duration),
        Table(groups, (Block("", (TEXT,), tuple(more)),), heading="Its system in each state"),
    ]


def failures_table(report: NeutralReport) -> Table:
    """As it stands, shorted, open, and with each other neutral lost."""
    duration = report.duty.duration
    every: dict[tuple[str, str], list[EarthFaults]] = {}
    for failures in report.failures:
        for failure in failures:
            every.setdefault((failure.what, failure.name), []).append(failure.faults)
    rows: list[Row] = []
    for (what, name), faults in every.items():
        label = f"{name} lost" if what == "lost" else what
        missing = len(faults) < len(report.failures)
        rows += _rows([f"{label} (some states)" if missing else label], faults, duration)
    several = len(report.failures) > 1
    text = "When it fails, cold ohms"
    if several:
        rows = [_without_states(row) for row in rows]
        text += ", the greatest over the states"
    return _table(text, tuple(rows), duration)


def _without_states(row: Row) -> Row:
    """States left out of what governs: not every failure is of every state, so numbers would mislead."""
    cells: list[tuple[Cell, ...]] = []
    for cell in row.cells:
        text = cell[1].partition(" ")[0] if len(cell) > 1 and isinstance(cell[1], str) else None
        cells.append(cell if text is None else (cell[0], text))
    return Row(row.label, tuple(cells))


def ohm_label(value: complex) -> str:
    """``solid``, ``open`` or the ohms of a row."""
    if value == 0:
        return "solid"
    if not cmath.isfinite(value):
        return "open"
    return f"{figures(abs(value), 4)} ohm"


def sweep_table(report: NeutralReport, swept: Sweep, target: Target | None) -> Table:
    """A row for each of the ohms, with what stands and what the target asks for among them."""
    labels = [ohm_label(complex(z)) for z in swept.ohms]
    rows = list(zip(swept.ohms.tolist(), _rows(labels, swept.faults, swept.duration), strict=True))
    extra: list[tuple[complex, str]] = []
    standing = {s.ohms[0] for s in report.standing}
    if len(standing) == 1:
        (now,) = standing
        if now.real == 0 or now.imag == 0:
            extra.append((now, "now"))
    if target is not None and np.isfinite(target.ohms):
        extra.append((target.ohms * report.neutral.direction, "target"))
    for z, word in extra:
        one = sweep(report.neutral, np.array([z]), swept.duration)
        rows.append((z, _rows([f"{figures(abs(z), 4)} {word}"], one.faults, swept.duration)[0]))
    rows.sort(key=lambda pair: abs(pair[0]))
    several = ", the greatest over the states" if len(swept.faults) > 1 else ""
    heading = f"Over the ohms of a {report.neutral.device}, cold{several} ({KEY})"
    return _table(heading, tuple(row for _, row in rows), swept.duration)


def relays_table(report: NeutralReport, swept: Sweep, target: Target | None) -> list[Part]:
    """What each earth-fault relay sees at the least, and how many times its pickup, over the ohms."""
    neutral = report.neutral
    ohms = swept.ohms
    extra = [s.ohms[0] for s in report.standing[:1]]
    if target is not None and np.isfinite(target.ohms):
        extra.append(target.ohms * neutral.direction)
    ohms = np.concatenate([ohms, np.array([z for z in extra if np.isfinite(z)], complex)])
    seen = seen_by(neutral, ohms)
    if not seen:
        return []
    order = np.argsort(np.abs(ohms), kind="stable")
    several = len(report.standing) > 1
    groups = tuple(Group((one.view.name, f"{figures(one.view.pickup)} A")) for one in seen)
    rows = []
    for n in order.tolist():
        cells: list[tuple[Cell, ...]] = []
        for one in seen:
            value = float(one.current[n])
            if value <= 1e-9 * float(one.current.max()):
                cells.append((0.0, "0x"))
                continue
            times = one.multiple[n]
            cells.append((value, f"{times:.2f}x" if times < 100 else f"{times:.0f}x"))
        label = ohm_label(complex(ohms[n]))
        if n >= len(swept.ohms):
            label = f"{figures(abs(ohms[n]), 4)} {'now' if n == len(swept.ohms) else 'target'}"
        rows.append(Row(label, tuple(cells)))
    states = " and states" if several else ""
    heading = (
        f"What relays see of faults at {neutral.place}: ampere, the least over both kinds{states}, and"
        " times pickup"
    )
    return [Table(groups, (Block("", (VALUE, TEXT), tuple(rows)),), heading=heading)]


def target_parts(report: NeutralReport, target: Target) -> list[Part]:
    """The ohms that a target asks for, what binds, and what they do in every state."""
    neutral, z = report.neutral, target.ohms
    facts = []
    chosen = f"{figures(z, 5)} ohm" if np.isfinite(z) else "any"
    limit = f"{target.limit:g}" if target.limit is not None else ""
    wishes = _wishes(target)
    wanted = f"{target.current:g} A" if target.current is not None else ""
    several = f", state {target.state}" if len(report.standing) > 1 else ""
    device = neutral.device.capitalize()
    if target.current is None:
        text = f"the most that keeps {wishes}{several}"
        if not np.isfinite(z):
            text = f"even open it keeps {wishes}"
        facts.append(Fact(device, chosen, text))
        if len(target.see) + bool(limit) > 1:
            facts.append(Fact("What binds", "", target.binds))
    elif target.met:
        facts.append(Fact(device, chosen, f"gives {wanted} line-ground (3I0) at {neutral.place}{several}"))
        if limit:
            with_it = [state.faults(np.array([z * neutral.direction])) for state in neutral.states]
            highest = max(float(f.factor.max()) for f in with_it)
            text = f"the current; the sound phases stand at {highest:.3f}, below {limit}"
            facts.append(Fact("What binds", "", text))
        for relay, times in target.see:
            one = next(
                s for s in seen_by(neutral, np.array([z * neutral.direction])) if s.view.name == relay
            )
            text = f"{figures(one.current[0])} A, at least {times:g} times pickup wanted"
            facts.append(Fact(f"{relay} sees", f"{one.multiple[0]:.2f}x", text))
    else:
        facts.append(
            Fact(device, chosen, f"keeps {wishes}, but does not give {wanted}: both cannot be had")
        )
        facts.append(Fact("What binds", "", f"{target.binds}{several}"))
        alone = [v for v in target.for_current if v == v]
        facts.append(Fact("For the current alone", f"{figures(max(alone), 5)} ohm", f"gives {wanted}"))
    ratio = neutral.record.ratio
    if ratio and np.isfinite(z):
        facts.append(
            Fact("On its secondary", f"{figures(z / ratio**2, 5)} ohm", f"through the ratio {ratio:g}")
        )
    if target.others:
        also = ", ".join(f"{figures(v, 5)} ohm" for v in target.others)
        facts.append(Fact("Also", "", f"{also} would do"))
    for r in target.reach:
        text = f"line-ground current that {neutral.device}s can give, open to solid"
        if len(target.reach) > 1:
            text += f", state {r.state}"
        facts.append(Fact("Reach", f"{figures(r.least)} to {figures(r.greatest)} A", text))
    parts: list[Part] = [
        Table((), (), heading=_question(wanted, wishes, neutral.place)),
        Facts(tuple(facts)),
    ]
    if np.isfinite(z):
        duration = report.duty.duration
        rows: list[Row] = []
        for state in neutral.states:
            faults = state.faults(np.array([z * neutral.direction]))
            rows += _rows([state.name], [faults], duration)
        each = " in each state" if len(rows) > 1 else ""
        parts.append(_table(f"With {ohms(z * neutral.direction, 5)}{each}", tuple(rows), duration))
    return parts


def _wishes(target: Target) -> str:
    """``the sound phases below 1.4 pu, R1 at 2 times its pickup or more``."""
    out = [] if target.limit is None else [f"the sound phases below {target.limit:g} pu"]
    out += [f"{relay} at {times:g} times its pickup or more" for relay, times in target.see]
    return ", ".join(out)


def _question(wanted: str, wishes: str, place: str) -> str:
    if wanted and wishes:
        return f"What gives {wanted} at {place} and keeps {wishes}"
    return f"What gives {wanted} at {place}" if wanted else f"What keeps {wishes}"


def cover_part(report: NeutralReport, cover: WindingCover) -> Table:
    """How much of the winding the pickup sees."""

    def share(x: float) -> str:
        return f"{figures(100 * x)} %" if x < 1 else "all of it"

    rows = [
        Row("left unprotected, from the star point", ((share(cover.unprotected),),)),
        Row("the same without winding impedance", ((share(cover.simple),),)),
        Row("covered", ((f"{figures(100 * max(0.0, 1 - cover.unprotected))} %",),)),
        Row("neutral", ((ohms(cover.neutral, 4),),)),
        Row(f"whole winding, {cover.machine}", ((ohms(cover.winding, 4),),)),
    ]
    if cover.resistor is not None and cover.cover is not None:
        rows.append(
            Row(f"resistor that covers {100 * cover.cover:g} %", ((f"{figures(cover.resistor, 4)} ohm",),))
        )
    heading = (
        f"Earth faults in the winding of {cover.generator}, pickup {figures(cover.pickup)} A primary in the"
        " neutral"
    )
    if len(report.standing) > 1:
        heading += f", state {cover.scenario}"
    return Table((Group(("",), left=True),), (Block("", (TEXT,), tuple(rows)),), heading=heading)
