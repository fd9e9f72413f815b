"""The zero-sequence coupling of lines of which some are cut into sections.

The coupling of two lines is spread evenly over its stretch on each: the whole line, or from ``start``
over ``length``. Sections of two lines are coupled by the share of the stretch that they pass side by
side. A coupling whose reactance is negative joins lines that run against each other: the beginning of the
stretch on one is its end on the other.
"""

from __future__ import annotations

from collections.abc import Mapping
from itertools import combinations

import msgspec

from seqfault.case.quantities import Quantity
from seqfault.case.records import Line, MutualCoupling

_NOTHING = 1e-12


class Span(msgspec.Struct, frozen=True):
    """Section ``name`` of a line from ``start`` to ``end``, fractions of the line."""

    name: str
    start: float
    end: float


def split_couplings(
    couplings: Mapping[str, MutualCoupling], lines: Mapping[str, Line], spans: Mapping[str, list[Span]]
) -> dict[str, MutualCoupling]:
    """``couplings`` of ``lines``, those with lines cut into ``spans`` by pairs of sections, in ohm."""
    out: dict[str, MutualCoupling] = {}
    for name, coupling in couplings.items():
        if coupling.out or not any(line in spans for line in coupling.lines):
            out[name] = coupling
            continue
        for a, b in combinations(coupling.lines, 2):
            whole = coupled_ohms(coupling, lines[a], lines[b])
            backwards = whole.imag < 0
            first = [(s.name, _stretch(coupling, lines, (a, b), s)) for s in spans.get(a, [Span(a, 0, 1)])]
            second = [(s.name, _stretch(coupling, lines, (b, a), s)) for s in spans.get(b, [Span(b, 0, 1)])]
            for one, (low, high) in first:
                for other, (start, end) in second:
                    if backwards:
                        start, end = 1 - end, 1 - start
                    share = min(high, end) - max(low, start)
                    if share > _NOTHING:
                        out[f"{name}, {one} and {other}"] = MutualCoupling(
                            lines=(one, other),
                            z0=Quantity(whole * share, "impedance", coupling.z0.text),
                        )
    return out


def coupled_ohms(coupling: MutualCoupling, a: Line, b: Line) -> complex:
    """The whole coupling of two of its lines, ohm."""
    z = complex(coupling.z0.value)
    if not coupling.z0.dimension.endswith("/length"):
        return z
    if coupling.length is not None:
        return z * coupling.length.value.real
    lengths = [line.length.value.real for line in (a, b) if line.length is not None]
    return z * min(lengths)


def _stretch(
    coupling: MutualCoupling, lines: Mapping[str, Line], pair: tuple[str, str], span: Span
) -> tuple[float, float]:
    """Which part of the coupled stretch (0 to 1) a section of the first line of ``pair`` passes."""
    line = pair[0]
    start = (coupling.start or {}).get(line)
    low, high = 0.0, 1.0
    whole = lines[line].length
    if start is not None and whole is not None:
        metres = whole.value.real
        known = [own.value.real for n in pair if (own := lines[n].length) is not None]
        length = coupling.length.value.real if coupling.length is not None else min(known)
        low = start.value.real / metres
        high = min(1.0, low + length / metres)
    if high - low <= _NOTHING:
        return 0.0, 0.0
    scale = 1 / (high - low)
    begin, end = (min(max((x - low) * scale, 0.0), 1.0) for x in (span.start, span.end))
    return begin, end
