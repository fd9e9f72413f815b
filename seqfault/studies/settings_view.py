"""What one relay measures of every earth fault of a state, as forms in the fault resistance.

The axes of a form are machine reactance, case, quantity, and the constant and the share of R
(``equations.fault_resistance``). A case is a place, a kind of earth fault, and resistors hot or cold.
"""

from __future__ import annotations

import math
from collections.abc import Callable, Mapping, Sequence

import msgspec
import numpy as np
from msgspec.structs import replace

from seqfault.equations.fault_resistance import (
    EARTH_KINDS,
    at_resistance,
    displacement_without_path,
    greatest_resistance,
    sequence_forms,
)
from seqfault.equations.relay_curves import multiple_for
from seqfault.equations.symmetrical import TO_PHASES
from seqfault.model.elements import Bools, Complex, Floats, Ints
from seqfault.studies.relays import Relay, operate_times
from seqfault.studies.settings_places import Spot
from seqfault.studies.settings_probe import Probe, Sites

_FLOOR = 1e-9
ACTS_WITHIN = {"subtransient": 0.1, "transient": 1.0}
"""Longest operate time (s) for which a reactance stands (common practice); above both, synchronous."""


class View(msgspec.Struct, frozen=True, eq=False):
    """The cases (n) of one relay in one state.

    ``top`` and ``towards`` (m, n, q, 2), ``bottom`` (m, n, 2); ``towards`` None without a direction.
    ``through`` (m, n, 3, 2) phase currents; ``floor`` (n,) below which what polarises is rounding.
    ``spot`` (n,) into ``spots``, ``kind`` (n,) into ``EARTH_KINDS``, ``hot`` (n,). ``machines`` the m
    reactances.
    """

    relay: Relay
    state: str
    machines: tuple[str, ...]
    spots: tuple[Spot, ...]
    spot: Ints
    kind: Ints
    hot: Bools
    top: Complex
    towards: Complex | None
    through: Complex
    bottom: Complex
    floor: Floats

    def sizes(self, resistance: Floats) -> Floats:
        """What is measured (m, n, r), A or V, through ``resistance`` (r,) or (n, 1, r) ohm.

        0 against a direction.
        """
        value = at_resistance(self.top, self.bottom[:, :, None], resistance)
        size = np.abs(value)
        if self.towards is not None:
            size = np.where(self.points(resistance), size, 0)
        return np.asarray(size.max(axis=2))

    def points(self, resistance: Floats) -> Bools:
        """Whether the direction allows each quantity (m, n, q, r)."""
        assert self.towards is not None
        value = at_resistance(self.top, self.bottom[:, :, None], resistance)
        by = at_resistance(self.towards, self.bottom[:, :, None], resistance)
        work = (value * by.conj()).real
        return np.asarray(
            (np.abs(by) > self.floor[:, None, None]) & (work >= -1e-12 * np.abs(value) * np.abs(by))
        )

    def polarised(self, resistance: Floats) -> Bools:
        """Whether anything polarises the relay (m, n, r); of one without a direction always true."""
        if self.towards is None:
            return np.ones((*self.bottom.shape[:2], np.shape(resistance)[-1]), bool)
        by = at_resistance(self.towards, self.bottom[:, :, None], resistance)
        return np.asarray((np.abs(by) > self.floor[:, None, None]).any(axis=2))

    def seen(self, resistance: Floats) -> tuple[Floats, Ints]:
        """What is measured (n, r) with the reactance of the relay's own time, and which (n, r).

        Where a setting is open no time is known, and the least of all counts.
        """
        sizes = self.sizes(resistance)
        if not self.relay.complete:
            least = sizes.argmin(axis=0)
            return np.take_along_axis(sizes, least[None], axis=0)[0], least
        return own_time(self.relay, self.machines, sizes)

    def only(self, which: Bools) -> View:
        """The view of those cases (n,) that ``which`` tells."""
        return replace(
            self,
            spot=self.spot[which],
            kind=self.kind[which],
            hot=self.hot[which],
            top=self.top[:, which],
            towards=None if self.towards is None else self.towards[:, which],
            through=self.through[:, which],
            floor=self.floor[which],
            bottom=self.bottom[:, which],
        )

    def times(self, resistance: Floats) -> Floats:
        """Operate times (n, r) s; infinite where it rests. Raises ValueError where a setting is open."""
        return operate_times(self.relay, self.seen(resistance)[0])

    def crossings(self, level: float) -> Floats:
        """Greatest R (m, n) ohm at which ``level`` (A or V) is still measured; NaN where at none."""
        return np.asarray(
            np.fmax.reduce(
                greatest_resistance(self.top, self.bottom[:, :, None], level, self.towards), axis=2
            )
        )

    def reach(self) -> tuple[Floats, Ints]:
        """Greatest R (n,) ohm at which the relay still acts, NaN where at none, and the reactance (n,).

        It acts with a reactance where it does so in the time for which that stands; the last of them
        stands for ever, and alone counts where a setting is open.
        """
        found = np.full((len(self.machines), len(self.spot)), np.nan)
        for m, name in enumerate(self.machines):
            last = m == len(self.machines) - 1
            level = level_within(self.relay, math.inf if last else ACTS_WITHIN[name])
            if math.isfinite(level):
                found[m] = self.crossings(level)[m]
        rank = np.where(np.isnan(found), -1, found)
        which = rank.argmax(axis=0)
        return np.take_along_axis(found, which[None], axis=0)[0], which


def level_within(relay: Relay, time: float) -> float:
    """What a relay must measure (A or V) to act within ``time`` (s); infinite where nothing is enough."""
    pickup = relay.pickup.primary
    if pickup is None:
        return math.inf
    if math.isinf(time):
        return pickup
    setting = relay.delay if relay.curve == "definite" else relay.multiplier
    if setting is None:
        return math.inf
    level = pickup * multiple_for(relay.curve, time, setting, least=relay.minimum_time or 0.0)
    fast = None if relay.fast is None else relay.fast.primary
    if fast is not None and (relay.fast_delay or 0.0) <= time:
        level = min(level, fast)
    return level


def own_time(relay: Relay, machines: Sequence[str], sizes: Floats) -> tuple[Floats, Ints]:
    """Of ``sizes`` (m, ...) by reactance the one (...) that fits the relay's own time, and which."""
    last = len(machines) - 1
    which = np.full(sizes.shape[1:], last)
    for m in range(last - 1, -1, -1):
        time = operate_times(relay, sizes[m])
        which = np.where(time <= ACTS_WITHIN[machines[m]], m, which)
    return np.take_along_axis(sizes, which[None], axis=0)[0], which


def sites_of(relays: Mapping[str, Relay], bus_of: Mapping[str, str]) -> Sites:
    """Where ``relays`` look; ``bus_of`` gives the bus of every star point."""
    own = [relay for relay in relays.values() if not relay.blind and not relay.out]
    stars = [relay.star for relay in own if relay.star] + [relay.polarisation for relay in own]
    return Sites(
        terminals=tuple(dict.fromkeys((r.element, r.bus) for r in own if r.element)),
        stars=tuple(dict.fromkeys(name for name in stars if name in bus_of)),
        buses=tuple(dict.fromkeys(r.bus for r in own if r.bus)),
    )


class Forms(msgspec.Struct, frozen=True, eq=False):
    """The cases that all relays of a state share: sequence currents into the fault.

    ``current`` (m, n, 3, 2), ``displaced`` (m, n, 2) V0 at a place without a path, ``bottom`` (m, n, 2);
    ``probes`` by machine and by hot, ``world`` (n,) into the second.
    """

    state: str
    machines: tuple[str, ...]
    probes: tuple[tuple[Probe, ...], ...]
    spots: tuple[Spot, ...]
    spot: Ints
    kind: Ints
    world: Ints
    current: Complex
    displaced: Complex
    bottom: Complex


def forms_of(state: str, machines: Sequence[str], probes: Sequence[Sequence[Probe]]) -> Forms:
    """Both kinds of earth fault at every place, for ``probes`` by machine and by resistors cold, hot."""
    p, k, w = len(probes[0][0].spots), len(EARTH_KINDS), len(probes[0])
    current = np.zeros((len(probes), w, k, p, 3, 2), complex)
    displaced = np.zeros((len(probes), w, k, p, 2), complex)
    bottom = np.zeros((len(probes), w, k, p, 2), complex)
    for m, by_world in enumerate(probes):
        for h, one in enumerate(by_world):
            z0, z1, z2 = one.impedance
            top, low = sequence_forms(z0, z1, z2)
            current[m, h] = np.moveaxis(top, 1, 2) * one.voltage[:, None, None]
            bottom[m, h] = low
            lifted = np.where(np.isfinite(z0), 0, displacement_without_path(z1, z2)) * one.voltage
            displaced[m, h] = lifted[..., None] * low
    n = w * k * p
    world, kind, spot = (each.ravel() for each in np.indices((w, k, p)))
    return Forms(
        state=state,
        machines=tuple(machines),
        probes=tuple(tuple(each) for each in probes),
        spots=probes[0][0].spots,
        spot=spot,
        kind=kind,
        world=world,
        current=current.reshape(len(probes), n, 3, 2),
        displaced=displaced.reshape(len(probes), n, 2),
        bottom=bottom.reshape(len(probes), n, 2),
    )


def view_of(relay: Relay, forms: Forms, sites: Sites, units: int = 1) -> View:
    """What ``relay`` sees of ``forms``; ``units`` alike share a star point it stands at."""

    def gathered(name: str, site: int) -> Complex:
        """A factor of a probe (m, n) or (m, n, 3), at ``site``."""
        rows = []
        for by_world in forms.probes:
            each = np.stack([np.moveaxis(getattr(one, name)[..., site], -1, 0) for one in by_world])
            rows.append(each[forms.world, forms.spot])
        return np.stack(rows)

    def volts(site: int, sequence: int) -> Complex:
        """A voltage of a relay's bus by sequence (m, n, 2)."""
        own = -gathered("drop", site)[..., sequence, None] * forms.current[:, :, sequence]
        if sequence == 0:
            return np.asarray(own + gathered("share", site)[..., None] * forms.displaced)
        if sequence == 1:
            own = own + gathered("stood", site)[..., None] * forms.bottom
        return np.asarray(own)

    def star(name: str) -> Complex:
        return np.asarray(gathered("star", sites.stars.index(name))[..., None] * forms.current[:, :, 0])

    zero = np.zeros((*forms.current.shape[:2], 3, 2), complex)
    through = zero
    if relay.element:
        factor = gathered("terminal", sites.terminals.index((relay.element, relay.bus)))
        sequence = factor[..., None] * forms.current
        through = np.einsum("ps,mnsc->mnpc", TO_PHASES, sequence)
    match relay.measures:
        case "neutral":
            top = star(relay.star)[:, :, None] / units
        case "neutral-voltage":
            if relay.star:
                k = sites.stars.index(relay.star)
                own = -gathered("star_drop", k)[..., None] * forms.current[:, :, 0]
                top = (own + gathered("star_share", k)[..., None] * forms.displaced)[:, :, None]
            else:
                top = volts(sites.buses.index(relay.bus), 0)[:, :, None]
        case "phase":
            top = through
        case "negative-sequence":
            top = sequence[:, :, 2:3]
        case _:
            top = 3 * sequence[:, :, :1]
    towards = None
    by_voltage = relay.polarisation not in sites.stars
    if relay.direction:
        assert relay.characteristic_angle_deg is not None
        sense = 1 if relay.direction == "forward" else -1
        turn = sense * np.exp(1j * math.radians(relay.characteristic_angle_deg))
        by = _polarising(relay, sites, star, volts)
        towards = turn * np.broadcast_to(by, top.shape)
    return View(
        relay=relay,
        state=forms.state,
        machines=forms.machines,
        spots=forms.spots,
        spot=forms.spot,
        kind=forms.kind,
        hot=forms.world == 1,
        top=top,
        towards=towards,
        through=through,
        bottom=forms.bottom,
        floor=_FLOOR * forms.probes[0][0].voltage[forms.spot] if by_voltage else np.zeros(len(forms.spot)),
    )


def _polarising(
    relay: Relay, sites: Sites, star: Callable[[str], Complex], volts: Callable[[int, int], Complex]
) -> Complex:
    """What polarises (m, n, q, 2): −3V0, −V2, crossed phase voltages, or a star point's current.

    That current counts from earth into the star point, as −3V0 does behind a resistor. Phase a is
    polarised by j (V_b − V_c)/√3, which is V_a of a balanced system, and so on; one quantity alone by V1.
    """
    if relay.polarisation in sites.stars:
        return star(relay.polarisation)[:, :, None]
    at = sites.buses.index(relay.bus)
    if relay.polarisation == "negative-sequence-voltage":
        return -volts(at, 2)[:, :, None]
    if relay.polarisation == "phase-voltage":
        if relay.measures != "phase":
            return volts(at, 1)[:, :, None]
        own = np.stack([volts(at, s) for s in range(3)], axis=2)
        phases = np.einsum("ps,mnsc->mnpc", TO_PHASES, own)
        return np.asarray(1j * (np.roll(phases, -1, axis=2) - np.roll(phases, -2, axis=2)) / math.sqrt(3))
    return -3 * volts(at, 0)[:, :, None]
