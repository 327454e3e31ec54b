"""`seamfold split`: loads on the whole body as cases on the sector.

The oracle puts the written tables together again with matrices made by hand, and compares with the
load that was given, node by node.
"""

from __future__ import annotations

import csv
import itertools
import json
import sys
import tomllib
from collections.abc import Callable, Mapping
from dataclasses import dataclass
from pathlib import Path
from typing import Any

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from meshes import HEXAHEDRON, Sector, box, direction, placed, ring, somewhere
from scipy.spatial import cKDTree
from scipy.spatial.transform import Rotation

from expander.casefile import read_case, validate_case
from expander.commandline import main
from expander.errors import InputError
from expander.splitting import split_loads
from expander.waves.patterns import read_patterns, split_patterns
from expander.waves.splitfiles import write

Tables = dict[str, Any]
HALF: Tables = {"mirror": [{"name": "mid", "normal": "x"}]}
QUARTER: Tables = {"mirror": [{"name": "mid", "normal": "x"}, {"normal": "y"}]}
EIGHTH: Tables = {"mirror": [{"normal": "x"}, {"normal": "y"}, {"normal": "z"}]}


def cyclic(sectors: int, **more: Any) -> Tables:
    return {"cyclic": {"sectors": sectors}, **more}


BODIES: dict[str, tuple[Sector, Tables]] = {
    "half": (box((2, 2, 1)), HALF),
    "quarter": (box((2, 2, 1)), QUARTER),
    "eighth": (box((2, 1, 2)), EIGHTH),
    "ring of five": (ring(5, (1, 2, 1), lean=0.1), cyclic(5)),
    "ring of six": (ring(6, (1, 2, 1)), cyclic(6)),
    "pie of four": (ring(4, (2, 2, 1), inner=0.0), cyclic(4)),
    "half ring of three": (ring(3, (1, 2, 1)), cyclic(3, mirror=[{"normal": "z"}])),
    "half pie of two": (
        ring(2, (1, 2, 1), inner=0.0, part=0.5),
        cyclic(2, mirror=[{"normal": "y"}]),
    ),
}


def by_hand(tables: Tables) -> list[tuple[np.ndarray, np.ndarray, int, tuple[int, ...]]]:
    """Every copy: Q and t of its placement, its sector, and which planes made it."""
    N = tables.get("cyclic", {}).get("sectors", 1)
    axis = direction(tables.get("cyclic", {}).get("axis", "z"))
    point = np.array(tables.get("cyclic", {}).get("point", [0, 0, 0]), dtype=float)
    found = []
    planes = tables.get("mirror", [])
    for k in range(N):
        for times in itertools.product((0, 1), repeat=len(planes)):
            Q = Rotation.from_rotvec(2 * np.pi * k / N * axis).as_matrix()
            t = point - Q @ point
            for plane, used in zip(planes, times, strict=True):
                if used:
                    n = direction(plane["normal"])
                    p = np.array(plane.get("point", [0, 0, 0]), dtype=float)
                    t = Q @ (2 * n * (n @ p)) + t
                    Q = Q @ (np.eye(3) - 2 * np.outer(n, n))
            found.append((Q, t, k, times))
    return found


class Whole:
    """The whole body's nodes, from images by hand."""

    def __init__(self, sector: Sector, tables: Tables) -> None:
        self.copies = by_hand(tables)
        images = np.concatenate([sector.points @ Q.T + t for Q, t, _, _ in self.copies])
        near = cKDTree(images).query_ball_point(images, 1e-7)
        first = np.array([min(n) for n in near])
        self.points = images[np.unique(first)]
        self.node = np.searchsorted(np.unique(first), first).reshape(len(self.copies), -1)

    def together(self, folder: Path, tables: Tables) -> dict[str, np.ndarray]:
        """The tables of split.toml added up on all copies: loads by name at the nodes."""
        raw = tomllib.loads((folder / "split.toml").read_text())
        (terms,) = (s["terms"] for s in raw["sum"])
        names = [m.get("name", f"plane {i + 1}") for i, m in enumerate(tables.get("mirror", []))]
        N = tables.get("cyclic", {}).get("sectors", 1)
        found: dict[str, np.ndarray] = {}
        for case in raw["case"]:
            nodes, loads = read_table(folder / f"{case['name']}.csv")
            assert case.get("phase", "+") == "+"
            for Q, t, k, times in self.copies:
                chi = np.exp(2j * np.pi * case.get("nodal_diameters", 0) * k / N)
                for name, used in zip(names, times, strict=True):
                    chi *= -1 if used and case["load"][name] == "antisymmetric" else 1
                at = self.node[by_number(self.copies, Q, t), nodes]
                for load, f in loads.items():
                    A = {"force": Q, "moment": np.linalg.det(Q) * Q, "heat": np.eye(1)}[load]
                    total = found.setdefault(load, np.zeros((len(self.points), f.shape[1])))
                    np.add.at(total, at, terms[case["name"]] * (chi * f @ A.T).real)
        return found


def by_number(copies: list, Q: np.ndarray, t: np.ndarray) -> int:
    return next(i for i, c in enumerate(copies) if c[0] is Q and c[1] is t)


COLUMNS = {"force": ("fx", "fy", "fz"), "moment": ("mx", "my", "mz"), "heat": ("q",)}


def read_table(path: Path) -> tuple[np.ndarray, dict[str, np.ndarray]]:
    """Nodes and loads of one table, complex where it is."""
    with path.open(newline="") as file:
        head, *rows = list(csv.reader(file))
    data = dict(zip(head, np.array(rows, dtype=float).T, strict=True))
    loads = {}
    for load, names in COLUMNS.items():
        if names[0] in data:
            loads[load] = np.stack([data[n] for n in names], axis=1)
        if names[0] + "_real" in data:
            loads[load] = np.stack([data[f"{n}_real"] + 1j * data[f"{n}_imag"] for n in names], 1)
    return data["node"].astype(int), loads


def write_loads(path: Path, points: np.ndarray, loads: Mapping[str, np.ndarray]) -> None:
    head = ["x", "y", "z", *(c for load in loads for c in COLUMNS[load])]
    rows = np.hstack([points, *loads.values()]).tolist()
    with path.open("w", newline="") as file:
        csv.writer(file).writerows([head, *rows])


def model_in(folder: Path, sector: Sector, tables: Tables) -> Path:
    """A case file with the model and the group only."""
    sector.grid().save(folder / "sector.vtu")
    path = folder / "case.toml"
    lines = ['[model]\nfile = "sector.vtu"\n']
    for plane in tables.get("mirror", []):
        lines.append("[[mirror]]\n" + "".join(f"{k} = {json.dumps(v)}\n" for k, v in plane.items()))
    if "cyclic" in tables:
        lines.append("[cyclic]\n")
        lines += [f"{k} = {json.dumps(v)}\n" for k, v in tables["cyclic"].items()]
    path.write_text("".join(lines))
    return path


@dataclass
class Ran:
    status: Any
    out: str
    err: str


Seamfold = Callable[..., Ran]


@pytest.fixture
def seamfold(
    tmp_path: Path, capfd: pytest.CaptureFixture[str], monkeypatch: pytest.MonkeyPatch
) -> Seamfold:
    """The command, run in this process in an empty folder; never a traceback."""
    monkeypatch.chdir(tmp_path)

    def run(*words: object) -> Ran:
        monkeypatch.setattr(sys, "argv", ["seamfold", "split", *map(str, words)])
        capfd.readouterr()
        status: Any = 0
        try:
            main()
        except SystemExit as stop:
            status = stop.code or 0
        ran = Ran(status, *capfd.readouterr())
        assert "unexpected problem" not in ran.err
        return ran

    return run


# --- nodal loads --------------------------------------------------------------------------------


@pytest.mark.parametrize("moved", [False, True], ids=["at the origin", "skew"])
@pytest.mark.parametrize("name", BODIES)
def test_parts_make_the_load_again(
    name: str, moved: bool, tmp_path: Path, seamfold: Seamfold
) -> None:
    """A force and a moment at every node of the whole body, seams and axis included."""
    sector, tables = BODIES[name]
    if moved:
        R, t = somewhere()
        sector, tables = sector.moved(R, t), placed(tables, R, t)
    case = model_in(tmp_path, sector, tables)
    whole = Whole(sector, tables)
    random = np.random.default_rng(7)
    loads = {n: random.normal(size=(len(whole.points), 3)) for n in ("force", "moment")}
    write_loads(tmp_path / "loads.csv", whole.points, loads)
    ran = seamfold(case, "--loads", "loads.csv")
    assert ran.status == 0, ran.err
    found = whole.together(tmp_path, tables)
    for load, given_values in loads.items():
        np.testing.assert_allclose(found[load], given_values, atol=1e-12)
    # The case file with these tables is a case.
    case.write_text(case.read_text() + (tmp_path / "split.toml").read_text())
    terms = read_case(case).sum[0].terms
    N = tables.get("cyclic", {}).get("sectors", 0)
    for term, factor in terms.items():
        h = int(term[1]) if N else 0
        assert factor == (2.0 if 0 < 2 * h < N else 1.0)


@given(data=st.data())
@settings(max_examples=40)
def test_scattered_loads(data: st.DataObject, tmp_path: Path) -> None:
    """Loads at a few nodes anywhere: the parts make them again, their shares add up to 1."""
    name = data.draw(st.sampled_from(list(BODIES)))
    sector, tables = BODIES[name]
    folder = tmp_path / "case"
    folder.mkdir(exist_ok=True)
    for old in folder.iterdir():
        old.unlink()
    case = read_case(model_in(folder, sector, tables))
    whole = Whole(sector, tables)
    nodes = data.draw(st.lists(st.integers(0, len(whole.points) - 1), min_size=1, max_size=4,
                               unique=True))  # fmt: skip
    seed = data.draw(st.integers(0, 1000))
    force = np.zeros((len(whole.points), 3))
    force[nodes] = np.random.default_rng(seed).normal(size=(len(nodes), 3))
    write_loads(folder / "loads.csv", whole.points[nodes], {"force": force[nodes]})
    split = split_loads(case, folder / "loads.csv")
    write(case, split, folder)
    np.testing.assert_allclose(whole.together(folder, tables)["force"], force, atol=1e-12)
    shares = sum(p.share["force"] for p in (*split.parts, *split.left_out))
    np.testing.assert_allclose(shares, 1.0, rtol=1e-12)
    totals = sum(split.total(p)["force"] for p in split.parts)
    np.testing.assert_allclose(totals, force.sum(axis=0), atol=1e-12)


def test_heat_flows(tmp_path: Path, seamfold: Seamfold) -> None:
    """A scalar takes chi alone: q at one node of a half body is q/2 in both parts."""
    case = model_in(tmp_path, box((1, 1, 1)), HALF)
    write_loads(tmp_path / "heat.csv", np.array([[-1.0, 1.0, 1.0]]), {"heat": np.array([[6.0]])})
    assert seamfold(case, "--loads", "heat.csv").status == 0
    for name, value in (("even", 3.0), ("odd", -3.0)):  # the loaded node is the image
        nodes, loads = read_table(tmp_path / f"{name}.csv")
        assert nodes.tolist() == [7]
        assert loads["heat"].tolist() == [[value]]


def test_load_in_the_plane(tmp_path: Path, seamfold: Seamfold) -> None:
    """In a cut plane the model gets half the load, along the plane in the symmetric case and
    across it in the antisymmetric one; a moment the other way round (common practice)."""
    case = model_in(tmp_path, box((1, 1, 1)), HALF)
    loads = {"force": np.array([[2.0, 4.0, 6.0]]), "moment": np.array([[8.0, 10.0, 12.0]])}
    write_loads(tmp_path / "loads.csv", np.array([[0.0, 1.0, 1.0]]), loads)
    ran = seamfold(case, "--loads", "loads.csv", "--json")
    _, even = read_table(tmp_path / "even.csv")
    _, odd = read_table(tmp_path / "odd.csv")
    assert even["force"].tolist() == [[0.0, 2.0, 3.0]]
    assert odd["force"].tolist() == [[1.0, 0.0, 0.0]]
    assert even["moment"].tolist() == [[4.0, 0.0, 0.0]]
    assert odd["moment"].tolist() == [[0.0, 5.0, 6.0]]
    facts = json.loads(ran.out)
    assert [c["name"] for c in facts["cases"]] == ["even", "odd"]
    assert facts["cases"][0]["resultant_on_model"]["force"] == [0.0, 2.0, 3.0]
    assert facts["cases"][0]["resultant_on_whole_body"]["force"] == [0.0, 4.0, 6.0]
    np.testing.assert_allclose(
        [c["share"]["force"] for c in facts["cases"]], [52 / 56, 4 / 56], rtol=1e-14
    )


def test_off_centre_load_on_a_ring(tmp_path: Path, seamfold: Seamfold) -> None:
    """One force on one sector excites every h alike, 1/N of its square for h = 0 and N/2 and 2/N
    between; only h = 0 has a resultant along the axis, only h = 1 one across it."""
    sector = ring(6, (1, 2, 1))
    case = model_in(tmp_path, sector, cyclic(6))
    turn = Rotation.from_rotvec([0, 0, np.pi])
    node = 1  # inside the sector, on no seam
    where = turn.apply(sector.points[node])
    write_loads(tmp_path / "loads.csv", where[None], {"force": np.array([[1.0, 2.0, 3.0]])})
    ran = seamfold(case, "--loads", "loads.csv", "--json")
    cases = json.loads(ran.out)["cases"]
    np.testing.assert_allclose([c["share"]["force"] for c in cases], [1 / 6, 1 / 3, 1 / 3, 1 / 6])
    totals = [c["resultant_on_whole_body"]["force"] for c in cases]
    np.testing.assert_allclose(totals, [[0, 0, 3], [1, 2, 0], [0, 0, 0], [0, 0, 0]], atol=1e-14)
    for h, c in enumerate(cases):
        nodes, loads = read_table(tmp_path / f"{c['name']}.csv")
        assert nodes.tolist() == [node]
        turned = turn.inv().apply([1.0, 2.0, 3.0])
        F = turned * np.exp(-1j * h * 3 * np.pi / 3) / 6  # sector 3
        np.testing.assert_allclose(loads["force"][0], F, atol=1e-15)
        assert np.iscomplexobj(loads["force"]) == (h in (1, 2))


def test_parts_without_load_are_left_out(tmp_path: Path, seamfold: Seamfold) -> None:
    case = model_in(tmp_path, box((1, 1, 1)), HALF)
    points = np.array([[1.0, 1.0, 1.0], [-1.0, 1.0, 1.0]])
    write_loads(tmp_path / "loads.csv", points, {"force": np.array([[5.0, 1, 2], [-5.0, 1, 2]])})
    ran = seamfold(case, "--loads", "loads.csv")
    assert ran.status == 0
    assert "left out" in ran.out
    assert "odd" in ran.out.split("left out")[1]
    assert not (tmp_path / "odd.csv").exists()
    assert [c["name"] for c in tomllib.loads((tmp_path / "split.toml").read_text())["case"]] == [
        "even"
    ]
    # Loads with few digits are almost even: the rest counts unless --least says that it does not.
    write_loads(tmp_path / "loads.csv", points, {"force": np.array([[5.0, 1, 2], [-5.0001, 1, 2]])})
    words = (case, "--loads", "loads.csv", "--dry-run", "--json")
    assert len(json.loads(seamfold(*words).out)["cases"]) == 2
    assert len(json.loads(seamfold(*words, "--least", "1e-4").out)["cases"]) == 1


def test_arrays_of_files(tmp_path: Path, seamfold: Seamfold) -> None:
    """The same load from a table, a .npz and a .vtu: the same tables."""
    case = model_in(tmp_path, box((2, 1, 1)), HALF)
    whole = box((4, 1, 1), size=(2.0, 1.0, 1.0), corner=(-1.0, 0.0, 0.0))
    x = np.unique(box((2, 1, 1)).points[:, 0])
    whole.points[:, 0] = np.concatenate([-x[:0:-1], x])[
        np.unique(whole.points[:, 0], return_inverse=True)[1]
    ]
    force = np.zeros((len(whole.points), 3))
    force[3] = [1.0, 2.0, 3.0]
    grid = whole.grid()
    grid.point_data["F"] = force
    grid.save(tmp_path / "whole.vtu")
    np.savez(tmp_path / "whole.npz", points=whole.points, force=force)
    write_loads(tmp_path / "whole.csv", whole.points, {"force": force})
    written = []
    for words in (("whole.csv",), ("whole.npz",), ("whole.vtu", "--array", "force=F")):
        ran = seamfold(case, "--loads", *words)
        assert ran.status == 0, ran.err
        written.append([(tmp_path / f"{n}.csv").read_bytes() for n in ("even", "odd")])
    assert written[0] == written[1] == written[2]


# --- patterns of the sector's load --------------------------------------------------------------


def put_together(terms: Mapping[str, Any], N: int) -> np.ndarray:
    """How many times each sector carries the load: sum of Re(factor exp(i h k alpha))."""
    total = np.zeros(N)
    for name, factor in terms.items():
        f = complex(*factor) if isinstance(factor, list) else factor
        total += (f * np.exp(2j * np.pi * int(name[1:]) * np.arange(N) / N)).real
    return total


@pytest.mark.parametrize("N", [2, 3, 4, 7, 8])
def test_sector_loads(N: int, tmp_path: Path, seamfold: Seamfold) -> None:
    """Only sector 2 loaded, and a pattern of all sectors: the sums give each sector its own."""
    case = model_in(tmp_path, ring(N, (1, 2, 1)), cyclic(N))
    one = np.eye(N)[1]
    many = np.random.default_rng(N).normal(size=N)
    rows = [["load", *range(1, N + 1)], ["one", *one], ["many", *many]]
    with (tmp_path / "patterns.csv").open("w", newline="") as file:
        csv.writer(file).writerows(rows)
    ran = seamfold(case, "--sector-loads", "patterns.csv")
    assert ran.status == 0, ran.err
    raw = tomllib.loads((tmp_path / "split.toml").read_text())
    assert [c["name"] for c in raw["case"]] == [f"h{h}" for h in range(N // 2 + 1)]
    for entry, wanted in zip(raw["sum"], (one, many), strict=True):
        np.testing.assert_allclose(put_together(entry["terms"], N), wanted, atol=1e-14)
    assert raw["sum"][0]["name"] == "one"
    assert sorted(p.name for p in tmp_path.glob("*.csv")) == ["patterns.csv"]


def test_alternating_pattern_needs_one_case(tmp_path: Path, seamfold: Seamfold) -> None:
    case = model_in(tmp_path, ring(4, (1, 2, 1)), cyclic(4))
    (tmp_path / "p.csv").write_text("1,-1,1,-1\n")
    ran = seamfold(case, "--sector-loads", "p.csv", "--json")
    facts = json.loads(ran.out)
    assert [(c["name"], c["nodal_diameters"]) for c in facts["cases"]] == [("h2", 2)]
    assert facts["sums"] == [{"name": "sector loads", "terms": {"h2": [1.0, 0.0]}}]


def test_copies_of_a_half(tmp_path: Path, seamfold: Seamfold) -> None:
    """Loaded on the modelled side only: half of each parity."""
    case = model_in(tmp_path, box((1, 1, 1)), HALF)
    (tmp_path / "p.csv").write_text("1,0\n")
    facts = json.loads(seamfold(case, "--sector-loads", "p.csv", "--json").out)
    assert facts["sums"][0]["terms"] == {"even": [0.5, 0.0], "odd": [0.5, 0.0]}


@pytest.mark.parametrize("word", ["symmetric", "antisymmetric"])
def test_sector_loads_beside_a_plane(word: str) -> None:
    """A number for each sector of half a ring: the other half follows the plane's word."""
    tables = cyclic(5, mirror=[{"name": "mid", "normal": "z", "load": word}])
    case = validate_case({"model": {"file": "x.vtu"}, **tables}, Path())
    a = np.array([1.0, 0.0, 4.0, 0.0, 2.0])
    split = split_patterns(case, Path("p.csv"), {"all": a})
    sign = -1.0 if word == "antisymmetric" else 1.0
    for g, placement in enumerate(split.group.placements):
        turn = Rotation.from_matrix(placement.Q @ np.diag([1, 1, placement.det]))
        k = round(np.rad2deg(turn.as_rotvec()[2]) / 72) % 5
        assert split.patterns[0].copies[g] == a[k] * (sign if placement.mirrored else 1.0)
    assert {p.character.behaviour.load["mid"] for p in split.parts} == {word}


def test_tables_of_patterns(tmp_path: Path) -> None:
    path = tmp_path / "p.csv"
    path.write_text("load,sector 1,sector 2\nfirst,1,2\nsecond,0,-1\n")
    assert {n: v.tolist() for n, v in read_patterns(path).items()} == {
        "first": [1.0, 2.0],
        "second": [0.0, -1.0],
    }
    path.write_text("1,2\n3,4\n")
    assert list(read_patterns(path)) == ["load 1", "load 2"]
    for text, message in (
        ("load,2,1\nfirst,1,2\n", "not in the order"),
        ("load,1,2\nfirst,1\n", "1 numbers are there"),
        ("load,1,2\nfirst,1,x\n", "'x' is no number"),
        ("load,1,2\na,1,2\na,1,2\n", "taken"),
        ("load,1,2\n", "no row"),
    ):
        path.write_text(text)
        with pytest.raises(InputError, match=message):
            read_patterns(path)


# --- orders -------------------------------------------------------------------------------------


def test_order(tmp_path: Path, seamfold: Seamfold) -> None:
    """No model is read: the file need not exist."""
    (tmp_path / "case.toml").write_text('[model]\nfile = "none.vtu"\n[cyclic]\nsectors = 12\n')
    ran = seamfold("case.toml", "--order", 29)
    assert ran.status == 0
    assert "meets h = 5: a wave that runs with the excitation (29 = 2 x 12 + 5)" in ran.out
    facts = json.loads(seamfold("case.toml", "--order", 31, "--json").out)
    assert (facts["nodal_diameters"], facts["direction"], facts["phase"]) == (5, "against", "+")
    assert seamfold("case.toml", "--order", -1).status == 2


# --- refusals -----------------------------------------------------------------------------------


def refused(ran: Ran, folder: Path, message: str) -> None:
    assert ran.status == 2
    assert ran.out == ""
    assert message in ran.err
    names = {p.name for p in folder.iterdir()}
    assert "split.toml" not in names
    assert not any(n.startswith(".seamfold") for n in names)


def test_points_that_are_no_nodes(tmp_path: Path, seamfold: Seamfold) -> None:
    case = model_in(tmp_path, box((1, 1, 1)), HALF)
    points = np.array([[1.0, 1.0, 1.0], [-1.0, 1.0, 1.01], [7.0, 0.0, 0.0]])
    write_loads(tmp_path / "loads.csv", points, {"force": np.ones((3, 3))})
    ran = seamfold(case, "--loads", "loads.csv")
    refused(ran, tmp_path, "2 of 3 loaded points are no nodes")
    assert "(-1, 1, 1.01), 0.01 away; (7, 0, 0), 6 away" in ran.err
    # A point that carries nothing does not matter; one within the tolerance is the node.
    points[1:] = [[7.0, 0.0, 0.0], [-1.00001, 1.0, 1.0]]
    write_loads(tmp_path / "loads.csv", points, {"force": np.array([[1.0] * 3, [0] * 3, [1] * 3])})
    assert seamfold(case, "--loads", "loads.csv").status == 0


def test_nodes_on_top_of_each_other(tmp_path: Path, seamfold: Seamfold) -> None:
    two = box((1, 1, 1)).beside(box((1, 1, 1), corner=(0.0, 0.0, 1.0)))
    case = model_in(tmp_path, two, HALF)
    write_loads(tmp_path / "l.csv", np.array([[-1.0, 1.0, 1.0]]), {"force": np.ones((1, 3))})
    refused(seamfold(case, "--loads", "l.csv"), tmp_path, "nodes 7 and 14 of the sector lie on top")
    write_loads(tmp_path / "l.csv", np.array([[-1.0, 1.0, 0.0]]), {"force": np.ones((1, 3))})
    assert seamfold(case, "--loads", "l.csv").status == 0


def test_loads_that_no_factor_carries(tmp_path: Path, seamfold: Seamfold) -> None:
    """Planes at 60 degrees have no even-odd sum for a load on one copy; its part that all copies
    share is one."""
    normal = [-np.sin(np.pi / 3), np.cos(np.pi / 3), 0.0]
    tables = {"mirror": [{"normal": "y"}, {"normal": normal}]}
    points = np.array([[0, 0, 0], [2, 0, 0], [1, 1, 0], [0, 0, 1], [2, 0, 1], [1, 1, 1]], float)
    wedge = Sector(points, [(13, [0, 1, 2, 3, 4, 5])])
    case = model_in(tmp_path, wedge, tables)
    write_loads(tmp_path / "l.csv", points[2:3], {"force": np.ones((1, 3))})
    ran = seamfold(case, "--loads", "l.csv")
    refused(ran, tmp_path, "in no part that takes one factor")
    assert "less than 90 degrees" in ran.err
    images = np.concatenate([points[2:3] @ Q.T for Q in six_by_hand(normal)])
    outward = images * [1.0, 1.0, 0.0]
    write_loads(tmp_path / "l.csv", images, {"force": outward})
    ran = seamfold(case, "--loads", "l.csv", "--json")
    assert [c["name"] for c in json.loads(ran.out)["cases"]] == ["even_even"]


def six_by_hand(normal: list[float]) -> list[np.ndarray]:
    A, B = (np.eye(3) - 2 * np.outer(n, n) for n in (np.array([0.0, 1, 0]), np.array(normal)))
    return [np.eye(3), A, B, A @ B, B @ A, A @ B @ A]


def test_half_sectors_are_refused_by_name(tmp_path: Path, seamfold: Seamfold) -> None:
    sector = ring(6, (1, 2, 1), part=0.5)
    case = model_in(tmp_path, sector, cyclic(6, mirror=[{"normal": "y"}]))
    write_loads(tmp_path / "l.csv", sector.points[2:3], {"force": np.ones((1, 3))})
    refused(seamfold(case, "--loads", "l.csv"), tmp_path, "a plane through the axis")


@pytest.mark.parametrize(
    ("text", "message"),
    [
        ("x,y,z\n1,1,1\n", "columns of points or of loads are missing"),
        ("x,y,z,fx\n1,1,1,1\n", "of fx, fy, fz only fx"),
        ("x,y,z,q,power\n1,1,1,1,1\n", "column 'power' is unknown"),
        ("x,y,z,q,q\n1,1,1,1,1\n", "two columns are called 'q'"),
        ("x,y,z,q\n1,1,1,nan\n", "not finite"),
        ("x,y,z,q\n1,1,1,0\n", "no point carries a load"),
        ("x,y,z,q\n1,1,1,a\n", "could not convert"),
        ("x,y,z,q\n", "no rows"),
        ("", "is empty"),
    ],
)
def test_bad_tables(text: str, message: str, tmp_path: Path, seamfold: Seamfold) -> None:
    case = model_in(tmp_path, box((1, 1, 1)), HALF)
    (tmp_path / "l.csv").write_text(text)
    refused(seamfold(case, "--loads", "l.csv"), tmp_path, message)


def test_bad_words(tmp_path: Path, seamfold: Seamfold) -> None:
    case = model_in(tmp_path, box((1, 1, 1)), HALF)
    write_loads(tmp_path / "even.csv", np.ones((1, 3)), {"force": np.ones((1, 3))})
    np.savez(tmp_path / "l.npz", points=np.ones((1, 3)), load=np.ones((1, 3)))
    (tmp_path / "p.csv").write_text("1,2,3\n")
    loads = ("--loads", "even.csv")
    for words, message in (
        ((), "none of --loads"),
        ((*loads, "--order", 3), "more than one of --loads"),
        (("--order", 3), "no [cyclic] table"),
        (loads, "even.csv is read by this case and would be overwritten"),
        ((*loads, "--output", "nowhere"), "The folder nowhere does not exist"),
        ((*loads, "--least", 2), "--least 2"),
        ((*loads, "--array", "force=F"), "columns, not arrays"),
        (("--loads", "l.npz"), "no array on points is called force"),
        (("--loads", "l.npz", "--array", "pull=load"), "--array 'pull=load'"),
        (("--loads", "l.npz", "--array", "heat_flow=load"), "is no heat flow"),
        (("--loads", "none.csv"), "does not exist"),
        (("--sector-loads", "p.csv"), "3 numbers"),
        ((*loads, "--set", "model.linear=false"), "do not add up"),
    ):
        refused(seamfold(case, *words), tmp_path, message)


def test_dry_run_writes_nothing(tmp_path: Path, seamfold: Seamfold) -> None:
    case = model_in(tmp_path, box((1, 1, 1)), HALF)
    write_loads(tmp_path / "l.csv", np.ones((1, 3)), {"force": np.ones((1, 3))})
    before = sorted(p.name for p in tmp_path.iterdir())
    ran = seamfold(case, "--loads", "l.csv", "--dry-run")
    assert ran.status == 0
    assert "would write" in ran.out
    assert sorted(p.name for p in tmp_path.iterdir()) == before


def test_model_file_with_options(tmp_path: Path, seamfold: Seamfold) -> None:
    model_in(tmp_path, box((1, 1, 1)), HALF)
    write_loads(tmp_path / "l.csv", np.ones((1, 3)), {"force": np.ones((1, 3))})
    ran = seamfold("sector.vtu", "--mirror", "x called mid", "--loads", "l.csv")
    assert ran.status == 0, ran.err
    assert (tmp_path / "odd.csv").exists()


def test_hexahedra_are_what_box_makes() -> None:
    """The node numbers that tests here rely on."""
    assert box((1, 1, 1)).cells[0][0] == HEXAHEDRON
    assert box((1, 1, 1)).points[7].tolist() == [1.0, 1.0, 1.0]
