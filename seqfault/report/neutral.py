"""A neutral as a page: as it stands, when it fails, over its ohms, for a target, for a winding."""

from __future__ import annotations

import cmath
from collections.abc import Iterator

import msgspec
import numpy as np

from seqfault.report.fault import home_table
from seqfault.report.neutral_tables import (
    SYMBOLS,
    cover_part,
    failures_table,
    relays_table,
    standing_by_state,
    sweep_table,
    target_parts,
)
from seqfault.report.numbers import figures, kilovolt, ohms
from seqfault.report.tables import (
    CAUTION,
    SHARE,
    TEXT,
    Block,
    Cell,
    Column,
    Fact,
    Facts,
    Group,
    Page,
    Part,
    Row,
    Sentences,
    Table,
    Title,
    once,
)
from seqfault.studies.charging import Charging
from seqfault.studies.earthing_class import EFFECTIVE, R0_OVER_X1, X0_OVER_X1
from seqfault.studies.earthing_duty import EarthingDuty
from seqfault.studies.neutral import NeutralReport, Standing
from seqfault.studies.neutral_sweep import Sweep, worst
from seqfault.studies.neutral_target import Target
from seqfault.studies.winding_cover import WindingCover


class NeutralAnswer(msgspec.Struct, frozen=True, eq=False):
    """What was asked of a neutral: the report, what else was wanted, and ``more`` notes."""

    report: NeutralReport
    sweep: Sweep | None = None
    target: Target | None = None
    cover: WindingCover | None = None
    more: tuple[str, ...] = ()


def neutral_page(answer: NeutralAnswer) -> Page:
    """The page of ``answer``."""
    report = answer.report
    parts: list[Part] = [_title(report)]
    if len(report.standing) == 1:
        parts += _one(report, report.standing[0])
    else:
        parts += standing_by_state(report)
        parts += _duties_by_state(report)
        parts.append(Sentences("", ("ask for one state to see its feeders, paths home and class",)))
    if answer.target is not None:
        parts += target_parts(report, answer.target)
    if answer.sweep is not None:
        parts.append(sweep_table(report, answer.sweep, answer.target))
        parts += relays_table(report, answer.sweep, answer.target)
    parts.append(failures_table(report))
    if answer.cover is not None:
        parts.append(cover_part(report, answer.cover))
    several = len(report.standing) > 1
    key = tuple(f"({k}) {s.state.name}" for k, s in enumerate(report.standing, 1)) if several else ()
    parts += [
        Sentences("States", key),
        Sentences("Note", notes(answer)),
        Sentences("Assumed", assumptions(answer)),
        Sentences("", (CAUTION,), quiet=True),
    ]
    return Page(tuple(parts))


def _title(report: NeutralReport) -> Title:
    neutral, first = report.neutral, report.standing[0]
    network = first.state.network
    model, nominal = network.model, network.model.nominal[first.state.ports.place]
    several = len(report.standing)
    state = f"{several} states" if several > 1 else f"state: {model.state}"
    before = sorted({abs(s.state.ports.before) for s in report.standing})
    level = f"{before[0]:.2f}" if before[-1] == before[0] else f"{before[0]:.2f} to {before[-1]:.2f}"
    text = f"earth faults at {neutral.place} {kilovolt(float(nominal))}, before them {level} of nominal"
    if model.machine != "subtransient":
        state += f", {model.machine} reactances"
    device = ohms(first.ohms[0], 4) if cmath.isfinite(first.ohms[0]) else "open"
    name = f"{neutral.name}  {device} in {kilovolt(neutral.nominal)}"
    return Title(model.title, name, f"{text}, {state}")


def _one(report: NeutralReport, standing: Standing) -> Iterator[Part]:
    yield _as_it_stands(report, standing)
    yield home_table(standing.solutions[0])
    if standing.charging.shares:
        yield _charging(standing.charging)
    yield Facts(tuple(_facts(report, standing)))


def _as_it_stands(report: NeutralReport, s: Standing) -> Table:
    duty, faults = report.duty, s.faults
    earth, neutral = worst([np.abs(faults.earth)]), worst([np.abs(faults.neutral)])
    star, sound = worst([np.abs(faults.star)]), worst([faults.factor])
    power = worst([faults.power])

    def ruled(label: str, by: object, scale: float = 1.0) -> Row:
        assert hasattr(by, "value")
        assert hasattr(by, "kind")
        cells: list[tuple[Cell, ...]] = [
            (float(value) * scale, SYMBOLS[int(kind)])
            for value, kind in zip(by.value, by.kind, strict=True)
        ]
        return Row(label, tuple(cells))

    real = s.ohms[0].imag == 0
    values: list[tuple[Cell, ...]] = [((z.real if real else ohms(z, 4)), "") for z in s.ohms]
    phase = report.neutral.phase_voltage
    seconds = f"{duty.duration:g} s"
    rows = (
        Row("ohm between star point and earth", tuple(values)),
        Row(f"at its nominal {phase / 1000:.4g} kV: ampere", tuple((i, "") for i in s.let_through)),
        Row("kilowatt", tuple((w / 1e3, "") for w in s.heat)),
        Row(f"megajoule in {seconds}", tuple((w * duty.duration / 1e6, "") for w in s.heat)),
        ruled("in the network: 3I0, ampere", earth),
        ruled("through the neutral, ampere", neutral),
        ruled("its voltage, volt", star),
        ruled("kilowatt", power, 1e-3),
        ruled(f"megajoule in {seconds}", power, duty.duration / 1e6),
        ruled("sound phase, times normal", sound),
    )
    hot = f"after {seconds}" if s.ohms[0] != s.ohms[1] else "the same"
    groups = (Group(("cold", "")), Group(("hot", hot)))
    heading = "As it stands (the greatest of line-ground, k1, and line-line-ground, k2E)"
    return Table(groups, (Block("", (Column("", 3), TEXT), rows),), heading=heading)


def _charging(charging: Charging) -> Table:
    total = charging.total
    rows = []
    for share in charging.shares:
        name = f"{share.name} (all {share.count})" if share.count > 1 else share.name
        rows.append(Row(name, ((share.current,), (share.current / total,))))
        if share.count > 1:
            one = share.current / share.count
            rows.append(Row("- one circuit", ((one,), (one / total,))))
    rows.append(Row("together", ((total,), (1.0,))))
    return Table(
        (Group(("ampere",)), Group(("share",))),
        (Block("", (Column("A", 3),), tuple(_shared(row) for row in rows)),),
        heading="Charging current of what metal joins to it: 3I0 at nominal voltage, each feeder's own",
    )


def _shared(row: Row) -> Row:
    return Row(row.label, (row.cells[0], (f"{row.cells[1][0]:.{SHARE.decimals}f}",)))


def _facts(report: NeutralReport, s: Standing) -> Iterator[Fact]:
    g, through = s.grounding, s.let_through[0]
    if s.charging.total:
        ratio = s.resistive_share
        text = "let-through at nominal voltage over charging current"
        if s.ohms[0].real and not s.ohms[0].imag:
            text += (
                "; at least 1 holds intermittent faults down (common practice)"
                if ratio >= 1
                else ("; below 1 an intermittent fault may drive the voltage up (common practice)")
            )
        yield Fact("Over its charging current", figures(ratio), text)
    yield Fact("By its ratios", "", f"{g.by_ratios}: {_ratios(s)}")
    verdict = "effectively earthed" if g.effective else "not effectively earthed"
    yield Fact(
        "Coefficient of grounding",
        f"{g.coefficient:.3f}",
        f"{verdict} (up to {EFFECTIVE:.2f}); earth-fault factor {g.factor:.3f}, {g.kind}, phase {g.phase}",
    )
    if g.effective != g.within_ratios:
        says = "calls it effectively earthed" if g.within_ratios else "does not call it so"
        yield Fact("The two differ", "", f"the rule of thumb {says}; the voltage of the sound phases rules")
    yield Fact("Duty", *_continuous(report, s, through))
    for duty in s.duties:
        yield from _earthing_duty(duty)


def _ratios(s: Standing) -> str:
    g = s.grounding
    if not cmath.isfinite(g.z0):
        return "nothing joins this place to earth in zero sequence"
    pairs = (("X0/X1", g.x0_over_x1), ("R0/X1", g.r0_over_x1), ("R0/X0", g.r0_over_x0))
    text = ", ".join(f"{name} {figures(value)}" for name, value in pairs)
    return f"{text} (effective: X0/X1 0 to {X0_OVER_X1:g} and R0/X1 up to {R0_OVER_X1:g})"


def _continuous(report: NeutralReport, s: Standing, through: float) -> tuple[str, str]:
    duty = report.duty
    if duty.continuous is None:
        if report.neutral.record.duration is None:
            return "", "neither duration nor continuous current stated"
        return "", f"no continuous current stated: a fault must be cleared within {duty.duration:g} s"
    heat = figures(duty.continuous**2 * s.ohms[0].real / 1e3)
    figure = f"{figures(duty.continuous)} A"
    if duty.continuous >= through * (1 - 1e-9):
        return figure, f"continuous, {heat} kW: more than it lets through, an earth fault may stand"
    return figure, (
        f"continuous, {heat} kW, beside {figures(through)} A let through: a fault must be cleared"
        f" within {duty.duration:g} s"
    )


def _earthing_duty(d: EarthingDuty) -> Iterator[Fact]:
    yield Fact(
        d.name,
        f"{figures(d.phase)} A",
        f"in each phase of this {d.record}, {figures(d.neutral)} A in its star point ({d.kind})",
    )
    stated = "no rating stated"
    if d.rating is not None:
        enough = "is enough" if d.rating >= d.needed else "is less"
        time = f" for {d.duration:g} s" if d.duration else ""
        stated = f"{figures(d.rating / 1e3)} kVA stated{time} {enough}"
        if d.rating < d.needed and not d.duration:
            stated += ", unless it is a continuous one"
    yield Fact(
        "short-time",
        f"{figures(d.needed / 1e3)} kVA",
        f"phase voltage × neutral current (common practice); {stated}; 100 % on it is"
        f" {figures(d.hundred_percent)} ohm a phase, and z0 is {figures(abs(d.z0))} ohm,"
        f" {figures(d.z0_percent)} %",
    )


def _duties_by_state(report: NeutralReport) -> Iterator[Part]:
    """The greatest duty of each earthing transformer over the states, and the hot ohms of the neutral."""
    facts: list[Fact] = []
    cold, hot = report.standing[0].ohms
    if cold != hot:
        seconds = f"{report.duty.duration:g} s"
        facts.append(
            Fact("Hot", ohms(hot, 4), f"after {seconds}, in state {report.standing[0].state.name}")
        )
    greatest: dict[str, tuple[EarthingDuty, str]] = {}
    for s in report.standing:
        for d in s.duties:
            if d.name not in greatest or d.neutral > greatest[d.name][0].neutral:
                greatest[d.name] = d, s.state.name
    for duty, state in greatest.values():
        first, *more = _earthing_duty(duty)
        facts += [Fact(first.label, first.figure, f"{first.text}, state {state}"), *more]
    if facts:
        yield Facts(tuple(facts))


def notes(answer: NeutralAnswer) -> tuple[str, ...]:
    """What the reader should know about this answer."""
    report = answer.report
    out = [*report.neutral.left_out, *answer.more]
    for s in report.standing:
        out += _of_faults(s)
        if s.charging.silent:
            shown = ", ".join(s.charging.silent[:6])
            more = len(s.charging.silent) - 6
            out.append(
                f"no capacitance to earth is stated for {shown}{f' and {more} more' if more > 0 else ''}:"
                " the charging current may be larger"
            )
        if not s.state.ports.coupled:
            out.append(
                f"state {s.state.name}: earth faults at {report.neutral.place} do not reach this neutral"
            )
    return once(out)


def _of_faults(s: Standing) -> Iterator[str]:
    """Notes of the two faults; one that is not of both says which it is of."""
    one, two = s.solutions
    for solution, other in ((one, two), (two, one)):
        for text in solution.notes:
            yield text if text in other.notes else f"{solution.fault.kind.name}: {text}"


def assumptions(answer: NeutralAnswer) -> tuple[str, ...]:
    """What was not stated, of the neutral first."""
    report = answer.report
    name = report.neutral.name
    own = [f'neutral "{name}": {text}' for text in report.duty.assumed]
    if answer.sweep is not None or answer.target is not None:
        own.append(
            f'neutral "{name}": what is tried in its place is one plain {report.neutral.device}'
            " between star point and earth"
        )
    if answer.cover is not None:
        own.append(
            f'generator "{answer.cover.generator}": alone feeds a fault in its own winding, whose impedance'
            f" grows with the share of turns; the whole is the {answer.cover.machine} one"
        )
    model = [str(a) for s in report.standing for a in s.state.network.model.assumptions]
    return once([*own, *model])
