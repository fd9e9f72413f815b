"""How much of a generator's star winding an earth-fault pickup sees, and the resistor that covers more."""

from __future__ import annotations

import difflib

import msgspec
import numpy as np

from seqfault.equations.per_unit import base_impedance
from seqfault.equations.winding_cover import resistor_for_share, uncovered_share
from seqfault.errors import NoAnswerError, RequestError, quoted
from seqfault.studies.neutral_states import NeutralState, NeutralStates


class WindingCover(msgspec.Struct, frozen=True):
    """Shares of a winding, from its star point, whose earth faults stay below ``pickup`` (A, primary).

    ``simple`` by x = I |Zn|/V, ``unprotected`` with the winding's own impedance ``winding`` (ohm, the
    whole of it), 1 where nothing is seen. ``neutral`` ohm, ``voltage`` V rated phase voltage, ``machine``
    the reactance used. ``cover`` the share wanted, ``resistor`` ohm that gives it, or None.
    """

    generator: str
    scenario: str
    pickup: float
    voltage: float
    neutral: complex
    winding: complex
    machine: str
    simple: float
    unprotected: float
    cover: float | None
    resistor: float | None


def winding_cover(
    neutral: NeutralStates, generator: str, pickup: float, cover: float | None = None
) -> WindingCover:
    """Cover of the winding of ``generator``, whose star point the neutral earths.

    ``pickup`` A primary in the neutral, ``cover`` the share of the winding wanted. The machine alone
    feeds a fault in its own winding: the part between star point and fault drives the current of the
    neutral. Raises ``RequestError`` where the generator is not there or not on this neutral,
    ``NoAnswerError`` where no resistor gives the cover.
    """
    state = _with_machine(neutral, generator)
    model = state.network.model
    sets = next(s for s in model.winding_sets if s.kind_of_record == "generator")
    k = sets.names.index(generator)
    voltage = float(sets.rated[k, 0] / np.sqrt(3))
    base = float(base_impedance(model.nominal[sets.bus[k, 0]], model.base_power))
    winding = complex(base / sets.leakage[1, k, 0, 0])
    resistor = None
    if cover is not None:
        try:
            resistor = resistor_for_share(pickup, 1 - cover, voltage, winding)
        except ValueError:
            raise NoAnswerError(
                f"--cover: no resistor covers {100 * cover:g} % of {quoted(generator)} with a pickup of"
                f" {pickup:g} A; its winding alone drives no more than {voltage / abs(winding):.4g} A"
                " through a fault in it"
            ) from None
    z = state.ohms
    return WindingCover(
        generator=generator,
        scenario=state.name,
        pickup=pickup,
        voltage=voltage,
        neutral=z,
        winding=winding,
        machine=model.machine,
        simple=pickup * abs(z) / voltage,
        unprotected=uncovered_share(pickup, z.real, voltage, winding, reactor=z.imag),
        cover=cover,
        resistor=resistor,
    )


def _with_machine(neutral: NeutralStates, generator: str) -> NeutralState:
    """The first state in which the generator runs on this neutral."""
    known = neutral.states[0].network.case.generators
    if generator not in known:
        near = difflib.get_close_matches(generator, known, n=1, cutoff=0.5)
        hint = f"; did you mean {quoted(near[0])}?" if near else ""
        raise RequestError(f"--winding {quoted(generator)}: no generator has this name{hint}")
    on_it = [s for s in neutral.states if s.network.case.generators[generator].neutral == neutral.name]
    if not on_it:
        has = known[generator].neutral or "isolated"
        raise RequestError(
            f"--winding {quoted(generator)}: its star point is {quoted(has)}, not {quoted(neutral.name)}"
        )
    for state in on_it:
        for sets in state.network.model.winding_sets:
            if sets.kind_of_record == "generator" and generator in sets.names:
                return state
    raise RequestError(
        f"--winding {quoted(generator)}: this generator is out of service in every state asked for;"
        " name one with --scenario"
    )
