"""Screens of a case with every kind of winding, line and switch."""

from __future__ import annotations

from pathlib import Path

import numpy as np
import pytest

from seqfault import Network, read_case
from seqfault.report.numbers import figures
from tests.cli.console import Run

ELEMENTS = Path(__file__).with_name("elements.toml")


@pytest.fixture(scope="module")
def network() -> Network:
    return Network(read_case(ELEMENTS))


@pytest.mark.parametrize("width", ["80", "100"])
def test_inspect_tells_every_winding_and_device(run: Run, network: Network, width: str) -> None:
    text = run("inspect", ELEMENTS, "--width", width).out
    assert max(map(len, text.splitlines())) <= int(width)
    flat = " ".join(text.split())
    for words in (
        "AT hv-lv", "AT lv of star", "Negative branches of a star equivalent",
        "L1 with L2 0.4500 2.100", "coupler: fell to dale, closed: one node",
        "bank: at dale, 600 kvar, star", "roof: at dale, feeds 63.5 A, 90 degrees behind its voltage",
        "T2 lv delta rail none flows", "AT tv delta tertiary circulates inside, none leaves",
        "a path to earth through the",
    ):  # fmt: skip
        assert words in flat
    coil = network.model.stars.impedance[network.model.stars.names.index("coil")]
    assert f"passes {figures(20e3 / np.sqrt(3) / abs(coil))} A" in flat
    assert flat.count("T3 lv zigzag barn") == 1


def test_the_zero_sequence_of_a_zigzag_winding_is_its_own(run: Run) -> None:
    tree = run("inspect", ELEMENTS, "--format", "json").tree
    (t3,) = [e for e in tree["elements"] if e["element"] == "T3"]
    assert t3["per_unit"]["z0"] == pytest.approx([0.1 / 100 * 400, 0.4 / 100 * 400])


@pytest.mark.parametrize("width", ["80", "100"])
def test_the_sequence_networks_are_drawn(run: Run, width: str) -> None:
    text = run("inspect", ELEMENTS, "--sequence", "dale", "--width", width).out
    assert max(map(len, text.splitlines())) <= int(width)
    for words in (
        "Positive sequence: every branch between dale and the reference",
        "AT hv to north", "grid to the reference", "L1, L2 mutual to inside L1", "coil 3 Zn to",
        "T2 lv at rail: delta: zero sequence circulates inside",
    ):  # fmt: skip
        assert words in text
    assert text.count("together, as solved") == 3


def test_the_sequence_networks_as_data(run: Run, network: Network) -> None:
    tree = run("inspect", ELEMENTS, "--sequence", "dale", "--format", "json").tree
    solution = network.fault("dale", "line-ground")
    for drawn in tree["networks"]:
        z = solution.impedance_pu[drawn["sequence"]]
        assert drawn["thevenin"] == pytest.approx([z.real, z.imag])
    rows = run("inspect", ELEMENTS, "--sequence", "dale", "--format", "csv").out.splitlines()
    assert len(rows) == 1 + 2 * sum(len(drawn["branches"]) for drawn in tree["networks"])


def test_an_unknown_place_is_refused(run: Run) -> None:
    answer = run("inspect", ELEMENTS, "--sequence", "dael")
    assert answer.code == 2
    assert 'no bus has this name; did you mean "dale"?' in answer.err


def test_what_couples_into_an_earthed_line_is_shown(run: Run) -> None:
    solution = Network(read_case(ELEMENTS), "earthed").fault("barn", "line-ground")
    assert [line.name for line in solution.earthed_lines] == ["L2"]
    solution = Network(read_case(ELEMENTS), "earthed").fault("dale", "line-ground", zf=5)
    page = run("fault", ELEMENTS, "dale", "--zf", "5 ohm", "--scenario", "earthed")
    assert "Coupled into lines that are out of service and earthed at both ends" in page.out
    tree = run("fault", ELEMENTS, "dale", "--zf", "5 ohm", "--scenario", "earthed", "--format", "json").tree
    (line,) = tree["earthed_lines"]
    assert line["residual"][0] == pytest.approx(abs(solution.earthed_lines[0].residual))


def test_ties_are_opened_and_closed(run: Run) -> None:
    closed = run("fault", ELEMENTS, "dale", "--format", "json").tree
    assert "coupler" in [flow["element"] for flow in closed["flows"]]
    for state in (("--scenario", "apart"), ("--open", "coupler")):
        answer = run("fault", ELEMENTS, "dale", *state, "--format", "json").tree
        assert answer["current"]["a"][0] == 0
        assert any("no infeed or generator" in warning for warning in answer["warnings"])
    again = run("fault", ELEMENTS, "dale", "--scenario", "apart", "--close", "coupler", "--format", "json")
    assert again.tree["current"]["a"] == closed["current"]["a"]


def test_a_converter_says_what_it_did(run: Run) -> None:
    page = run("fault", ELEMENTS, "dale", "--kind", "three-phase")
    assert 'converter "roof" feeds its limit' in " ".join(page.out.split())
    assert "roof" in page.out
