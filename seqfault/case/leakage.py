"""Rules for the short-circuit impedances of transformers, one or three pairs of windings."""

from __future__ import annotations

import math

from seqfault.case.quantities import Quantity
from seqfault.case.records import PairRatings, Pairs, Transformer, Winding
from seqfault.case.subject import Subject, is_usual, real, said
from seqfault.case.vector_group import VectorGroup
from seqfault.case.wording import digits

PAIRS = ("hv_lv", "hv_tv", "lv_tv")
# Common practice; between the windings of a three-winding unit much more is found.
_IMPEDANCE, _OF_PAIRS = (0.005, 0.30), (0.005, 1.0)

_LARGEST_X_OVER_R = 200.0  # common practice


def check_impedance(subject: Subject, unit: Transformer, group: VectorGroup | None) -> None:
    """Tell what is wrong or doubtful about impedance, impedance_on, x_over_r and load_loss."""
    impedance = unit.impedance
    if group is not None and not check_form(subject, "impedance", impedance, group.tv is not None):
        return
    if isinstance(impedance, Pairs):
        _pairs(subject, unit, impedance)
        return
    if unit.impedance_on is not None:
        subject.error("impedance_on", "it goes with the impedances of three pairs; leave it out")
    sound = subject.impedance("impedance", impedance)
    parts = unit.x_over_r is not None, unit.load_loss is not None
    if isinstance(impedance.value, complex):
        if any(parts):
            field = "x_over_r" if parts[0] else "load_loss"
            subject.error(field, "the impedance states its resistance already; leave this out")
    elif not any(parts):
        subject.error(
            "",
            "its resistance is missing; give x_over_r or load_loss, "
            'or a complex impedance, as in "0.5+j10 %"',
        )
    elif all(parts):
        subject.error("", "both x_over_r and load_loss are given; give one of the two")
    part = share(impedance, unit.rating, unit.hv.voltage)
    rating, loss = real(unit.rating), real(unit.load_loss)
    if not sound or not part:
        return
    if not is_usual(part, _IMPEDANCE):
        text = f"{said(impedance)} is {digits(100 * part)} %, outside the usual 0.5 to 30 %"
        subject.usual("impedance", part, _IMPEDANCE, text, 100)
    if rating and loss and 0 < loss / rating < part / _LARGEST_X_OVER_R:
        subject.warn(
            "load_loss",
            f"{said(unit.load_loss)} makes an X/R of {digits(part * rating / loss)}, above the usual"
            f" {_LARGEST_X_OVER_R:g}",
        )
    if rating and loss and loss / rating > part:
        subject.error(
            "load_loss",
            f"{said(unit.load_loss)} is {digits(100 * loss / rating)} % of the rating, "
            f"more than the impedance {said(impedance)}",
        )


def check_form(subject: Subject, field: str, value: Quantity | Pairs, three: bool) -> bool:
    """Tell whether two windings have one impedance and three have their pairs."""
    if isinstance(value, Pairs) == three:
        return True
    if isinstance(value, Pairs):
        problem = f'two windings have one impedance, as in {field} = "10 %"'
    else:
        problem = (
            f"{said(value)}: three windings need the three pairs, as in "
            f'{field} = {{ hv_lv = "10 %", hv_tv = "15 %", lv_tv = "6 %" }}'
        )
    subject.error(field, problem)
    return False


def _pairs(subject: Subject, unit: Transformer, pairs: Pairs) -> None:
    ratings = unit.impedance_on
    if ratings is not None:
        for pair in PAIRS:
            rating = getattr(ratings, pair)
            subject.positive({f"impedance_on.{pair}": rating})
            subject.volt_amperes(rating, f"impedance_on.{pair}")
    if unit.load_loss is not None:
        problem = "it belongs to one pair of windings; with three, give x_over_r or complex impedances"
        subject.error("load_loss", problem)
    real_parts = any(not isinstance(getattr(pairs, pair).value, complex) for pair in PAIRS)
    if real_parts and unit.x_over_r is None and unit.load_loss is None:
        subject.error(
            "",
            "its resistance is missing; give x_over_r, or complex impedances of the three pairs, "
            'as in "0.5+j10 %"',
        )
    elif not real_parts and unit.x_over_r is not None:
        subject.error("x_over_r", "the impedances state their resistance already; leave this out")
    check_pairs(subject, "impedance", unit, pairs)
    for pair in PAIRS:
        value = getattr(pairs, pair)
        part = share(value, pair_rating(unit, pair), _first(unit, pair).voltage)
        if part:
            text = f"{said(value)} is {digits(100 * part)} %, outside the usual 0.5 to 100 %"
            subject.usual(f"impedance.{pair}", part, _OF_PAIRS, text, 100)


def check_pairs(subject: Subject, field: str, unit: Transformer, pairs: Pairs) -> None:
    """Complain of three impedances that no three windings on one core can have.

    The leakage matrix [[X_hl, m], [m, X_ht]] with m = (X_hl + X_ht - X_lt) / 2 has a positive
    determinant exactly when each square root is less than the sum of the other two.
    """
    sound = [subject.impedance(f"{field}.{pair}", getattr(pairs, pair)) for pair in PAIRS]
    rating = real(unit.rating)
    if not all(sound) or not rating or rating <= 0:
        return
    reactances = []
    plain = not any(isinstance(getattr(pairs, pair).value, complex) for pair in PAIRS)
    for pair in PAIRS:
        value, on = getattr(pairs, pair), real(pair_rating(unit, pair))
        part = share(value, pair_rating(unit, pair), _first(unit, pair).voltage)
        if not part or not on:
            return
        reactances.append(part * rating / on * (1.0 if plain else _reactive(value, unit.x_over_r)))
    hl, ht, lt = reactances
    mutual = (hl + ht - lt) / 2
    if min(reactances) > 0 and hl * ht - mutual**2 > 1e-9 * hl * ht:
        return
    stated = ", ".join(f"{pair} {said(getattr(pairs, pair))}" for pair in PAIRS[:2])
    base = ", ".join(digits(100 * x) for x in reactances[:2])
    which = "they" if plain else "their reactances"
    subject.error(
        field,
        f"{stated} and lv_tv {said(pairs.lv_tv)} cannot belong to one unit: on {said(unit.rating)} "
        f"{which} are {base} and {digits(100 * lt)} %, and the square root of each must be less than "
        "the sum of the other two; check which rating each refers to (impedance_on)",
    )


def _reactive(value: Quantity, x_over_r: float | None) -> float:
    """Return the reactance as a fraction of the impedance."""
    if isinstance(value.value, complex):
        return value.value.imag / abs(value.value)
    return 1.0 if x_over_r is None or x_over_r <= 0 else x_over_r / math.hypot(1.0, x_over_r)


def pair_rating(unit: Transformer, pair: str) -> Quantity:
    """Return the rating that the per cent impedance of a pair refers to."""
    stated = getattr(unit.impedance_on or PairRatings(), pair)
    return unit.rating if stated is None else stated


def _first(unit: Transformer, pair: str) -> Winding:
    """Return the winding from whose side the ohms of a pair are seen: the one named first."""
    return unit.lv if pair == "lv_tv" else unit.hv


def share(value: Quantity, rating: Quantity | None, voltage: Quantity) -> float | None:
    """Return a magnitude per unit on ``rating``, ohms being those seen from ``voltage``."""
    size, power, volts = abs(value.value), real(rating), real(voltage)
    if value.dimension == "ratio":
        return size
    return size * power / volts**2 if power and power > 0 and volts and volts > 0 else None
