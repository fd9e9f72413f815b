"""Reactances of opposite sign that cancel: no answer, or the limit of the answers beside them."""

from __future__ import annotations

import numpy as np
import pytest

from seqfault.case.reader import case_from_tree
from seqfault.errors import NoAnswerError
from seqfault.faults.network import Network
from seqfault.networks import factors


@pytest.fixture(params=["dense", "sparse"], autouse=True)
def path(request, monkeypatch) -> str:
    if request.param == "sparse":
        monkeypatch.setattr(factors, "DENSE", 0)
    return request.param


def network(infeed: dict, line: dict | None = None, unit: str | None = None) -> Network:
    """Bus a with an infeed, a line to b, and at will a unit whose z0 (%, 10 MVA) is a path at a."""
    line = line or {"z1": "0.1+j1 ohm", "z0": "0.1+j1 ohm"}
    tree = {
        "frequency": "50 Hz",
        "buses": {"a": "10 kV", "b": "10 kV"},
        "infeeds": {"utility": {"bus": "a"} | infeed},
        "lines": {"feeder": {"from": "a", "to": "b"} | line},
    }
    if unit is not None:
        tree["buses"] |= {"station": "1 kV"}
        tree["transformers"] = {
            "earthing": {
                "vector_group": "YNd1",
                "rating": "10 MVA",
                "impedance": "j10 %",
                "z0": unit,
                "hv": {"bus": "a", "voltage": "10 kV", "neutral": "solid"},
                "lv": {"bus": "station", "voltage": "1 kV"},
            }
        }
    return Network(case_from_tree(tree))


# Z1 + Z2 + Z0 = 0 at the place; 0.35 and 0.7 are no binary fractions, so that a rounding is left.
@pytest.mark.parametrize(
    ("infeed", "line", "place"),
    [
        ({"z1": "j0.5 ohm", "z0": "-j1 ohm"}, None, "a"),
        ({"z1": "j0.35 ohm", "z0": "-j0.7 ohm"}, None, "a"),
        ({"z1": "j0.35 ohm", "z0": "-j1 ohm"}, {"z1": "j0.1 ohm", "z0": "j0.1 ohm"}, "b"),
    ],
)
def test_a_loop_in_series_resonance_has_no_answer(infeed, line, place) -> None:
    here = network(infeed, line)
    with pytest.raises(NoAnswerError, match="series resonance"):
        here.fault(place, "line-ground")
    with pytest.raises(NoAnswerError, match="series resonance"):
        here.fault(place, "line-ground", phases="b")
    other = here.fault(place, "three-phase")
    z1 = 0.35 if "0.35" in infeed["z1"] else 0.5
    z1 += 0.1 if place == "b" else 0
    assert abs(other.current[0]) == pytest.approx(10e3 / np.sqrt(3) / z1, rel=1e-9)


def test_beside_series_resonance_there_is_an_answer() -> None:
    here = network({"z1": "j0.35 ohm", "z0": "-j0.7 ohm"})
    solution = here.fault("a", "line-ground", zf=0.001)
    assert abs(solution.residual) == pytest.approx(3 * 10e3 / np.sqrt(3) / 0.003, rel=1e-9)


def test_two_phases_to_ground_in_series_resonance_have_no_answer() -> None:
    # Z2 in parallel with Z0, in series with Z1: x + x·x0/(x + x0) = 0 at x0 = −x/2.
    here = network({"z1": "j0.7 ohm", "z0": "-j0.35 ohm"})
    with pytest.raises(NoAnswerError, match="series resonance"):
        here.fault("a", "line-line-ground")


@pytest.mark.parametrize("x0", [1.0, 0.7, 0.3, 1.1])
@pytest.mark.parametrize("place", ["a", "b"])
def test_parallel_resonance_lets_nothing_through_or_has_no_answer(x0: float, place: str) -> None:
    # Whether a rounding is left of y − y decides which of the two; a current would be nonsense.
    here = network({"z1": "0.1+j1 ohm", "z0": f"-j{x0} ohm"}, unit=f"j{10 * x0:.12g} %")
    try:
        solution = here.fault(place, "line-ground")
    except NoAnswerError:
        return
    assert abs(solution.residual) <= 1e-9
    sound = np.abs(solution.at(place))
    assert sound == pytest.approx([0, 10e3, 10e3], abs=1e-2)


@pytest.mark.parametrize("place", ["a", "b"])
def test_a_bus_whose_own_entry_is_zero(place: str) -> None:
    # Infeed −j0.7 and line j0.7 cancel on the diagonal of bus a; at b they are in series: Z0 = 0.
    here = network({"z1": "j0.35 ohm", "z0": "-j0.7 ohm"}, {"z1": "j0.1 ohm", "z0": "j0.7 ohm"})
    if place == "a":  # Z0 = −j0.7 = −(Z1 + Z2)
        with pytest.raises(NoAnswerError):
            here.fault("a", "line-ground")
        return
    solution = here.fault("b", "line-ground")
    assert abs(solution.impedance[0]) <= 1e-9
    assert abs(solution.residual) == pytest.approx(3 * 10e3 / np.sqrt(3) / 0.9, rel=1e-9)
