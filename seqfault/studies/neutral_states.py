"""A neutral in the operating states of a case, and earth faults at one place for any ohms of it."""

from __future__ import annotations

import difflib
from collections.abc import Sequence

import msgspec
import numpy as np

from seqfault.case.records import Neutral
from seqfault.errors import RequestError, quoted
from seqfault.faults.network import Network
from seqfault.faults.neutral_faults import EarthFaults, earth_faults
from seqfault.faults.neutral_ports import NeutralPorts, neutral_ports, open_zero_sequence
from seqfault.faults.neutral_relays import RelayForms, RelayView, relay_currents, relay_forms
from seqfault.model.elements import Complex, Floats, Model

OPEN = complex(np.inf)
NOT_COUNTED = "; it does not count"


class NeutralState(msgspec.Struct, frozen=True, eq=False):
    """The neutral in one state: ``ohms`` of the device as it stands, and the closed forms of it.

    ``network`` has a bus at the faulted place, ``whole`` is the case as it is; ``relays`` what relays see.
    """

    network: Network
    whole: Network
    star: int
    ohms: complex
    ports: NeutralPorts
    relays: tuple[RelayForms, ...] = ()

    @property
    def name(self) -> str:
        """Name of the state."""
        return self.network.model.state

    def faults(self, ohms: Complex) -> EarthFaults:
        """Earth faults at the place with ``ohms`` (n,) of the neutral, infinite open."""
        return earth_faults(self.ports, ohms)

    def seen(self, relay: str, ohms: Complex) -> Floats:
        """Least current (n,) A over both kinds of fault at ``relay``; 0 where it is out of service."""
        forms = next((r for r in self.relays if r.view.name == relay), None)
        if forms is None:
            return np.zeros(len(ohms))
        return np.asarray(np.abs(relay_currents(self.ports, forms, ohms)).min(axis=0))


class NeutralStates(msgspec.Struct, frozen=True, eq=False):
    """A neutral, the faulted ``place`` and the states in which both are in service.

    ``nominal`` V of the star point; ``direction`` 1 where resistors are tried in its place, 1j where
    reactors are; ``left_out`` says which states do not count, and why.
    """

    name: str
    record: Neutral
    place: str
    nominal: float
    direction: complex
    states: tuple[NeutralState, ...]
    left_out: tuple[str, ...]
    relays: tuple[RelayView, ...] = ()

    @property
    def device(self) -> str:
        """What is tried in the neutral's place: resistor or reactor."""
        return "resistor" if self.direction == 1 else "reactor"

    @property
    def phase_voltage(self) -> float:
        """Nominal phase voltage of the star point, V."""
        return float(self.nominal / np.sqrt(3))


def neutral_states(
    networks: Sequence[Network],
    name: str,
    place: str | None = None,
    device: str | None = None,
    relays: Sequence[RelayView] = (),
) -> NeutralStates:
    """The neutral ``name`` in the states of ``networks``, for faults at ``place``.

    ``place`` is the bus of its star point unless stated; ``device``, what is tried in its place, a
    ``resistor`` or a ``reactor`` (unless stated a reactor where the record is one); ``relays`` those whose
    currents are told. Raises ``RequestError``
    where the neutral or the place (a bus, or a point along a line) is not there.
    """
    record = _record(networks, name)
    left_out, kept = [], []
    for network in networks:
        why = _why_not(network, name)
        if why is None:
            star = network.model.stars.names.index(name)
            place = place or network.model.buses[network.model.stars.bus[star]]
            why = _why_not_at(network, place, alone=len(networks) == 1)
        if why is None:
            kept.append((network, star))
        else:
            left_out.append(f"state {network.model.state}: {why}{NOT_COUNTED}")
    if not kept:
        why = "\n".join(f"neutral {quoted(name)}: {text.removesuffix(NOT_COUNTED)}" for text in left_out)
        raise RequestError(f"{why}; --scenario picks another state")
    assert place is not None
    states = []
    for whole, star in kept:
        network, bus = _at(whole, place)
        model = network.model
        zero = open_zero_sequence(model, (star,))
        ports = neutral_ports(network.sequences, zero, model.index[bus], star)
        forms = [relay_forms(zero, ports, view, network.labels) for view in relays]
        seeing = [form for form in forms if form is not None]
        ohms = complex(model.stars.impedance[star])
        states.append(NeutralState(network, whole, star, ohms, ports, tuple(seeing)))
    first = states[0]
    reactor = first.ohms.real == 0 if device is None else device == "reactor"
    return NeutralStates(
        name=name,
        record=record,
        place=place,
        nominal=float(first.network.model.stars.base[first.star]),
        direction=1j if reactor else 1,
        states=tuple(states),
        left_out=tuple(left_out),
        relays=tuple(relays),
    )


def _at(network: Network, place: str) -> tuple[Network, str]:
    """The network with a bus at ``place``, and that bus."""
    read = network.place(place)
    if read.element and read.fraction is None:
        raise RequestError(
            f"place {quoted(place)}: an earth fault at a terminal draws what one at its bus does; name bus"
            f" {quoted(read.bus)}"
        )
    located = network.located([place])
    return located, located.bus_of(read)


def without(state: NeutralState, other: int) -> NeutralState:
    """The same state with the device of star point ``other`` lost."""
    model = state.network.model
    zero = open_zero_sequence(model, (state.star, other))
    ports = neutral_ports(state.network.sequences, zero, state.ports.place, state.star)
    return NeutralState(state.network, state.whole, state.star, state.ohms, ports)


def metal_networks(model: Model, star: int) -> set[int]:
    """Labels of the networks that lines, ties and auto windings join, round all buses of a star point."""
    out: set[int] = set()
    for sets in model.winding_sets:
        out.update(model.wired[sets.node[sets.star == star]].tolist())
    return out


def _record(networks: Sequence[Network], name: str) -> Neutral:
    for network in networks:
        if name in network.case.neutrals:
            return network.case.neutrals[name]
    known = networks[0].case.neutrals
    if not known:
        raise RequestError(f"neutral {quoted(name)}: the case has no record in its table neutrals")
    near = difflib.get_close_matches(name, known, n=1, cutoff=0.5)
    hint = f"did you mean {quoted(near[0])}?" if near else f"there are {', '.join(map(quoted, known))}"
    raise RequestError(f"neutral {quoted(name)}: no record of the table neutrals has this name; {hint}")


def _why_not(network: Network, name: str) -> str | None:
    record = network.case.neutrals.get(name)
    if record is None or record.out:
        return "it is out of service"
    if name not in network.model.stars.names:
        return "no winding in service has its star point there"
    return None


def _why_not_at(network: Network, place: str, alone: bool) -> str | None:
    if alone:
        network.check_place(place)
    if "@" in place:
        try:
            read = network.place(place)
        except RequestError as error:
            return str(error)
        bus = read.bus or network.case.lines[read.element].from_
    elif place not in network.model.index:
        if place not in network.case.buses:
            network.check_place(place)
        return f"the place {quoted(place)} is out of service"
    else:
        bus = place
    if not network.model.live[network.model.index[bus]]:
        return f"the place {quoted(place)} is dead: no infeed or generator is connected"
    return None
