"""Free vectors of whole models, by their physics."""

from __future__ import annotations

from typing import Any

import numpy as np
import pytest

from seqfault.case.reader import case_from_tree
from seqfault.model.build import build_model
from seqfault.model.elements import Model
from seqfault.networks.assembly import assemble
from seqfault.networks.connectivity import FreeSpace, free_space


def unit(hv: str, lv: str, group: str = "YNyn0", **fields: Any) -> dict[str, Any]:
    """A transformer 11/11 kV, both star points solid where they are brought out."""
    sides = {"hv": {"bus": hv, "voltage": "11 kV"}, "lv": {"bus": lv, "voltage": "11 kV"}}
    for side, brought_out in (("hv", group.startswith("YN")), ("lv", "yn" in group)):
        if brought_out:
            sides[side]["neutral"] = fields.pop(f"{side}_star", "solid")
    for side in ("hv", "lv"):
        sides[side] |= {"voltage": fields.pop(f"{side}_voltage", "11 kV")}
    plate = {"vector_group": group, "rating": "10 MVA", "impedance": "10 %", "x_over_r": 10}
    if "d" not in group.lower():
        plate["magnetic_circuit"] = "shell-form"
    return plate | sides | fields


def model(transformers: dict, lines: tuple[str, ...] = (), z0: str = "open", neutrals=None) -> Model:
    """Buses a, b, c, …; an infeed at a; a line for each pair of letters."""
    names = {bus for t in transformers.values() for bus in (t["hv"]["bus"], t["lv"]["bus"])}
    names |= {letter for pair in lines for letter in pair} | {"a"}
    tree = {
        "frequency": "50 Hz",
        "buses": dict.fromkeys(sorted(names), "11 kV"),
        "infeeds": {"utility": {"bus": "a", "z1": "0.1+j1 ohm", "z0": z0}},
        "lines": {
            f"L-{pair}": {"from": pair[0], "to": pair[1], "z1": "0.1+j0.3 ohm", "z0": "0.3+j1 ohm"}
            for pair in lines
        },
        "transformers": transformers,
        "neutrals": neutrals or {},
    }
    return build_model(case_from_tree({key: value for key, value in tree.items() if value}))


def checked(of: Model, sequence: int = 0) -> FreeSpace:
    """The free space, seen to draw no current in the strong elements, references to remove it."""
    stamps = assemble(of, sequence)
    free = free_space(of, sequence, stamps.weak)
    y = np.zeros((stamps.size, stamps.size), complex)
    np.add.at(y, (stamps.row, stamps.column), stamps.value)
    total = 0
    for p, dimension in enumerate(free.dimension):
        inside = (free.part == p)[:, None]
        vectors = np.where(inside, free.basis[:, :dimension], 0)
        assert np.linalg.matrix_rank(vectors) == dimension
        assert np.abs(y @ vectors).max() <= 1e-9 * np.abs(y).max()
        total += dimension
    assert len(free.reference) == len(set(free.reference.tolist())) == total
    assert total == stamps.size - np.linalg.matrix_rank(y, tol=1e-9 * np.abs(y).max(initial=1))
    kept = np.setdiff1d(np.arange(stamps.size), free.reference)
    if len(kept):
        assert np.linalg.cond(y[np.ix_(kept, kept)]) < 1e9
    return free


def test_an_earthed_network_leaves_nothing() -> None:
    free = checked(model({"T": unit("a", "b")}, ("bc",), z0="j3 ohm"))
    assert (free.part == -1).all()
    assert len(free.dimension) == 0
    assert free.reference.size == 0


def test_star_star_units_carry_a_floating_part_on() -> None:
    of = model({"T": unit("a", "b"), "U": unit("b", "c", "Dyn11")}, ("cd",))
    free = checked(of)
    # a and b float together behind the delta of U; c and d are earthed by it.
    assert (free.part == [0, 0, -1, -1]).all()
    assert (free.basis[:, 0] == [1, 1, 0, 0]).all()


def test_positive_sequence_of_a_dead_part_floats() -> None:
    of = model({"T": unit("b", "c", "Dyn11")})
    for sequence in (1, 2):
        free = checked(of, sequence)
        assert (free.part == [-1, 0, 0]).all()


def test_ratios_multiply_through_units_in_series() -> None:
    chain = {
        "T": unit("a", "b", hv_voltage="11.55 kV"),
        "U": unit("b", "c", tap="+10 %"),
        "V": unit("c", "d", lv_voltage="10.45 kV"),
    }
    free = checked(model(chain))
    assert list(free.dimension) == [1]
    # Per unit of nominal: v_hv/v_lv = (hv turns over nominal)/(lv turns over nominal).
    a, b, c, d = free.basis[:, 0]
    assert [a / b, b / c, c / d] == pytest.approx([1.05, 1.1, 1 / 0.95])
    assert max(abs(free.basis[:, 0])) == 1


def test_a_unit_whose_ratio_differs_from_the_line_beside_it_is_a_path() -> None:
    equal = model({"T": unit("a", "b")}, ("ab",))
    assert len(checked(equal).dimension) == 1
    # 11 kV with +2.5 % and 11.275 kV are equal but for the last bit, which must not count.
    rounded = model({"T": unit("a", "b", tap="+2.5 %", lv_voltage="11.275 kV")}, ("ab",))
    assert rounded.winding_sets[1].ratio[0, 0] != rounded.winding_sets[1].ratio[0, 1]
    assert len(checked(rounded).dimension) == 1
    differs = model({"T": unit("a", "b", tap="+2.5 %")}, ("ab",))
    assert len(checked(differs).dimension) == 0


def test_parts_that_only_share_a_dead_end_do_not_join() -> None:
    # Yy and a star point that is isolated carry no zero-sequence current at all.
    of = model({"T": unit("a", "b", "Yyn0"), "U": unit("b", "c", hv_star="isolated")})
    free = checked(of)
    assert sorted(free.part) == [0, 1, 2]
    assert list(free.dimension) == [1, 1, 1]


def test_a_star_point_that_floats_with_its_bus_makes_two_free_vectors() -> None:
    # One neutral for both sides of T: equal winding voltages leave bus a, bus b and the star point
    # two ways to move: all three together, and each winding by the same voltage.
    of = model({"T": unit("a", "b", hv_star="N", lv_star="N")}, neutrals={"N": {"resistance": "100 ohm"}})
    free = checked(of)
    assert list(free.dimension) == [2]
    assert (free.part == 0).all()


def test_two_floating_parts_joined_by_one_star_point_are_one_part() -> None:
    shared = {"N": {"resistance": "40 ohm"}}
    units = {"T": unit("a", "b", hv_star="N", lv_star="N"), "U": unit("c", "d", lv_star="N")}
    free = checked(model(units, ("ce",), neutrals=shared))
    # Free are v_b, v_c and the star point; v_a = v_b and v_d = v_c + v_N follow.
    assert list(free.dimension) == [3]
    assert (free.part == 0).all()


def test_a_part_coupled_to_a_tied_node() -> None:
    # b and its line float but for the unit to a, whose zero sequence the infeed earths.
    neutrals = {"N": {"current": "5 A", "voltage": "11 kV"}}
    free = checked(model({"T": unit("a", "b", lv_star="N")}, ("bc",), "j2 ohm", neutrals))
    # v_b − v_N = v_a = 0: bus and star point move together, the device to earth being weak.
    assert list(free.dimension) == [1]
    a, b, c, star = free.basis[:, 0]
    assert a == 0
    assert b == c
    assert abs(b) == pytest.approx(abs(star))


@pytest.mark.parametrize("groups", [("YNd1", "YNd1"), ("Dyn11", "YNyn0"), ("YNyn0", "YNyn0")])
def test_two_units_in_series(groups: tuple[str, str]) -> None:
    checked(model({"T": unit("a", "b", groups[0]), "U": unit("b", "c", groups[1])}, ("cd", "de")))


@pytest.mark.parametrize("near", ["N1", "N2"])
def test_the_reference_stands_where_earth_is_nearest(near: str) -> None:
    # Held anywhere else, a branch of a micro-ohm would drown the rest of the part.
    units = {"T": unit("b", "a", "Dyn11", lv_star="N1"), "U": unit("b", "a", "Dyn11", lv_star="N2")}
    neutrals = {name: {"resistance": "1e-6 ohm" if name == near else "30 ohm"} for name in ("N1", "N2")}
    of = model(units, ("ac",), neutrals=neutrals)
    free = checked(of)
    (at,) = np.flatnonzero(free.part[free.reference] == free.part[0])
    assert free.reference[at] == of.stars.node[of.stars.names.index(near)]
