"""Fault levels of chosen buses with elements out, one outage after the other, from one factorisation."""

from __future__ import annotations

from collections.abc import Callable, Sequence

import msgspec
import numpy as np
from msgspec.structs import replace

from seqfault.case.places import TABLES
from seqfault.case.records import Case
from seqfault.case.scenarios import in_state
from seqfault.equations.iec60909 import bolted_currents
from seqfault.equations.per_unit import base_impedance
from seqfault.errors import CaseError, NoAnswerError, RequestError
from seqfault.faults.network import Network
from seqfault.model.build import build_model
from seqfault.model.elements import Bools, Complex, Floats, Ints, Model
from seqfault.networks.factors import SequenceNetworks
from seqfault.networks.parting import Joined
from seqfault.networks.removal import SequenceRemovals, driving_points

CURRENTS = ("k3", "k2", "k2e", "k1", "k2e_earth")
ROUNDING = 1e-9
TOGETHER = 1000
"""Outages whose nodes are solved for at once."""

Outage = tuple[str, ...]


class OutageSurvey(msgspec.Struct, frozen=True, eq=False):
    """Bolted-fault currents at chosen buses: of the network as it stands, and without each outage.

    ``current`` (outages + 1, currents, buses) A, magnitudes in the order of ``CURRENTS``, the network as
    it stands first, nan where a bus is dead; ``dead`` (outages + 1, buses). ``rebuilt`` gives
    the outages that no update answers and why; ``failed`` those that have no answer and why.
    """

    state: str
    buses: tuple[str, ...]
    nominal: Floats
    outages: tuple[Outage, ...]
    current: Floats
    dead: Bools
    rebuilt: tuple[tuple[Outage, str], ...]
    failed: tuple[tuple[Outage, str], ...]
    warnings: tuple[str, ...]

    def extreme(self, least: bool) -> tuple[Floats, Ints]:
        """Greatest or ``least`` of each current (currents, buses) A, and the outage that gives it.

        Outage 0 is the network as it stands; of what differs by rounding the first counts. nan and −1 at
        buses that are dead in every state.
        """
        lost = -np.inf if not least else np.inf
        known = np.where(np.isnan(self.current), lost, self.current)
        end = known.min(axis=0) if least else known.max(axis=0)
        near = known <= end * (1 + ROUNDING) if least else known >= end * (1 - ROUNDING)
        at = np.asarray(near.argmax(axis=0), np.int64)
        value = np.take_along_axis(self.current, at[None], axis=0)[0]
        return value, np.where(np.isnan(value), -1, at)


def single_outages(network: Network, table: str) -> tuple[Outage, ...]:
    """Every single outage of ``table``: ``lines`` (in service, reactors not among them) or
    ``transformers``."""
    records = {"lines": network.case.lines, "transformers": network.case.transformers}
    return tuple((name,) for name, record in records[table].items() if not record.out)


def survey_outages(
    network: Network,
    outages: Sequence[Outage],
    at: Sequence[str] | None = None,
    rebuild: Callable[[Outage], Case] | None = None,
    done: Callable[[int], None] | None = None,
) -> OutageSurvey:
    """Fault levels at the buses ``at`` (all where None) with each of ``outages`` in turn.

    ``rebuild`` gives the case without an outage, for those that no update answers; by default that of
    the scenario ``network`` is in. ``done`` is told of each outage by its number.
    Raises ``RequestError`` for buses and elements that are not there.
    """
    buses = tuple(network.buses if at is None else dict.fromkeys(at))
    _check(network, outages, buses)
    work = _Survey(network, buses, rebuild or _rebuild_of(network))
    for start in range(0, len(outages), TOGETHER):
        work.run(outages[start : start + TOGETHER], done)
    model = network.model
    return OutageSurvey(
        state=model.state,
        buses=buses,
        nominal=model.nominal[work.index],
        outages=tuple(outages),
        current=np.stack(work.current),
        dead=np.stack(work.dead),
        rebuilt=tuple(work.rebuilt),
        failed=tuple(work.failed),
        warnings=tuple(dict.fromkeys(work.warnings)),
    )


def _check(network: Network, outages: Sequence[Outage], buses: Sequence[str]) -> None:
    for bus in buses:
        place = network.place(bus)
        if place.element:
            raise RequestError(f'--at "{bus}": a bus is wanted here, no terminal and no point of a line')
    known = {name for name, _ in _tables(network.case)}
    problems = []
    for names in outages:
        for name in names:
            if name not in known:
                problems.append(_unknown(name, known))
        if len(set(names)) < len(names) or not names:
            problems.append(f"outage {', '.join(names)}: each element once is wanted")
    if problems:
        raise RequestError("\n".join(dict.fromkeys(problems)))


def _unknown(name: str, known: set[str]) -> str:
    from seqfault.case.wording import Spelling
    from seqfault.errors import quoted

    return f"outage {quoted(name)}: there is no element of this name in service{Spelling(known).hint(name)}"


def _tables(case: Case) -> list[tuple[str, str]]:
    """Elements in service that an outage may name, and their tables."""
    tables = (*TABLES, "converters")
    return [(name, t) for t in tables for name, record in getattr(case, t).items() if not record.out]


def _rebuild_of(network: Network) -> Callable[[Outage], Case]:
    case = network.case

    def rebuilt(outage: Outage) -> Case:
        if case.state != "base" and case.state not in case.scenarios:
            raise RequestError(
                f"state {case.state}: give `rebuild`, the case without an outage, for a state that no"
                " scenario of the case names"
            )
        return replace(in_state(case, case.state, without=outage), prefault=case.prefault)

    return rebuilt


class _Survey:
    """Outages worked through, a few hundred at a time."""

    def __init__(self, network: Network, buses: tuple[str, ...], rebuild: Callable[[Outage], Case]) -> None:
        self._network, self._rebuild, self._buses = network, rebuild, buses
        model = network.model
        self.index = np.array([model.index[bus] for bus in buses], np.int64)
        node = model.node[self.index]
        self._removals = [SequenceRemovals(model, network.sequences[s], s, node) for s in range(3)]
        self._volts = np.abs(model.before[self.index]) * model.nominal[self.index] / np.sqrt(3)
        self._ohm = base_impedance(model.nominal[self.index], model.base_power)
        self._joined, self._supplied = _live_parts(model)
        self._updatable = _updatable(network.case)
        live = model.live[self.index]
        whole, infinite = np.stack([r.whole for r in self._removals]), [r.infinite for r in self._removals]
        self._infinite = np.stack(infinite)
        self.current = [self._currents(whole, self._infinite, live)]
        self.dead: list[Bools] = [~live]
        self.rebuilt: list[tuple[Outage, str]] = []
        self.failed: list[tuple[Outage, str]] = []
        self.warnings: list[str] = []

    def run(self, outages: Sequence[Outage], done: Callable[[int], None] | None) -> None:
        """Answer ``outages`` and keep what they give."""
        can = [] if self._network.loading is not None else [o for o in outages if self._updatable(o)]
        for removal in self._removals:
            removal.prepare(can)
        for outage in outages:
            if done is not None:
                done(len(self.current))
            if outage not in can:
                loaded = self._network.loading is not None
                self._whole(outage, "the loaded state changes" if loaded else "no line or transformer")
                continue
            live = self._live(outage)
            z = np.zeros((3, len(self.index)), complex)
            why = ""
            for s, removal in enumerate(self._removals):
                found = removal.without(outage, live)
                if isinstance(found, str):
                    why = found
                    break
                z[s] = found
            if why or not np.isfinite(z[:, live]).all():
                self._whole(outage, why or "it has no update")
                continue
            self.current.append(self._currents(z, self._infinite, live))
            self.dead.append(~live)

    def _live(self, outage: Outage) -> Bools:
        model = self._network.model
        label = self._joined.without(outage)
        return np.isin(label[model.node[self.index]], label[self._supplied])

    def _currents(self, z: Complex, infinite: Bools, live: Bools, volts: Floats | None = None) -> Floats:
        """Currents (currents, buses) A of the per-unit impedances ``z`` (3, buses)."""
        closed = live & ~(infinite[1] | infinite[2])
        z = z * self._ohm
        y0 = np.zeros(len(live), complex)
        joined = ~infinite[0] & (z[0] != 0)
        y0[joined] = 1 / z[0, joined]
        one, two = np.where(closed, z[1], 1), np.where(closed, z[2], 1)
        c = bolted_currents(np.where(closed, self._volts if volts is None else volts, 0), one, two, y0)
        k2e = np.maximum(np.abs(c.k2e_b), np.abs(c.k2e_c))
        out = np.stack([np.abs(c.k3), np.abs(c.k2), k2e, np.abs(c.k1), np.abs(c.k2e_earth)])
        out[:, ~live] = np.nan
        return out

    def _whole(self, outage: Outage, why: str) -> None:
        """Build the network without ``outage`` and survey it."""
        self.rebuilt.append((outage, why))
        current = np.full((len(CURRENTS), len(self.index)), np.nan)
        dead = np.ones(len(self.index), bool)
        try:
            model, networks = self._built(self._rebuild(outage))
            here = np.array([k for k, bus in enumerate(self._buses) if bus in model.index], np.int64)
            at = np.array([model.index[self._buses[k]] for k in here.tolist()], np.int64)
            found = [driving_points(networks[s], model.node[at]) for s in range(3)]
        except (CaseError, NoAnswerError) as error:
            self.failed.append((outage, str(error)))
        else:
            self.warnings += model.warnings
            z, infinite = np.zeros((3, len(dead)), complex), np.ones((3, len(dead)), bool)
            z[:, here], infinite[:, here] = [f[0] for f in found], [f[1] for f in found]
            dead[here] = ~model.live[at]
            volts = self._volts.copy()
            volts[here] = np.abs(model.before[at]) * model.nominal[at] / np.sqrt(3)
            current = self._currents(z, infinite, ~dead, volts)
        self.current.append(current)
        self.dead.append(dead)

    def _built(self, case: Case) -> tuple[Model, SequenceNetworks]:
        """Model and networks of ``case``, an outage of the network at hand."""
        whole = self._network
        if whole.loading is not None:
            network = Network(case, machine=whole.machine)
            return network.model, network.sequences
        base = (whole.case, whole.model) if whole.case.state == "base" else None
        model = build_model(case, whole.machine, base)
        return model, SequenceNetworks(model)


def _updatable(case: Case) -> Callable[[Outage], bool]:
    """Whether an outage takes out nothing but lines, reactors and transformers."""
    known = set(case.lines) | set(case.transformers) | set(case.series_reactors)
    return lambda outage: all(name in known for name in outage)


def _live_parts(model: Model) -> tuple[Joined, Ints]:
    """What lines and transformers join, and the nodes of infeeds and generators."""
    lines = model.lines
    through = np.flatnonzero(lines.closed.all(axis=0) & (lines.nodes >= 0).all(axis=0))
    names = [lines.names[k] for k in through.tolist()]
    ends = [lines.nodes[:, through]]
    supplied = [model.sources.node[np.array([k == "infeed" for k in model.sources.kinds], bool)]]
    for sets in model.winding_sets:
        if sets.kind_of_record == "generator":
            supplied.append(sets.node[:, 0])
        for other in range(1, sets.node.shape[1]):
            ends.append(np.stack([sets.node[:, 0], sets.node[:, other]]))
            names.extend(sets.names)
    return Joined(model.common, np.concatenate(ends, axis=1), names), np.concatenate(supplied)
