"""The loaded state against scipy's root finder in polar form, and what has no solution."""

from __future__ import annotations

from typing import Any

import numpy as np
import pytest
import scipy.optimize
from hypothesis import assume, given

from seqfault.case.reader import case_from_tree
from seqfault.errors import CaseError, NoAnswerError
from seqfault.faults.network import Network
from seqfault.networks import factors
from tests.faults.small import PLANT, changed
from tests.strategies import Mesh, loaded_meshes

NOMINAL = 110e3


def tree_of(mesh: Mesh) -> dict[str, Any]:
    return {
        "frequency": "50 Hz",
        "prefault": {"state": "loaded"},
        "buses": {f"b{k}": "110 kV" for k in range(mesh.size)},
        "infeeds": {"Q": {"bus": "b0", "z1": "j5 ohm", "z0": "j5 ohm", "voltage": f"{mesh.held!r} pu"}},
        "generators": {
            f"g{k}": {
                "bus": f"b{bus}", "rating": "100 MVA", "subtransient": "20 %",
                "holds": f"{volts!r} pu", "power": f"{watts!r} W",
            }
            for k, (bus, volts, watts) in enumerate(mesh.generators)
        },
        "loads": {
            f"d{k}": {
                "bus": f"b{bus}", "connection": "star",
                "power": f"{s.real!r}{'-' if s.imag < 0 else '+'}j{abs(s.imag)!r} VA",
            }
            for k, (bus, s) in enumerate(mesh.loads)
        },
        "lines": {
            f"l{k}": {
                "from": f"b{i}", "to": f"b{j}", "z1": f"{z.real!r}+j{z.imag!r} ohm",
                "z0": f"{z.real!r}+j{z.imag!r} ohm", "b1": f"{b!r} S", "b0": f"{b!r} S",
            }
            for k, (i, j, z, b) in enumerate(mesh.lines)
        },
    }  # fmt: skip


def root_of(mesh: Mesh) -> np.ndarray:
    """Voltages (n,) per unit by scipy.optimize.root, from a flat start."""
    n, base = mesh.size, NOMINAL**2 / 100e6
    y = np.zeros((n, n), complex)
    for i, j, z, b in mesh.lines:
        series, shunt = base / z, 0.5j * b * base
        y[[i, j], [i, j]] += series + shunt
        y[[i, j], [j, i]] -= series
    power = np.zeros(n, complex)
    held = np.full(n, np.nan)
    held[0] = mesh.held
    for bus, volts, watts in mesh.generators:
        held[bus] = volts
        power[bus] += watts / 100e6
    for bus, s in mesh.loads:
        power[bus] -= s / 100e6
    turns, sizes = np.arange(1, n), np.flatnonzero(np.isnan(held))

    def volts_of(x: np.ndarray) -> np.ndarray:
        angle, size = np.zeros(n), np.where(np.isnan(held), 1.0, held)
        angle[turns], size[sizes] = x[: n - 1], x[n - 1 :]
        return size * np.exp(1j * angle)

    def lacking(x: np.ndarray) -> np.ndarray:
        v = volts_of(x)
        gap = power - v * (y @ v).conj()
        return np.concatenate([gap.real[turns], gap.imag[sizes]])

    start = np.concatenate([np.zeros(n - 1), np.ones(len(sizes))])
    found = scipy.optimize.root(lacking, start, method="hybr", options={"xtol": 1e-14})
    v = volts_of(found.x)
    assume(np.abs(lacking(found.x)).max() < 1e-10 and np.abs(v).min() > 0.6)
    return v


@pytest.mark.parametrize("dense", [True, False])
@given(mesh=loaded_meshes())
def test_voltages_are_those_of_a_general_root_finder(mesh: Mesh, dense: bool) -> None:
    theirs = root_of(mesh)
    with pytest.MonkeyPatch.context() as patch:
        if not dense:
            patch.setattr("seqfault.networks.power_flow.DENSE", 0)
            patch.setattr(factors, "DENSE", 0)
        ours = Network(case_from_tree(tree_of(mesh))).model.before
    assert np.abs(ours - theirs).max() < 1e-8


LOADED: tuple[tuple[str, Any], ...] = (
    ("prefault", {"state": "loaded"}),
    ("loads", {"D1": {"bus": "low", "power": "300 kVA", "power_factor": 0.9, "connection": "star"}}),
)


def test_a_load_that_no_voltage_carries_is_told_with_its_bus_and_what_is_short() -> None:
    tree = changed(PLANT, *LOADED, ("loads", {"D1": LOADED[1][1]["D1"] | {"power": "30 MVA"}}))
    with pytest.raises(NoAnswerError, match=r'bus "low" is .* MW and .* Mvar off.*lowest voltage'):
        Network(case_from_tree(tree))


GENERATORS: dict[str, Any] = {
    "bus": "main", "rating": "5 MVA", "subtransient": "18 %", "holds": "1.0 pu", "power": "2 MW",
}  # fmt: skip


def test_a_part_whose_power_nothing_balances_is_told() -> None:
    island = ("infeeds", None)
    tree = changed(PLANT, *LOADED, island, ("generators", {"G1": GENERATORS, "G2": GENERATORS}))
    with pytest.raises(
        CaseError, match=r'part of bus "main" has no infeed.*leave power off one of "G1", "G2"'
    ):
        Network(case_from_tree(tree))
    free = {key: value for key, value in GENERATORS.items() if key != "power"}
    tree = changed(PLANT, *LOADED, island, ("generators", {"G1": free, "G2": free}))
    with pytest.raises(CaseError, match='off one only of "G1", "G2"'):
        Network(case_from_tree(tree))
    tree = changed(PLANT, *LOADED, island, ("generators", {"G1": free, "G2": GENERATORS}))
    solution = Network(case_from_tree(tree)).fault("far", "three-phase")
    assert any('generator "G1" balances' in note for note in solution.notes)


def test_sources_that_hold_one_bus_differently_are_told() -> None:
    changes = [("infeeds.utility.voltage", "1.02 pu"), ("generators", {"G1": GENERATORS | {"bus": "grid"}})]
    with pytest.raises(
        CaseError, match=r'bus "grid": infeed "utility" holds 1.02 pu and generator "G1" 1 pu'
    ):
        Network(case_from_tree(changed(PLANT, *LOADED, *changes)))


def test_a_generator_beside_an_infeed_states_its_power() -> None:
    free = {key: value for key, value in GENERATORS.items() if key != "power"}
    with pytest.raises(CaseError, match='generator "G1", power: this is missing'):
        Network(case_from_tree(changed(PLANT, *LOADED, ("generators", {"G1": free}))))


def test_loads_stay_out_of_the_flat_state_and_it_says_so() -> None:
    tree = changed(PLANT, LOADED[1])
    network = Network(case_from_tree(tree))
    bare = Network(case_from_tree(PLANT))
    assert any("left out of the flat state" in str(a) for a in network.model.assumptions)
    ours, theirs = (n.fault("main", "line-ground").current for n in (network, bare))
    assert np.array_equal(ours, theirs)
