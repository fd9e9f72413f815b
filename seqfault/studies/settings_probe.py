"""What a unit of each sequence current into a fault does at the relays, for every place of a study.

On a flat profile, and with converters left out, the networks are linear and their sequences apart: a
terminal's current of sequence s is a factor times that of the fault. One solved fault a place tells the
factors of all kinds of fault and all fault resistances there.
"""

from __future__ import annotations

from collections.abc import Iterable, Sequence

import msgspec
import numpy as np
from msgspec.structs import replace

from seqfault.case.records import Case
from seqfault.faults.kinds import fault_at
from seqfault.faults.network import Network
from seqfault.faults.solution import FaultSolution
from seqfault.model.context import Machine
from seqfault.model.elements import Bools, Complex, Floats, Ints
from seqfault.studies.settings_columns import ALL, Columns, buses_of, columns, lost_behind, tied, unfed
from seqfault.studies.settings_places import Spot

PROBE = "line-line-ground"
_NOTHING = 1e-10
"""A factor below this share of 1 is rounding."""


class Sites(msgspec.Struct, frozen=True):
    """Where relays look: terminals (element, bus), star points, and the buses whose voltage they take."""

    terminals: tuple[tuple[str, str], ...]
    stars: tuple[str, ...]
    buses: tuple[str, ...]


class Probe(msgspec.Struct, frozen=True, eq=False):
    """The network seen from each live place (p) of ``spots``, and what relays see of its faults.

    ``voltage`` (p,) V before the fault, phase a, at angle 0; ``impedance`` (3, p) ohm, infinite without a
    path; ``terminal`` (3, p, t) current from the bus into the terminal of one circuit or unit, per ampere
    of the same sequence into the fault; ``star`` (p, k) current from earth into the star point, per
    ampere of I0. ``drop`` (3, p, b) ohm: the voltage of a bus falls by it per ampere; ``stood`` (p, b)
    V before the fault. ``share`` (p, b) and ``star_share`` (p, k) V0 there over V0 at the place, for
    places without a path to earth; ``star_drop`` (p, k) ohm. A potential that nothing fixes counts as 0.
    """

    spots: tuple[Spot, ...]
    voltage: Floats
    impedance: Complex
    terminal: Complex
    star: Complex
    drop: Complex
    stood: Complex
    share: Complex
    star_drop: Complex
    star_share: Complex
    galvanic: tuple[int, ...]

    def with_zero_sequence_of(self, other: Probe, at: Ints | None = None) -> Probe:
        """This probe with the zero sequence of ``other``, made for the same places, or for those ``at``."""

        def first(own: Complex, its: Complex) -> Complex:
            made = own.copy()
            made[0, rows] = its[0]
            return made

        def whole(own: Complex, its: Complex) -> Complex:
            made = own.copy()
            made[rows] = its
            return made

        rows = slice(None) if at is None else at
        return replace(
            self,
            impedance=first(self.impedance, other.impedance),
            terminal=first(self.terminal, other.terminal),
            drop=first(self.drop, other.drop),
            star=whole(self.star, other.star),
            share=whole(self.share, other.share),
            star_drop=whole(self.star_drop, other.star_drop),
            star_share=whole(self.star_share, other.star_share),
        )


def flat(case: Case) -> tuple[Case, tuple[str, ...]]:
    """``case`` on a flat profile without converters, and what that leaves out."""
    said = []
    if case.prefault.state != "flat":
        case = replace(case, prefault=replace(case.prefault, state="flat"))
        said.append("loads before the fault left out: settings are studied on a flat profile")
    running = [name for name, record in case.converters.items() if not record.out]
    if running:
        off = {name: replace(record, out=True) for name, record in case.converters.items()}
        case = replace(case, converters=off)
        said.append(f"converters left out, they feed no earth current: {', '.join(running)}")
    return case, tuple(said)


def probe(network: Network, spots: Iterable[Spot], sites: Sites, sequences: Sequence[int] = ALL) -> Probe:
    """Probe ``network``, flat and without converters, at those of ``spots`` that are live.

    Of other than these ``sequences`` nothing is told.
    """
    together: dict[str, list[Spot]] = {}
    for spot in spots:
        together.setdefault(spot.opened, []).append(spot)
    first = 0
    order: list[int] = []
    parts = [_by_solutions(network, (), (), sites)]
    for opened, group in together.items():
        breaks = [opened] if opened else []
        if opened and unfed(network.model, *_other_end(network.case, opened)):
            continue
        here = network.located([spot.place for spot in group], breaks)
        buses = buses_of(here, [spot.place for spot in group])
        lost = lost_behind(here, opened)
        fed = np.flatnonzero(~lost[buses])
        quick = tied(here, buses[fed], sequences)
        some = fed[quick]
        if some.size:
            made = columns(here, buses[some], lost, sites, sequences)
            live = some[made.live].tolist()
            parts.append(_by_columns(network, [group[k] for k in live], made, sites))
            order += [first + k for k in live]
        also = [fault_at(place, "open-three") for place in breaks]
        kept: list[Spot] = []
        solved: list[FaultSolution] = []
        for k in fed[~quick].tolist():
            solution = here.solve([fault_at(group[k].place, PROBE), *also])
            if solution.prefault > 0 and np.abs(solution.current_sequence[1]) > 0:
                order.append(first + k)
                kept.append(group[k])
                solved.append(solution)
        parts.append(_by_solutions(network, kept, solved, sites))
        first += len(group)
    return _joined(parts, np.argsort(np.array(order, np.int64), kind="stable"), sites)


def _by_columns(network: Network, spots: Sequence[Spot], made: Columns, sites: Sites) -> Probe:
    live = made.live
    p = len(spots)

    def clipped(values: Complex) -> Complex:
        return np.asarray(np.where(np.abs(values) > _NOTHING, values, 0))

    return Probe(
        spots=tuple(spots),
        voltage=made.voltage[live],
        impedance=made.impedance[:, live],
        terminal=clipped(made.terminal[:, live]),
        star=clipped(made.star[live]),
        drop=clipped(made.drop[:, live]),
        stood=made.stood[live],
        share=np.zeros((p, len(sites.buses)), complex),
        star_drop=clipped(made.star_drop[live]),
        star_share=np.zeros((p, len(sites.stars)), complex),
        galvanic=_galvanic(network, spots),
    )


def _by_solutions(
    network: Network, kept: Sequence[Spot], solved: Sequence[FaultSolution], sites: Sites
) -> Probe:
    p = len(kept)
    current = np.array([s.current_sequence for s in solved], complex).reshape(p, 3).T
    impedance = np.array([s.impedance for s in solved], complex).reshape(p, 3).T
    path = np.isfinite(impedance[0])
    current[0, ~path] = 0
    return Probe(
        spots=tuple(kept),
        voltage=np.array([s.prefault * s.nominal / np.sqrt(3) for s in solved]),
        impedance=impedance,
        terminal=_terminals(solved, current, sites),
        star=_stars(solved, current, sites),
        **_voltages(solved, current, path, sites),
        galvanic=_galvanic(network, kept),
    )


def _joined(parts: Sequence[Probe], order: Ints, sites: Sites) -> Probe:
    """The parts as one, in ``order`` of their places one after the other."""

    def by(name: str, axis: int) -> Complex:
        return np.asarray(np.concatenate([getattr(x, name) for x in parts], axis).take(order, axis))

    spots = [spot for part in parts for spot in part.spots]
    galvanic = [label for part in parts for label in part.galvanic]
    second = {name: by(name, 1) for name in ("impedance", "terminal", "drop")}
    first = {name: by(name, 0) for name in ("star", "stood", "share", "star_drop", "star_share")}
    return Probe(
        spots=tuple(spots[k] for k in order.tolist()),
        voltage=np.asarray(by("voltage", 0), float),
        galvanic=tuple(galvanic[k] for k in order.tolist()),
        **second,
        **first,
    )


def _galvanic(network: Network, spots: Sequence[Spot]) -> tuple[int, ...]:
    model = network.model
    return tuple(int(model.galvanic[model.node[_home(network, spot)]]) for spot in spots)


def _other_end(case: Case, opened: str) -> tuple[str, str]:
    """The line of a terminal, and the bus at its other end."""
    name, _, bus = opened.rpartition("@")
    line = case.lines[name]
    return name, line.to if line.from_ == bus else line.from_


def _home(network: Network, spot: Spot) -> int:
    """A bus of ``network`` in the metallic network that ``spot`` lies in."""
    place = network.place(spot.place)
    if place.fraction is None:
        return network.model.index[place.bus]
    return network.model.index[network.case.lines[place.element].from_]


def _per(values: Complex, current: Complex) -> Complex:
    """``values`` (..., p, k) over ``current`` (..., p), 0 where no current flows."""
    some = current != 0
    ratio = values / np.where(some, current, 1)[..., None]
    return np.where(some[..., None] & (np.abs(ratio) > _NOTHING), ratio, 0)


def _terminals(solved: Sequence[FaultSolution], current: Complex, sites: Sites) -> Complex:
    seen = np.zeros((3, len(solved), len(sites.terminals)), complex)
    for p, s in enumerate(solved):
        t = s.terminals
        rows = {
            (element, bus): k
            for k, (element, bus, side) in enumerate(zip(t.element, t.bus, t.side, strict=True))
            if not side.startswith("from ")
        }
        for k, site in enumerate(sites.terminals):
            row = rows.get(site)
            if row is not None:
                seen[:, p, k] = t.sequence[:, row] / t.count[row]
    return _per(seen, current)


def _stars(solved: Sequence[FaultSolution], current: Complex, sites: Sites) -> Complex:
    into = np.zeros((len(solved), len(sites.stars)), complex)
    for p, s in enumerate(solved):
        own = {star.name: star.current for star in s.star_points}
        into[p] = [-own.get(name, 0j) for name in sites.stars]
    return _per(into, current[0])


def _voltages(
    solved: Sequence[FaultSolution], current: Complex, path: Bools, sites: Sites
) -> dict[str, Complex]:
    p, b = len(solved), len(sites.buses)
    drop = np.zeros((3, p, b), complex)
    stood, share = np.zeros((p, b), complex), np.zeros((p, b), complex)
    star_drop = np.zeros((p, len(sites.stars)), complex)
    star_share = np.zeros((p, len(sites.stars)), complex)
    for row, s in enumerate(solved):
        at = [s.index.get(bus, -1) for bus in sites.buses]
        there = np.array([k >= 0 for k in at], bool)
        v = s.voltage_sequence[:, at].copy()
        v[0] = np.where(s.undefined[at], np.nan, v[0])
        v[:, ~there] = 0
        stood[row] = np.where(there, s.before[at], 0)
        fallen = np.stack([-v[0], stood[row] - v[1], -v[2]])
        place = s.voltage_sequence[0, s.index[s.faults[0].bus]]
        stars = {star.name: star.voltage for star in s.star_points}
        star_v = np.array(
            [np.nan if (v_ := stars.get(name, 0j)) is None else v_ for name in sites.stars], complex
        )
        drop[:, row] = _per(fallen[:, None], current[:, row, None])[:, 0]
        star_drop[row] = _per(-star_v[None], current[0, row, None])[0]
        if not path[row] and place:
            share[row], star_share[row] = np.nan_to_num(v[0] / place), np.nan_to_num(star_v / place)
    return {
        "drop": drop,
        "stood": stood,
        "share": share,
        "star_drop": star_drop,
        "star_share": star_share,
    }


def machine_states(case: Case) -> tuple[Machine, ...]:
    """The reactances that can be asked for: of motors none but subtransient, of generators as stated."""
    running = [g for g in case.generators.values() if not g.out]
    if not running and all(m.out for m in case.motors.values()):
        return ("subtransient",)
    if not running:
        return ("subtransient", "transient")  # motors have decayed, nothing else differs
    out: list[Machine] = ["subtransient"]
    later: tuple[Machine, ...] = ("transient", "synchronous")
    for state in later:
        if all(getattr(g, state) is not None for g in running):
            out.append(state)
    return tuple(out)
