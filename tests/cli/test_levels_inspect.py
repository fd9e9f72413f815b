from __future__ import annotations

import csv
import io

import pytest

from seqfault import Network, contributions, levels, read_case
from seqfault.report.numbers import figures
from tests.cli.console import PLANT, Run


def test_levels_are_those_of_the_faults(run: Run, plant: Network) -> None:
    page = run("levels", PLANT)
    for bus in plant.buses:
        cells = [cell.lstrip(">") for cell in page.row(f"{bus} ")]
        kinds = ("three-phase", "line-line", "line-line-ground", "line-ground")
        expected = [figures(float(abs(plant.fault(bus, k).current).max())) for k in kinds]
        assert cells[:4] == expected
        assert cells[4] == figures(abs(plant.fault(bus, "line-line-ground").residual))
    assert page.out.index("33 kV: ampere") < page.out.index("\n11 kV") < page.out.index("\n0.4 kV")


def test_range_over_states_names_the_state(run: Run) -> None:
    page = run("levels", PLANT, "--scenario", "all")
    greatest, _, least = page.out.partition("The least")
    case = read_case(PLANT)
    values = [float(levels(Network(case, name)).k3[1]) for name in ("base", "one-transformer", "island")]
    assert f"main        {figures(max(values))} ({values.index(max(values)) + 1})" in greatest
    assert f"{figures(min(values))} ({values.index(min(values)) + 1})" in least
    assert "(3) island" in page.out


def test_levels_json(run: Run, plant: Network) -> None:
    tree = run("levels", PLANT, "--format", "json").tree
    answer = levels(plant)
    assert [b["bus"] for b in tree["buses"]] == list(answer.buses)
    assert [b["k1"] for b in tree["buses"]] == answer.k1.tolist()
    many = run("levels", PLANT, "--scenario", "all", "--format", "json").tree
    assert [s["scenario"] for s in many["states"]] == ["base", "one-transformer", "island"]
    main = next(b for b in many["range"] if b["bus"] == "main")
    assert main["k3"]["greatest"] == max(s["buses"][1]["k3"] for s in many["states"])
    assert main["k3"]["least_scenario"] == "island"


def test_levels_csv(run: Run, plant: Network) -> None:
    rows = list(csv.DictReader(io.StringIO(run("levels", PLANT, "--format", "csv").out)))
    k1 = {r["place"]: float(r["value"]) for r in rows if r["kind"] == "line-ground" and r["unit"]}
    assert k1 == dict(zip(plant.buses, levels(plant).k1.tolist(), strict=True))


def test_inspect_tells_bases_windings_and_star_points(run: Run) -> None:
    page = run("inspect", PLANT, "--width", "100")
    # base ohm = kV2/MVA, base ampere = MVA/(sqrt 3 kV)
    assert page.row("11 kV")[:2] == ["1.210", "5249"]
    assert page.row("33 kV")[:2] == ["10.89", "1750"]
    # three lines below by hand: z% on 10 MVA to 100 MVA; 0.9 km-ohm over two circuits and 1.21 ohm
    z1 = 0.10 * 100 / 10
    assert [float(c) for c in page.row("T1  ")[:2]] == pytest.approx(
        [z1 / (1 + 16**2) ** 0.5, 16 * z1 / (1 + 16**2) ** 0.5], rel=1e-3
    )
    assert [float(c) for c in page.row("F1 (all 2)")[:2]] == pytest.approx(
        [0.125 * 1.8 / 2 / 1.21, 0.096 * 1.8 / 2 / 1.21], rel=1e-3
    )
    assert float(page.row("F1 (all 2)")[4]) == pytest.approx(0.9 * 1.8 / 2 / 1.21, rel=1e-3)
    assert "circulates inside" in " ".join(page.row("T1 hv"))
    assert "a path to earth" in " ".join(page.row("T1 lv"))
    assert page.row("NER ")[:2] == ["16", "ohm,"]
    assert page.row("T2.lv")[0] == "isolated"
    assert "T3: 4.76 % below" in page.out
    assert "one-transformer" in page.out


def test_inspect_says_every_assumption_in_full(run: Run, plant: Network) -> None:
    flat = run("inspect", PLANT).flat
    for assumption in plant.model.assumptions:
        for sentence in assumption.sentences():
            assert sentence in flat


def test_charging_current_is_three_omega_c_u(run: Run) -> None:
    tree = run("inspect", PLANT, "--format", "json").tree
    zone = next(z for z in tree["zones"] if z["nominal"] == 11e3)
    c0 = 2 * 1.8 * 0.42e-6
    assert zone["charging"] == pytest.approx(3 * 2 * 3.141592653589793 * 50 * c0 * 11e3 / 3**0.5)


def test_places_are_what_fault_accepts(run: Run) -> None:
    places = run("inspect", PLANT, "--places").out.splitlines()
    assert places == ["supply", "main", "pump-house", "workshop"]
    for place in places:
        assert run("fault", PLANT, place).code == 0


def test_inspect_json_and_csv(run: Run) -> None:
    tree = run("inspect", PLANT, "--format", "json").tree
    elements = {e["element"]: e for e in tree["elements"]}
    assert elements["G1"]["per_unit"]["z0"] is None
    assert elements["T3"]["ratio"] == pytest.approx(11 / 0.42 / (11 / 0.4))
    rows = list(csv.DictReader(io.StringIO(run("inspect", PLANT, "--format", "csv").out)))
    reactance = next(
        r for r in rows if r["place"] == "G1" and r["quantity"] == "reactance" and r["phase"] == "1"
    )
    assert float(reactance["value"]) == pytest.approx(0.15 * 100 / 4)


def test_contributions_in_every_form(run: Run, plant: Network) -> None:
    found = contributions(plant)
    at = plant.buses.index("main")
    here = range(int(found.start[at]), int(found.start[at + 1]))
    page = run("levels", PLANT, "--contributions")
    block = page.out.partition("\nmain, 11 kV\n")[2].partition("\n\n")[0].splitlines()
    assert [line.split()[0] for line in block] == [found.element[k] for k in here]
    assert figures(float(found.k3[here[2]])) in block[2].split()
    tree = run("levels", PLANT, "--contributions", "--format", "json").tree
    listed = tree["buses"][at]["contributions"]
    assert [each["k1"] for each in listed] == [float(found.k1[k]) for k in here]
    out = run("levels", PLANT, "--contributions", "--format", "csv").out
    rows = [r for r in csv.DictReader(io.StringIO(out)) if r["quantity"] == "contribution"]
    k2e = [float(r["value"]) for r in rows if r["place"] == "main" and r["kind"] == "line-line-ground"]
    assert k2e == [float(found.k2e[k]) for k in here]
    assert "contribution" not in run("levels", PLANT, "--format", "csv").out
