"""Verdicts of a setting study, and the case of the study that decides each."""

from __future__ import annotations

import math
from typing import Literal

import msgspec

from seqfault.equations.fault_resistance import EARTH_KINDS
from seqfault.studies.settings_view import View

Verdict = Literal["pass", "tight", "fail", "not proven"]
WORST: tuple[Verdict, ...] = ("pass", "tight", "not proven", "fail")
_SAME = 1e-9


class Situation(msgspec.Struct, frozen=True):
    """One case of a study.

    ``place`` of the fault, ``opened`` the line end whose breaker is open, or empty; ``resistance`` ohm;
    ``state`` the operating state; ``resistors`` cold or hot; ``machine`` the reactance used.
    """

    place: str
    opened: str
    kind: str
    resistance: float
    state: str
    resistors: str
    machine: str

    def __str__(self) -> str:
        ohms = f" through {float(f'{self.resistance:.4g}'):g} ohm" if self.resistance else ""
        opened = f" with {self.opened} open" if self.opened else ""
        return (
            f"{self.kind}{ohms} at {self.place}{opened}, state {self.state}, resistors {self.resistors},"
            f" {self.machine}"
        )


def situation(view: View, case: int, resistance: float, machine: int, kind: str = "") -> Situation:
    """The ``case`` of ``view``; ``kind`` where it is none of the faults to earth."""
    spot = view.spots[int(view.spot[case])]
    return Situation(
        place=spot.place,
        opened=spot.opened,
        kind=kind or EARTH_KINDS[int(view.kind[case])],
        resistance=float(resistance),
        state=view.state,
        resistors="hot" if view.hot[case] else "cold",
        machine=view.machines[machine],
    )


def judged(ratio: float, demand: float, tight: float) -> Verdict:
    """``ratio`` against ``demand``: tight where it is met by less than the share ``tight``."""
    if math.isnan(ratio) or ratio < demand * (1 - _SAME):
        return "fail"
    return "pass" if ratio >= demand * (1 + tight) * (1 - _SAME) else "tight"


def doubted(verdict: Verdict, doubts: tuple[str, ...]) -> Verdict:
    """``verdict`` with what it rests on in view: what fails on assumed data fails."""
    return "not proven" if doubts and verdict != "fail" else verdict


def worst(verdicts: tuple[Verdict, ...]) -> Verdict:
    """The worst of ``verdicts``."""
    return max(verdicts, key=WORST.index, default="pass")
