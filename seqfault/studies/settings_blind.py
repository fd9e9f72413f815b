"""Places no relay sees, and relays that an earth fault on the other side of a delta does not reach."""

from __future__ import annotations

from collections.abc import Iterator

import msgspec
import numpy as np

from seqfault.equations.fault_resistance import EARTH_KINDS, at_resistance
from seqfault.errors import quoted
from seqfault.studies.settings_states import State, States
from seqfault.studies.settings_view import View

_ZERO = ("residual", "core-balance", "neutral", "neutral-voltage")
_NOTHING = 1e-6


class BlindPlace(msgspec.Struct, frozen=True):
    """A fault that no relay picks up, in one state: the least ``resistance`` (ohm) of those demanded.

    ``owner`` what the place is a part of, ``current`` A into earth. ``guarded`` tells whether any relay
    of the case stands in the network of the place: only then is it the study's to judge.
    """

    place: str
    owner: str
    opened: str
    kind: str
    resistance: float
    state: str
    current: float
    guarded: bool
    reason: str


class BlindRelay(msgspec.Struct, frozen=True):
    """A relay that shows nothing of earth faults at ``places``, which transformers ``through`` part off."""

    relay: str
    places: tuple[str, ...]
    through: tuple[str, ...]
    state: str
    reason: str


def blind_places(study: States) -> tuple[BlindPlace, ...]:
    """Every place and kind that no relay picks up through a resistance that must be seen."""
    return tuple(blind for state in study.states for blind in _places(state))


def _places(state: State) -> Iterator[BlindPlace]:
    forms = state.forms
    ohms = np.array(sorted(set(state.protection.demands.fault_resistances)))
    if not len(forms.spot):
        return
    seen = np.zeros((len(forms.spot), len(ohms)), bool)
    share = np.zeros((len(forms.spot), len(ohms)))
    nearest = np.full((len(forms.spot), len(ohms)), -1)
    views = list(state.views.values())
    for k, view in enumerate(views):
        pickup = view.relay.pickup.primary
        if pickup is None:
            continue
        multiple = view.seen(ohms)[0] / pickup
        nearest = np.where(multiple > share, k, nearest)
        share = np.maximum(share, multiple)
        seen |= multiple >= 1
    home, standing = forms.probes[0][0].galvanic, set(state.at_home.values())
    told: set[tuple[str, str, str]] = set()
    for case in np.flatnonzero(~seen.all(axis=1)).tolist():
        spot = forms.spots[int(forms.spot[case])]
        kind = EARTH_KINDS[int(forms.kind[case])]
        key = (spot.place, spot.opened, kind)
        if key in told:
            continue
        told.add(key)
        k = int(np.flatnonzero(~seen[case])[0])
        i0 = at_resistance(forms.current[0, case, 0], forms.bottom[0, case], ohms[k : k + 1])
        current = 3 * abs(complex(i0[0]))
        who = views[int(nearest[case, k])] if nearest[case, k] >= 0 else None
        yield BlindPlace(
            place=spot.place,
            owner=spot.owner,
            opened=spot.opened,
            kind=kind,
            resistance=float(ohms[k]),
            state=state.name,
            current=current,
            guarded=home[int(forms.spot[case])] in standing,
            reason=_reason(state, case, current, who, float(share[case, k])),
        )


def _reason(state: State, case: int, current: float, who: View | None, share: float) -> str:
    home = state.forms.probes[0][0].galvanic[int(state.forms.spot[case])]
    here = [name for name, label in state.at_home.items() if label == home]
    if not here and current > _NOTHING:
        return (
            "no relay stands in its network, and its transformers pass none of its zero-sequence current to"
            " another"
        )
    if who is not None and share > _NOTHING:
        relay = who.relay
        size = share * float(relay.pickup.primary or 0)
        return (
            f"the fault sends {_ampere(current)} A into earth; nearest is {relay.name} with {size:.3g}"
            f" {relay.unit} of its pickup of {float(relay.pickup.primary or 0):.3g} {relay.unit}"
        )
    if current <= _NOTHING:
        return "nothing joins this network to earth, so no earth current flows that a relay could see"
    resting = [
        f"{name}: {state.protection.relays[name].blind or 'out of service'}"
        for name in here
        if name not in state.views
    ]
    opened = [
        name for name in here if name in state.views and state.views[name].relay.pickup.primary is None
    ]
    said = "; ".join([*resting, *(f"{name}: its pickup is to be set" for name in opened)])
    return (
        f"the fault sends {_ampere(current)} A into earth, and none of it, in its direction, passes a relay"
        + (f" ({said})" if said else "")
    )


def blind_relays(study: States) -> tuple[BlindRelay, ...]:
    """Relays that earth faults behind a transformer do not reach, once for all states alike."""
    found: dict[tuple[str, tuple[str, ...]], BlindRelay] = {}
    for state in study.states:
        for each in _relays(state):
            found.setdefault((each.relay, each.places), each)
    return tuple(found.values())


def _relays(state: State) -> Iterator[BlindRelay]:
    model, forms = state.network.model, state.forms
    label_of = {bus: int(model.galvanic[model.node[k]]) for bus, k in model.index.items()}
    for name, view in state.views.items():
        home = state.at_home.get(name)
        if view.relay.measures not in _ZERO or home is None or not len(forms.spot):
            continue
        for unit, hv, lv, group in _units(state):
            if label_of.get(hv) != home or label_of.get(lv) in (home, None):
                continue
            there = [
                k
                for k, at in enumerate(forms.spot.tolist())
                if forms.probes[0][0].galvanic[at] == label_of[lv] and not forms.spots[at].opened
            ]
            if not there or float(view.sizes(np.zeros(1))[:, there].max(initial=0.0)) > _NOTHING:
                continue
            buses = tuple(bus for bus, label in label_of.items() if label == label_of[lv])
            yield BlindRelay(
                relay=name,
                places=buses,
                through=(unit,),
                state=state.name,
                reason=(
                    f"{group} of {quoted(unit)}: an earth fault on its {lv} side is no zero-sequence"
                    f" current on its {hv} side"
                ),
            )


def _units(state: State) -> Iterator[tuple[str, str, str, str]]:
    """Transformers in service with the buses of their hv and lv winding, each pair of sides once."""
    for name, unit in state.case.transformers.items():
        if unit.out:
            continue
        for winding in (unit.lv, unit.tv):
            if winding is not None:
                yield name, unit.hv.bus, winding.bus, unit.vector_group


def _ampere(value: float) -> str:
    """Three figures without an exponent."""
    return f"{float(f'{value:.3g}'):.15g}"
