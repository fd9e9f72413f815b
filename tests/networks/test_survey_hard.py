"""The survey of a large network with all that is awkward, against dense inverses and a solve a bus."""

from __future__ import annotations

from typing import Any

import numpy as np
import pytest
from msgspec.structs import replace

from seqfault import Network, case_from_tree, contributions, levels
from seqfault.networks import factors, survey
from seqfault.networks.factors import SequenceNetworks
from tests.bench.grid import grid

MIDDLE = "between reactors"
LONE = "behind a delta"
CAPACITOR = "j2 ohm"  # a case file has no series capacitors: the sign is turned in the model


def awkward(seed: int) -> dict[str, Any]:
    """A grid with coupled lines and shared star points, and with what it does not draw by itself."""
    tree = grid(900, seed)
    mesh = [name for name, volt in tree["buses"].items() if volt == "110 kV"]
    ends = np.random.default_rng(seed).choice(len(mesh), 14, replace=False).tolist()
    reactors = tree["series_reactors"] = {}

    def reactor(i: str, j: str, ohm: str) -> None:
        reactors[f"X{len(reactors)}"] = {"from": i, "to": j, "impedance": ohm}

    for k in range(4):  # x, x and −x/2: their node has no admittance of its own
        name = f"{MIDDLE} {k}"
        tree["buses"][name] = "110 kV"
        for end, ohm in zip(ends[3 * k : 3 * k + 3], ("j4 ohm", "j4 ohm", CAPACITOR), strict=True):
            reactor(mesh[end], name, ohm)
    reactor(mesh[ends[12]], mesh[ends[13]], CAPACITOR)  # a series capacitor across the mesh
    for k in range(3):
        tree["buses"][f"{LONE} {k}"] = "11 kV"
        tree["transformers"][f"to {LONE} {k}"] = {
            "vector_group": "YNd1",
            "rating": "20 MVA",
            "impedance": "10 %",
            "x_over_r": 20,
            "z0_over_z1": 0.9,
            "hv": {"bus": mesh[ends[k]], "voltage": "110 kV", "neutral": "solid"},
            "lv": {"bus": f"{LONE} {k}", "voltage": "11 kV"},
        }
        # Both star points of a star-star unit on one resistor.
        tree["buses"][f"shared {k}"] = "11 kV"
        tree["neutrals"][f"common {k}"] = {"current": "400 A", "voltage": "11 kV"}
        tree["transformers"][f"to shared {k}"] = tree["transformers"][f"to {LONE} {k}"] | {
            "vector_group": "YNyn0",
            "magnetic_circuit": "five-limb",
            "hv": {"bus": mesh[ends[k]], "voltage": "110 kV", "neutral": f"common {k}"},
            "lv": {"bus": f"shared {k}", "voltage": "11 kV", "neutral": f"common {k}"},
        }
    return tree


def with_capacitors(network: Network) -> Network:
    """The reactances of the series reactors that stand for capacitors turned to negative ones."""
    lines, records = network.model.lines, network.case.series_reactors
    turned = [
        k for k, n in enumerate(lines.names) if n in records and records[n].impedance.text == CAPACITOR
    ]
    assert len(turned) == 5
    series = lines.series.copy()
    series[:, turned] *= -1
    network.model = replace(network.model, lines=replace(lines, series=series))
    network.sequences = SequenceNetworks(network.model)
    return network


@pytest.fixture(scope="module", params=[1, 2])
def pair(request: pytest.FixtureRequest) -> tuple[Network, Network]:
    """The network by its selected inverse, and by dense ones."""
    case = case_from_tree(awkward(request.param))
    ours, theirs = with_capacitors(Network(case)), with_capacitors(Network(case))
    with pytest.MonkeyPatch.context() as patch:
        patch.setattr(survey, "_by_columns", None)  # nothing is solved again column by column
        ours.sequences.survey()
    with pytest.MonkeyPatch.context() as patch:
        patch.setattr(factors, "DENSE", 10**9)
        theirs.sequences.survey()
    return ours, theirs


def test_the_network_has_what_it_is_for(pair: tuple[Network, Network]) -> None:
    network = pair[0]
    model, zero = network.model, network.sequences[0]
    ends = model.lines.nodes
    coupled = [ends[:, group.line] for group in model.lines.coupled]
    assert any(len(np.unique(nodes)) == nodes.size for nodes in coupled)  # without a common bus
    volts: dict[int, set[float]] = {}
    for sets in model.winding_sets:
        at = (sets.star >= 0) & (model.stars.node[sets.star] >= 0)
        for star, bus in zip(sets.star[at].tolist(), sets.bus[at].tolist(), strict=True):
            volts.setdefault(star, set()).add(float(model.nominal[bus]))
    assert any(len(levels_of_one) > 1 for levels_of_one in volts.values())  # shared between voltages
    y = network.sequences[1].stamps
    across, own = np.zeros(y.size), np.zeros(y.size, complex)
    np.add.at(across, y.row[y.row != y.column], np.abs(y.value[y.row != y.column]))
    np.add.at(own, y.row[y.row == y.column], y.value[y.row == y.column])
    middle = [model.node[model.index[f"{MIDDLE} {k}"]] for k in range(4)]
    assert (np.abs(own + y.weak)[middle] < 1e-9 * across[middle]).all()
    lone = [model.node[model.index[f"{LONE} {k}"]] for k in range(3)]
    assert not np.isin(zero.stamps.row, lone).any()
    assert (zero.stamps.weak[lone] == 0).all()


def test_dense_inverses(pair: tuple[Network, Network]) -> None:
    ours, theirs = (network.sequences.survey() for network in pair)
    assert ours.worst.max() < 1e-10
    assert (ours.pattern.row == theirs.pattern.row).all()
    assert (ours.infinite == theirs.infinite).all()
    for s in range(3):
        bounded = ~ours.infinite[s]
        a, b = ours.impedance[s, bounded], theirs.impedance[s, bounded]
        assert np.abs(a - b).max() <= 1e-10 * np.abs(b).max()
        assert np.abs(ours.above[s] - theirs.above[s]).max() <= 1e-10 * np.abs(theirs.above[s]).max()


def test_a_solve_a_bus(pair: tuple[Network, Network]) -> None:
    network = pair[0]
    found = network.sequences.survey()
    for s in range(3):
        factor = network.sequences[s]
        nodes = np.arange(network.model.common)
        columns = factor.columns(nodes)
        z = np.array([factor.port_impedance(nodes[k : k + 1], columns[:, k : k + 1])[0, 0] for k in nodes])
        assert np.abs(found.impedance[s, nodes] - z).max() <= 1e-10 * np.abs(z).max()


def test_levels_and_contributions(pair: tuple[Network, Network]) -> None:
    ours, theirs = (levels(network) for network in pair)
    for name in ("k3", "k2", "k2e", "k1"):
        assert getattr(ours, name) == pytest.approx(getattr(theirs, name), rel=1e-9, abs=1e-9)
    one, other = (contributions(network) for network in pair)
    assert one.element == other.element
    for name in ("k3", "k2", "k2e", "k1", "earth", "k1_earth"):
        a, b = getattr(one, name), getattr(other, name)
        assert a == pytest.approx(b, rel=1e-8, abs=1e-8 * np.nanmax(b), nan_ok=True)
