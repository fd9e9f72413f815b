from __future__ import annotations

import cmath
import csv
import io
import math

import pytest

from seqfault import Network
from seqfault.cli.options import KINDS
from seqfault.report.numbers import figures
from tests.cli.console import PLANT, Run, Write, unearthed


def test_json_has_the_promised_shape(run: Run) -> None:
    tree = run("fault", PLANT, "main", "--kind", "line-ground", "--format", "json").tree
    assert tree["format"] == 1
    assert set(tree["case"]) == {"title", "sha256"}
    assert len(tree["case"]["sha256"]) == 64
    assert tree["scenario"] == "base"
    fault = tree["fault"]
    assert (fault["place"], fault["kind"], fault["phases"]) == ("main", "line-ground", "a")
    assert fault["zf"] == fault["zg"] == [0, 0]
    assert set(tree["impedance"]) == {"z1", "z2", "z0"}
    assert set(tree["current"]) == {"a", "b", "c", "i0", "i1", "i2", "residual"}
    assert set(tree["voltages"]["main"]) == {"a", "b", "c", "v0", "v1", "v2"}
    for flow in tree["flows"]:
        assert {"element", "bus", "a", "b", "c", "i0", "residual"} <= set(flow)
    assert {"current", "voltage"} <= set(tree["neutrals"]["NER"])
    assert {"path", "current"} == set(tree["home"][0])
    for key in ("assumptions", "warnings", "undefined"):
        assert isinstance(tree[key], list)


def test_json_values_are_those_of_the_solution_in_full(run: Run, plant: Network) -> None:
    s = plant.fault("main", "line-line-ground")
    tree = run("fault", PLANT, "main", "--kind", "line-line-ground", "--format", "json").tree
    for k, phase in enumerate("abc"):
        size, angle = tree["current"][phase]
        assert size == pytest.approx(abs(s.current[k]), rel=1e-12, abs=1e-6)
        if size:
            assert angle == math.degrees(cmath.phase(complex(s.current[k])))
        assert tree["voltages"]["workshop"][phase][0] == abs(complex(s.at("workshop")[k]))
    assert tree["impedance"]["z0"] == [s.impedance[0].real, s.impedance[0].imag]
    flows = {(f["element"], f["bus"]): f for f in tree["flows"]}
    t = s.terminals
    for k, element in enumerate(t.element):
        flow = flows[element, t.bus[k]]
        assert flow["a"][0] == pytest.approx(abs(t.phases[0, k]), rel=1e-12, abs=1e-6)
        assert flow["residual"][0] == pytest.approx(abs(t.residual[k]), rel=1e-12, abs=1e-6)
    home = sum(cmath.rect(p["current"][0], math.radians(p["current"][1])) for p in tree["home"])
    assert home == pytest.approx(s.residual, rel=1e-9)


def test_rounding_is_written_as_zero(run: Run) -> None:
    tree = run("fault", PLANT, "main", "--format", "json").tree
    assert tree["current"]["b"] == tree["current"]["c"] == [0, 0]
    assert tree["voltages"]["main"]["a"] == [0, 0]


def test_page_tells_current_voltages_and_feeders(run: Run, plant: Network) -> None:
    s = plant.fault("pump-house", "line-line")
    page = run("fault", PLANT, "pump-house", "--kind", "line-line", "--width", "100")
    assert page.code == 0
    cells = page.row("fault current")
    degrees = round(math.degrees(cmath.phase(complex(s.current[1]))))
    assert cells == ["0", figures(abs(s.current[1])), f"∠{degrees}", *cells[3:]]
    assert page.row("main  11 kV", "Left at")[0] == figures(
        100 * abs(s.at("main")[0]) / (11e3 / 3**0.5), 2, 1
    )
    t = s.terminals
    k = next(k for k, e in enumerate(t.element) if e == "M1")
    assert figures(abs(t.phases[1, k])) in page.row("M1 ")


def test_one_circuit_of_several_is_shown_beside(run: Run, plant: Network) -> None:
    s = plant.fault("main", "three-phase")
    t = s.terminals
    k = next(k for k, e in enumerate(t.element) if e == "F1" and t.bus[k] == "main")
    page = run("fault", PLANT, "main", "--kind", "three-phase")
    assert page.row("F1 ")[0] == figures(abs(t.phases[0, k]))
    assert page.row("- one of 2")[0] == figures(abs(t.phases[0, k]) / 2)


def test_small_flows_are_left_out_and_counted(run: Run, plant: Network) -> None:
    page = run("fault", PLANT, "main")
    assert "2 terminals below 1 % of the fault current left out; --flows shows all" in page.out
    every = run("fault", PLANT, "main", "--flows")
    assert "left out" not in every.out
    block = every.out.partition("In every element")[2].partition("Star points")[0]
    for element in plant.fault("main").terminals.element:
        assert f"    {element} " in block


def test_components_on_request(run: Run, plant: Network) -> None:
    assert "zero sequence" not in run("fault", PLANT, "main").out
    page = run("fault", PLANT, "main", "--components")
    assert "zero sequence" in page.out
    s = plant.fault("main")
    assert page.out.count(figures(abs(s.current_sequence[0]))) >= 3


def test_star_points_and_deltas(run: Run, plant: Network) -> None:
    s = plant.fault("main")
    page = run("fault", PLANT, "main")
    ner = next(p for p in s.star_points if p.name == "NER")
    assert ner.voltage is not None
    stars = page.out.partition("Star points")[2]
    row = next(line.split() for line in stars.splitlines() if line.strip().startswith("NER"))
    assert row[0:2] == ["NER", figures(abs(ner.current))]
    assert figures(abs(ner.voltage)) in row
    assert row[-2:] == ["16", "ohm"]
    delta = next(d for d in s.deltas if d.element == "T1")
    assert page.row("T1 hv")[0] == figures(abs(delta.current))


def test_phases_and_synonyms(run: Run, plant: Network) -> None:
    tree = run("fault", PLANT, "main", "--kind", "line-earth", "--phases", "c", "--format", "json").tree
    assert tree["fault"]["kind"] == "line-ground"
    assert tree["current"]["a"] == [0, 0]
    assert tree["current"]["c"][0] == pytest.approx(abs(plant.fault("main").current[0]))
    tree = run("fault", PLANT, "main", "--kind", "line-line", "--phases", "ca", "--format", "json").tree
    assert tree["current"]["b"] == [0, 0]


@pytest.mark.parametrize("zf", ["--zf=-j0.1ohm", "--zf=-j100 mohm"])
def test_reactive_fault_impedance(run: Run, plant: Network, zf: str) -> None:
    tree = run("fault", PLANT, "main", "--kind", "three-phase", zf, "--format", "json").tree
    expected = abs(plant.fault("main", "three-phase", zf=-0.1j).current[0])
    assert tree["current"]["a"][0] == pytest.approx(expected)
    assert tree["fault"]["zf"] == pytest.approx([0, -0.1])


def test_prefault_voltage_scales_every_current(run: Run) -> None:
    one = run("fault", PLANT, "main", "--format", "json").tree["current"]["a"][0]
    more = run("fault", PLANT, "main", "--prefault", "1.05 pu", "--format", "json").tree
    assert more["current"]["a"][0] == pytest.approx(1.05 * one)
    assert more["fault"]["prefault"] == pytest.approx(1.05)


def test_machine_state_is_used_and_said(run: Run) -> None:
    arguments = ("fault", PLANT, "main", "--kind", "three-phase")
    page = run(*arguments, "--machine", "transient", "--width", "120")
    assert "transient reactances" in page.flat
    late = run(*arguments, "--machine", "transient", "--format", "json").tree["current"]["a"][0]
    early = run(*arguments, "--format", "json").tree["current"]["a"][0]
    assert late < early


def test_ad_hoc_states(run: Run) -> None:
    plain = run("fault", PLANT, "main", "--kind", "three-phase", "--format", "json").tree
    less = run("fault", PLANT, "main", "--kind", "three-phase", "--without", "T2", "--format", "json").tree
    named = run(
        "fault", PLANT, "main", "--kind", "three-phase", "--scenario", "one-transformer",
        "--format", "json",
    ).tree  # fmt: skip
    assert less["current"]["a"][0] < plain["current"]["a"][0]
    assert less["current"]["a"][0] == pytest.approx(named["current"]["a"][0])
    assert "T2" in less["scenario"]
    cut = run("fault", PLANT, "main", "--kind", "three-phase", "--open", "F1@main", "--format", "json").tree
    assert cut["current"]["a"][0] < plain["current"]["a"][0]


def test_undefined_potentials(run: Run, write: Write) -> None:
    path = write(unearthed())
    page = run("fault", path, "main", "--kind", "three-phase")
    assert page.code == 0
    assert page.row("main  11 kV", "Left at the buses") == ["undefined"] * 4
    assert 'potentials of "intake", "main" to earth: nothing fixes them' in page.flat
    tree = run("fault", path, "main", "--kind", "three-phase", "--format", "json").tree
    voltages = tree["voltages"]["main"]
    assert [voltages[key] for key in ("a", "b", "c", "v0")] == [None] * 4
    assert voltages["v2"] == [0, 0]
    assert tree["undefined"]
    assert tree["impedance"]["z0"] is None
    rows = run("fault", path, "main", "--kind", "three-phase", "--format", "csv").out
    undefined = [
        row
        for row in csv.DictReader(io.StringIO(rows))
        if row["where"] == "main" and row["quantity"] == "voltage to earth" and row["phase"] == "a"
    ]
    assert [row["value"] for row in undefined] == [""]


def test_dead_buses_and_their_warning(run: Run, write: Write) -> None:
    path = write(unearthed())
    page = run("fault", path, "main")
    assert page.row("spare  11 kV") == ["dead"] * 4
    assert page.err.startswith("seqfault: warning: bus")
    assert "spare" in page.err
    tree = run("fault", path, "main", "--format", "json")
    assert tree.err == ""
    assert any("spare" in warning for warning in tree.tree["warnings"])
    at_dead = run("fault", path, "spare")
    assert at_dead.code == 0
    assert "is dead in this state" in at_dead.flat
    assert "bolted, dead, state: base" in at_dead.flat
    side_by_side = run("compare", path, "spare")
    assert side_by_side.row("phase a to earth") == ["dead"] * 4
    assert "nothing feeds this bus" in side_by_side.out


def test_csv_reads_back(run: Run, plant: Network) -> None:
    out = run("fault", PLANT, "main", "--format", "csv").out
    rows = list(csv.DictReader(io.StringIO(out)))
    assert list(rows[0])[:7] == ["place", "kind", "quantity", "phase", "value", "unit", "angle"]
    s = plant.fault("main")
    current = next(r for r in rows if r["quantity"] == "fault current" and r["phase"] == "a")
    assert float(current["value"]) == abs(complex(s.current[0]))
    assert current["unit"] == "A"
    home = [r for r in rows if r["quantity"] == "earth current home"]
    assert {r["where"] for r in home} == {path.path for path in s.home}
    total = sum(cmath.rect(float(r["value"]), math.radians(float(r["angle"]))) for r in home)
    assert total == pytest.approx(s.residual)
    assert all(r["place"] == "main" and r["state"] == "base" for r in rows)


def test_kinds_offered_are_the_kinds_there_are() -> None:
    from seqfault.cli import options
    from seqfault.faults import kinds
    from seqfault.model import build

    assert set(KINDS) == set(kinds.KINDS)
    assert options.MACHINES == build.MACHINES


def test_a_capacitive_loop_has_no_ratio(run: Run, write: Write) -> None:
    tree = unearthed()
    tree["lines"] = {
        "cable": {
            "from": "main",
            "to": "spare",
            "length": "2 km",
            "z1": "0.2+j0.1 ohm/km",
            "z0": "0.8+j0.3 ohm/km",
            "c0": "0.4 uF/km",
        }
    }
    page = run("fault", write(tree), "spare")
    assert page.row("X/R")[0] == "capacitive"
    # 3 omega C0 U / sqrt 3
    expected = 3**0.5 * 11e3 * 314.159265 * 0.8e-6
    assert float(page.row("fault current")[0]) == pytest.approx(expected, rel=5e-3)
    assert page.row("capacitance 11 kV")[-1] == "1.000"
