"""What an earth-fault current rests on and nobody has stated: neutrals, z0, magnetic circuits, c0."""

from __future__ import annotations

from collections.abc import Iterator

import msgspec
import numpy as np

from seqfault.case.records import Case
from seqfault.case.vector_group import parse_vector_group
from seqfault.errors import quoted
from seqfault.model.elements import Model

_SIGNS = ("neutral not stated", "z0 not stated", "magnetising branch left out", "c0 not stated")


class Doubt(msgspec.Struct, frozen=True):
    """A sentence, and the metallic networks (labels of the model) whose earth currents rest on it."""

    text: str
    networks: frozenset[int]


def doubts_of(model: Model, case: Case) -> tuple[Doubt, ...]:
    """The doubts of one state. Missing c0 does not count where a network is solidly earthed."""
    solid = _solidly_earthed(model)
    out = []
    for assumption in model.assumptions:
        if not any(sign in assumption.text for sign in _SIGNS):
            continue
        for name in assumption.names:
            networks = {
                int(model.galvanic[model.node[model.index[bus]]])
                for bus in _earth_side(case, assumption.record, name)
                if bus in model.index
            }
            if assumption.text.startswith("c0 not stated"):
                networks -= solid
            if networks:
                text = f"{assumption.record} {quoted(name)}: {assumption.text}"
                out.append(Doubt(text, frozenset(networks)))
    return tuple(out)


def _solidly_earthed(model: Model) -> set[int]:
    """Networks with an infeed's or a star point's bolted way to earth."""
    stars = model.stars
    at = [
        int(bus) for bus, z, kind in zip(stars.bus, stars.impedance, stars.kinds, strict=True)
        if z == 0 and kind != "isolated"
    ]  # fmt: skip
    infeeds = np.array([kind == "infeed" for kind in model.sources.kinds], bool)
    earthed = infeeds & (model.sources.admittance[0] != 0)
    at += model.sources.bus[earthed].tolist()
    return {int(model.galvanic[model.node[bus]]) for bus in at}


def _earth_side(case: Case, record: str, name: str) -> Iterator[str]:
    """Buses whose zero sequence the assumed value is a part of: of transformers those behind a star."""
    if record == "transformer":
        unit = case.transformers[name]
        group = parse_vector_group(unit.vector_group)
        for side in ("hv", "lv", "tv"):
            winding = getattr(unit, side)
            if winding is not None and getattr(group, f"{side}_star_point"):
                yield winding.bus
        return
    tables = {
        "generator": case.generators,
        "line": case.lines,
        "earthing transformer": case.earthing_transformers,
        "series reactor": case.series_reactors,
    }
    owner = tables.get(record, {}).get(name)
    for field in ("bus", "from_", "to"):
        bus = getattr(owner, field, None)
        if bus is not None:
            yield bus
