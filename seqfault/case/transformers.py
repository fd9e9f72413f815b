"""Rules for transformers: windings, vector group, tap, and units in parallel."""

from __future__ import annotations

from seqfault.case.leakage import check_impedance, pair_rating, share
from seqfault.case.quantities import Quantity
from seqfault.case.records import Pairs, Transformer, Winding
from seqfault.case.subject import Site, Subject, real, said
from seqfault.case.vector_group import Connection, VectorGroup, parse_vector_group
from seqfault.case.wording import digits
from seqfault.case.zero_sequence import check_zero_sequence
from seqfault.errors import FieldError, quoted

# Common practice for units that share a load by their ratings.
_RATIOS, _IMPEDANCES = 0.005, 0.10


def windings(unit: Transformer) -> dict[str, Winding]:
    """Return the windings of a unit by side."""
    sides = {"hv": unit.hv, "lv": unit.lv}
    return sides if unit.tv is None else {**sides, "tv": unit.tv}


def check_transformer(subject: Subject, unit: Transformer) -> None:
    """Tell what is wrong or doubtful about a transformer of two or three windings."""
    group = None
    try:
        group = parse_vector_group(unit.vector_group)
    except FieldError as error:
        subject.error("vector_group", str(error))
    sides = windings(unit)
    for side, winding in sides.items():
        subject.bus(f"{side}.bus", winding.bus)
        if subject.positive({f"{side}.voltage": winding.voltage}):
            subject.rated_voltage(f"{side}.voltage", winding.voltage, winding.bus)
        if group is None or _has_star_point(subject, side, winding.neutral, group, unit.vector_group):
            subject.star_point(f"{side}.neutral", winding.neutral)
    _one_bus(subject, sides)
    hv = real(unit.hv.voltage)
    for side, winding in sides.items():
        other = real(winding.voltage)
        if hv is not None and other is not None and hv < other:
            text = f"hv {said(unit.hv.voltage)} is below {side} {said(winding.voltage)}; sides exchanged?"
            subject.warn("", text)
    subject.positive({"rating": unit.rating})
    subject.positive({"load_loss": unit.load_loss}, zero=True)
    subject.volt_amperes(unit.rating)
    subject.count(unit.count)
    subject.x_over_r("x_over_r", unit.x_over_r)
    if group is not None and not _third_agrees(subject, unit, group):
        group = None  # how many windings there are is not known
    check_impedance(subject, unit, group)
    check_zero_sequence(subject, unit, group)
    _tap(subject, unit.tap)


def _third_agrees(subject: Subject, unit: Transformer, group: VectorGroup) -> bool:
    """Tell whether a third winding stands both in the vector group and as ``tv``, or in neither."""
    if (group.tv is None) == (unit.tv is None):
        return True
    if unit.tv is None:
        problem = f"this is missing; {unit.vector_group} has three windings, so a table is wanted, "
        problem += "with bus and voltage"
    else:
        problem = f"{unit.vector_group} has two windings; name the third in vector_group, "
        problem += 'as in "YNyn0d11", or leave tv out'
    subject.error("tv", problem)
    return False


def _one_bus(subject: Subject, sides: dict[str, Winding]) -> None:
    at: dict[str, str] = {}
    for side, winding in sides.items():
        other = at.setdefault(winding.bus, side)
        if other != side:
            which = "both its windings" if len(sides) == 2 else f"its {other} and {side} windings"
            subject.error("", f"{which} are on bus {quoted(winding.bus)}")


def _has_star_point(
    subject: Subject, side: str, neutral: str | None, group: VectorGroup, written: str
) -> bool:
    """Tell whether the winding has the star point that ``neutral``, where it is stated, joins."""
    connections: dict[str, tuple[Connection | None, bool]] = {
        "hv": (group.hv, group.hv_star_point),
        "lv": (group.lv, group.lv_star_point),
        "tv": (group.tv, group.tv_star_point),
    }
    kind, brought_out = connections[side]
    if neutral is None or kind is None or (brought_out and kind != "auto"):
        return True
    if kind == "delta":
        problem = f"the {side} winding of {written} is a delta and has no star point"
    elif kind == "auto":
        problem = f"the star point of {written} is common to hv and lv; state it as hv.neutral"
    else:
        letter = "N" if side == "hv" else "n"
        problem = (
            f"{written} says that the {side} star point is not brought out; "
            f"add {letter} to the group or leave neutral out"
        )
    subject.error(f"{side}.neutral", f"{quoted(neutral)}: {problem}")
    return False


def _tap(subject: Subject, tap: Quantity | None) -> None:
    turns = real(tap)
    if turns is None:
        return
    if turns <= -1:
        subject.error("tap", f"{said(tap)}: this leaves no turns on the hv winding")
    elif abs(turns) > 0.25:
        cure = f'; write "{100 * (turns - 1):+.3g} %"?' if 0.75 <= turns <= 1.25 else ""
        subject.warn("tap", f"{said(tap)} means {100 * turns:+.4g} % of the hv turns{cure}")


def check_parallel(site: Site) -> None:
    """Doubt units in service between the same two buses that do not fit each other."""
    first: dict[tuple[str, str], tuple[str, Transformer]] = {}
    for name, unit in site.case.transformers.items():
        if unit.out:
            continue
        other_name, other = first.setdefault((unit.hv.bus, unit.lv.bus), (name, unit))
        if other is unit:
            continue
        subject, beside = Subject(site, "transformers", name), f"{quoted(other_name)}, in parallel with it"
        one, two = _ratio(unit), _ratio(other)
        if one and two and abs(one - two) > _RATIOS * (1 + 1e-9) * two:
            subject.warn(
                "",
                f"its ratio {one:.4g} and the {two:.4g} of {beside}, differ by "
                f"{digits(100 * abs(one - two) / two)} %, more than the usual 0.5 %; "
                "a current circulates between the two",
            )
        one, two = _percent(unit), _percent(other)
        if one and two and abs(one - two) > _IMPEDANCES * (1 + 1e-9) * (one + two) / 2:
            subject.warn(
                "impedance",
                f"its {digits(one)} % and the {digits(two)} % of {beside}, differ by "
                f"{digits(200 * abs(one - two) / (one + two))} % of their mean, more than the usual 10 %; "
                "load is not shared by rating",
            )


def _ratio(unit: Transformer) -> float | None:
    """Return the ratio hv to lv at the tap, or None where it cannot be."""
    hv, lv, tap = real(unit.hv.voltage), real(unit.lv.voltage), real(unit.tap) or 0.0
    return hv / lv * (1 + tap) if hv and lv and hv > 0 and lv > 0 and tap > -1 else None


def _percent(unit: Transformer) -> float | None:
    """Return the impedance hv to lv in per cent of the unit's own rating."""
    pair = unit.impedance.hv_lv if isinstance(unit.impedance, Pairs) else unit.impedance
    on = pair_rating(unit, "hv_lv")
    part, rating, base = share(pair, on, unit.hv.voltage), real(unit.rating), real(on)
    return 100 * part * rating / base if part and rating and base and base > 0 else None
