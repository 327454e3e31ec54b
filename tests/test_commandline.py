"""The command line: what it imports, what it prints, and what its exit status says."""

from __future__ import annotations

import json
import os
import pty
import re
import subprocess
import sys
import threading
from collections.abc import Callable
from dataclasses import dataclass
from importlib.metadata import entry_points, version
from itertools import pairwise
from pathlib import Path
from typing import Any

import numpy as np
import pytest
import pyvista

from expander.commandline import main

HEAVY = ("numpy", "scipy", "vtk", "vtkmodules", "meshio", "pyvista", "h5py", "trame")


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
    """The command, run in this process in an empty folder."""
    monkeypatch.chdir(tmp_path)
    monkeypatch.setenv("COLUMNS", "240")

    def run(*words: object) -> Ran:
        monkeypatch.setattr(sys, "argv", ["seamfold", *map(str, words)])
        capfd.readouterr()
        status: Any = 0
        try:
            main()
        except SystemExit as stop:
            status = stop.code
        return Ran(status, *capfd.readouterr())

    return run


def process(*words: object, **more: Any) -> subprocess.CompletedProcess[str]:
    """The command in a process of its own, where neither stream is a terminal."""
    line = [sys.executable, "-m", "expander.commandline", *map(str, words)]
    return subprocess.run(line, capture_output=True, text=True, timeout=60, **more)


def box() -> pyvista.UnstructuredGrid:
    """Hexahedra in 0 .. 2 along each axis, fields that are zero in the planes x, y, z = 0."""
    grid = pyvista.ImageData(dimensions=(3, 3, 3)).cast_to_structured_grid()
    grid = grid.cast_to_unstructured_grid()
    inside = grid.points.prod(axis=1)
    grid.point_data["displacement"] = inside[:, None] * [1.0, 2.0, 3.0]
    grid.point_data["rotation"] = inside[:, None] * [3.0, 1.0, 2.0]
    grid.point_data["stress"] = np.arange(27 * 6.0).reshape(27, 6)
    grid.point_data["temperature"] = inside
    grid.point_data["von_mises"] = 1.0 + inside
    grid.cell_data["part"] = np.arange(8)
    return grid


def wedge(degrees: float) -> pyvista.UnstructuredGrid:
    """Hexahedra between radii 1 and 2 about the line through (1, 0, 0) along z."""
    r, angle, z = np.meshgrid(
        np.linspace(1.0, 2.0, 3), np.deg2rad(np.linspace(0.0, degrees, 3)),
        np.linspace(0.0, 1.0, 3), indexing="ij",
    )  # fmt: skip
    grid = pyvista.StructuredGrid(1.0 + r * np.cos(angle), r * np.sin(angle), z)
    grid = grid.cast_to_unstructured_grid()
    cosine = np.cos(np.pi * np.arctan2(grid.points[:, 1], grid.points[:, 0] - 1.0) / np.deg2rad(
        degrees))  # fmt: skip
    grid.point_data["displacement"] = cosine[:, None] * [0.0, 0.0, 1.0]
    grid.cell_data["q"] = np.arange(3.0 * grid.n_cells).reshape(-1, 3)
    return grid


HALF = '[model]\nfile = "half.vtu"\n[[mirror]]\nname = "mid"\nnormal = "x"\n'


def read(path: Path | str) -> pyvista.UnstructuredGrid:
    grid = pyvista.read(path)
    assert isinstance(grid, pyvista.UnstructuredGrid)
    return grid


def same(a: pyvista.UnstructuredGrid, b: pyvista.UnstructuredGrid, *, but: tuple[str, ...]) -> None:
    """Equal in every array, except the field data named in `but`."""
    np.testing.assert_array_equal(a.points, b.points)
    np.testing.assert_array_equal(a.cells, b.cells)
    np.testing.assert_array_equal(a.celltypes, b.celltypes)
    for first, second in ((a.point_data, b.point_data), (a.cell_data, b.cell_data),
                          (a.field_data, b.field_data)):  # fmt: skip
        assert first.keys() == second.keys()
        for name in first.keys():  # noqa: SIM118  not a dictionary
            if name not in but:
                np.testing.assert_array_equal(first[name], second[name], err_msg=name)
                assert np.asarray(first[name]).dtype == np.asarray(second[name]).dtype


# Help


LOADED = """
import sys
sys.argv = ["seamfold", *sys.argv[1:]]
from expander.commandline import main
try:
    main()
except SystemExit as stop:
    assert not stop.code, stop.code
print("LOADED", *sorted({name.partition(".")[0] for name in sys.modules}))
"""


@pytest.mark.parametrize("words", [["--help"], ["expand", "--help"], ["--version"]], ids=" ".join)
def test_help_answers_at_once(words: list[str]) -> None:
    ran = subprocess.run(
        [sys.executable, "-c", LOADED, *words], capture_output=True, text=True, timeout=60
    )
    assert ran.returncode == 0, ran.stderr
    assert ran.stderr == ""
    text, _, loaded = ran.stdout.rpartition("LOADED")
    assert text.strip()
    assert not set(loaded.split()) & set(HEAVY)


def test_help_of_every_command_has_an_example(seamfold: Seamfold) -> None:
    names = sorted({e.name for e in entry_points(group="seamfold.commands")})
    assert "expand" in names
    for words in [[], *([name] for name in names)]:
        ran = seamfold(*words, "--help")
        assert (ran.status, ran.err) == (0, ""), words
        assert re.search(r"^ *Examples?:\n +seamfold ", ran.out, re.M), words
        assert seamfold(*words, "-h").out == ran.out
    listed = seamfold("--help").out
    for name in names:
        assert re.search(rf"^  {name} +\S", listed, re.M), f"{name} is listed with a description"


def test_help_says_the_exit_status(seamfold: Seamfold) -> None:
    assert "0 done, 1 a check failed, 2 bad input" in seamfold("--help").out


def test_version(seamfold: Seamfold) -> None:
    assert seamfold("--version").out == f"seamfold {version('seamfold')}\n"


@pytest.mark.parametrize("example", [
    'expand half.vtu --mirror "x at 0,0,0 antisymmetric" -o whole.vtu',
    'expand sector.vtu --sectors 12 --axis z --field "spin=axial vector"',
])  # fmt: skip
def test_examples_of_the_help_run(seamfold: Seamfold, example: str) -> None:
    assert f"seamfold {example}" in seamfold("expand", "--help").out
    half = box()
    for name in ("stress", "von_mises", "temperature"):
        del half.point_data[name]
    half.save("half.vtu")
    sector = wedge(30.0)
    sector.points[:, 0] -= 1.0
    sector.point_data.clear()
    sector.cell_data["spin"] = sector.cell_data.pop("q")
    sector.save("sector.vtu")
    words = [w.strip('"') for w in re.findall(r'"[^"]*"|\S+', example)]
    ran = seamfold(*words)
    assert (ran.status, ran.err) == (0, "")


# Options and case file


def test_options_are_the_case_file_for_planes(seamfold: Seamfold) -> None:
    box().save("half.vtu")
    Path("case.toml").write_text(
        '[model]\nfile = "half.vtu"\n'
        '[[mirror]]\nname = "mid"\nnormal = "x"\npoint = [0.0, 1.0, 0.0]\nload = "antisymmetric"\n'
        "[[mirror]]\nnormal = [0.0, 2.0, 0.0]\n"
        '[fields.temperature]\nkind = "scalar"\n'
        '[fields.stress]\nkind = "symmetric tensor"\nseam = "recovered"\nunit = "MPa"\n'
        '[seam]\nlimit = 1e-3\n[output]\nfile = "case.vtu"\nderived = ["von mises"]\n',
        encoding="utf-8",
    )
    ran = seamfold("expand", "case.toml")
    assert (ran.status, ran.err) == (0, "")
    ran = seamfold(
        "expand", "half.vtu", "--mirror", "x at 0,1,0 antisymmetric called mid",
        "--mirror", "0,2,0", "--field", "temperature=scalar", "--field", "stress=symmetric tensor",
        "--set", "fields.stress.seam=recovered", "--set", "fields.stress.unit=MPa",
        "--set", "seam.limit=1e-3", "--set", 'output.derived=["von mises"]', "-o", "options.vtu",
    )  # fmt: skip
    assert (ran.status, ran.err) == (0, "")
    same(read("case.vtu"), read("options.vtu"), but=("input_sha256",))


def test_options_are_the_case_file_for_sectors(seamfold: Seamfold) -> None:
    wedge(30.0).save("sector.vtu")
    Path("case.toml").write_text(
        '[model]\nfile = "sector.vtu"\n[cyclic]\nsectors = 12\naxis = [0.0, 0.0, 3.0]\n'
        "point = [1.0, 0.0, 0.0]\nnodal_diameters = 6\n"
        '[fields.q]\nkind = "polar vector"\n[output]\nfile = "case.vtu"\n',
        encoding="utf-8",
    )
    assert seamfold("expand", "case.toml").status == 0
    ran = seamfold(
        "expand", "sector.vtu", "--sectors", 12, "--axis", "0,0,3", "--axis-point", "1,0,0",
        "--nodal-diameters", 6, "--field", "q=polar vector", "--output", "options.vtu",
    )  # fmt: skip
    assert (ran.status, ran.err) == (0, "")
    same(read("case.vtu"), read("options.vtu"), but=("input_sha256",))


def test_output_name_when_none_is_given(seamfold: Seamfold, tmp_path: Path) -> None:
    (tmp_path / "models").mkdir()
    box().save("models/half.vtu")
    Path("models/a.toml").write_text(HALF, encoding="utf-8")
    assert seamfold("expand", "models/half.vtu", "--mirror", "x").status == 0
    assert seamfold("expand", "models/a.toml").status == 0
    found = sorted(p.name for p in Path("models").iterdir())
    assert found == ["a.toml", "a_full.vtu", "half.vtu", "half_full.vtu"]


def test_files_are_relative_to_the_case_file_and_to_the_shell(
    seamfold: Seamfold, tmp_path: Path
) -> None:
    """Names in a case file are relative to it, the option -o to the folder one is in."""
    (tmp_path / "models").mkdir()
    box().save("models/half.vtu")
    Path("models/a.toml").write_text(HALF + '[output]\nfile = "in.vtu"\n', encoding="utf-8")
    assert seamfold("expand", "models/a.toml").status == 0
    assert seamfold("expand", "models/a.toml", "-o", "here.vtu").status == 0
    assert Path("models/in.vtu").exists()
    assert Path("here.vtu").exists()


def test_set_overrides_the_case_file(seamfold: Seamfold) -> None:
    grid = box()
    grid.point_data.clear()
    grid.point_data["displacement"] = 0.01 * grid.points
    grid.save("half.vtu")
    Path("case.toml").write_text(
        HALF + 'load = "antisymmetric"\n[fields.displacement]\nkind = "polar vector"\nunit = "m"\n'
        "[seam]\nlimit = 1e-5\n",
        encoding="utf-8",
    )
    assert seamfold("expand", "case.toml").status == 1  # tangential motion in the plane
    words = ["expand", "case.toml", "--set", "mirror.0.load=symmetric"]
    assert seamfold(*words).status == 0
    found = json.loads(seamfold(
        *words, "--set", "mirror.0.name=a wall", "--set", "fields.displacement.unit=mm",
        "--set", "output.copies=[1]", "--set", "output.merge=false", "--set", "seam.limit = 1e-2",
        "--set", 'output.file="other.vtu"', "--json",
    ).out)  # fmt: skip
    assert found["planes"][0]["name"] == "a wall"
    assert found["fields"][0]["unit"] == "mm"
    assert [c["copy"] for c in found["copies"]] == [1]
    assert found["points"]["body"] == 27
    assert Path(found["results"][0]["file"]).name == "other.vtu"
    assert read("other.vtu").n_points == 27


@pytest.mark.parametrize("value", ["symmetric", '"symmetric"', "'symmetric'", ' "symmetric" '])
def test_words_of_set_may_be_quoted_or_bare(seamfold: Seamfold, value: str) -> None:
    box().save("half.vtu")
    Path("case.toml").write_text(HALF, encoding="utf-8")
    assert seamfold("expand", "case.toml", "--set", f"mirror.0.load={value}").status == 0


def test_later_settings_win(seamfold: Seamfold) -> None:
    box().save("half.vtu")
    ran = seamfold("expand", "half.vtu", "--mirror", "x", "--set", "output.copies=[0]",
                   "--set", "output.copies=[1]", "--json")  # fmt: skip
    assert [c["copy"] for c in json.loads(ran.out)["copies"]] == [1]


def test_some_copies(seamfold: Seamfold) -> None:
    """A partial body is the whole body's copies, with the same values."""
    wedge(30.0).save("sector.vtu")
    words = ["expand", "sector.vtu", "--sectors", 12, "--axis-point", "1,0,0",
             "--nodal-diameters", 6, "--field", "q=polar vector"]  # fmt: skip
    assert seamfold(*words, "-o", "all.vtu").status == 0
    for copies in ([0, 1], [5], [11, 3, 3]):
        ran = seamfold(*words, "-o", "some.vtu", "--set", f"output.copies={copies}")
        assert ran.status == 0
        assert f"{len(set(copies))} of 12" in ran.out
        whole, part = read("all.vtu"), read("some.vtu")
        picked = whole.extract_cells(np.isin(whole.cell_data["copy"], copies))
        assert part.n_cells == picked.n_cells == 8 * len(set(copies))
        assert part.n_points == picked.n_points
        np.testing.assert_array_equal(part.cell_data["copy"], picked.cell_data["copy"])
        np.testing.assert_array_equal(part.cell_data["q"], picked.cell_data["q"])
        np.testing.assert_allclose(
            part.cell_centers().points, picked.cell_centers().points, atol=1e-14
        )
        at = [part.find_closest_point(p) for p in picked.points]
        np.testing.assert_allclose(part.points[at], picked.points, atol=1e-14)
        np.testing.assert_allclose(
            part.point_data["displacement"][at], picked.point_data["displacement"], atol=1e-14
        )


# JSON and dry run


def no_number(word: str) -> float:
    raise AssertionError(f"{word} is not JSON")


KEYS = {
    "schema", "program", "source", "copies", "planes", "axis", "seams", "points", "cells",
    "fields", "results", "notes", "cautions", "written", "bytes",
}  # fmt: skip


@pytest.mark.parametrize("dry", [False, True])
@pytest.mark.parametrize("kind", ["plane", "sector", "apart", "nan"])
def test_json(seamfold: Seamfold, kind: str, dry: bool) -> None:
    grid = wedge(30.0) if kind == "sector" else box()
    if kind == "nan":
        grid.point_data["von_mises"][5] = np.nan
    if kind == "apart":
        grid.points[:, 0] += 10.0
    grid.save("model.vtu")
    words = ["--sectors", 12, "--axis-point", "1,0,0", "--nodal-diameters", 6, "--field",
             "q=axial vector"] if kind == "sector" else ["--mirror", "x"]  # fmt: skip
    before = sorted(Path().iterdir())
    ran = seamfold("expand", "model.vtu", *words, "--allow-nan", "--json", *["--dry-run"] * dry)
    assert (ran.status, ran.err) == (0, "")
    found = json.loads(ran.out, parse_constant=no_number)
    assert found.keys() >= KEYS
    assert found["schema"] == 1
    assert found["program"] == f"seamfold {version('seamfold')}"
    assert found["written"] is not dry
    copies = 12 if kind == "sector" else 2
    assert [c["copy"] for c in found["copies"]] == list(range(copies))
    assert found["copies"][0]["made"] == "as modelled"
    assert found["cells"] == {"sector": 8, "body": 8 * copies, "merged": 0}
    shared = {"plane": 9, "nan": 9, "apart": 0, "sector": 108}[kind]
    assert found["points"] == {"sector": 27, "body": 27 * copies - shared, "merged": shared}
    if dry:
        assert sorted(Path().iterdir()) == before
        return
    (result,) = found["results"]
    whole = read(result["file"])
    assert (whole.n_points, whole.n_cells) == (found["points"]["body"], found["cells"]["body"])
    arrays = [whole.point_data[n] for n in whole.point_data.keys()]  # noqa: SIM118
    arrays += [whole.cell_data[n] for n in whole.cell_data.keys()]  # noqa: SIM118
    values = sum(np.asarray(a).nbytes for a in arrays) + whole.points.nbytes
    cells = whole.n_cells * (8 * 4 + 4 + 1)  # connectivity, offset and type of a hexahedron
    assert found["bytes"] == values + cells
    assert found["bytes"] < Path(result["file"]).stat().st_size < found["bytes"] + 20_000


def test_dry_run_says_the_same_and_writes_nothing(seamfold: Seamfold) -> None:
    box().save("half.vtu")
    before = sorted(Path().iterdir())
    dry = seamfold("expand", "half.vtu", "--mirror", "x", "--dry-run")
    assert sorted(Path().iterdir()) == before
    wet = seamfold("expand", "half.vtu", "--mirror", "x")
    assert (dry.status, dry.err) == (0, "")
    assert "would write" in dry.out
    assert dry.out.replace("would write", "wrote") == wet.out


# Streams and exit status


def test_streams_that_are_no_terminal(tmp_path: Path) -> None:
    box().save(tmp_path / "half.vtu")
    for more in ([], ["--json"], ["--dry-run"]):
        ran = process("expand", "half.vtu", "--mirror", "x", *more, cwd=tmp_path)
        assert (ran.returncode, ran.stderr) == (0, "")
        assert "\x1b" not in ran.stdout
        assert "\r" not in ran.stdout


def test_progress_is_shown_on_a_terminal_only_on_the_error_stream(tmp_path: Path) -> None:
    box().save(tmp_path / "half.vtu")
    words = ["expand", "half.vtu", "--mirror", "x", "--json", "-o", "[bold]whole.vtu"]
    quiet = process(*words, cwd=tmp_path)
    ours, theirs = pty.openpty()
    shown: list[bytes] = []

    def drain() -> None:
        try:
            while chunk := os.read(ours, 4096):
                shown.append(chunk)
        except OSError:  # the other end is closed
            pass

    reader = threading.Thread(target=drain)
    reader.start()
    environment = {k: v for k, v in os.environ.items() if k != "NO_COLOR"} | {"TERM": "xterm"}
    try:
        ran = subprocess.run(
            [sys.executable, "-m", "expander.commandline", *words], cwd=tmp_path, text=True,
            stdout=subprocess.PIPE, stderr=theirs, timeout=60, env=environment,
        )  # fmt: skip
    finally:
        os.close(theirs)
        reader.join(timeout=10)
        os.close(ours)
    assert ran.returncode == 0
    assert ran.stdout == quiet.stdout
    assert b"[bold]whole.vtu" in b"".join(shown), "the name as it is, not taken for a style"


def test_exit_status_of_a_process(tmp_path: Path) -> None:
    box().save(tmp_path / "half.vtu")
    grid = box()
    grid.point_data["displacement"][:, 0] = 1.0
    grid.save(tmp_path / "open.vtu")
    for name, status in (("half.vtu", 0), ("open.vtu", 1), ("none.vtu", 2)):
        ran = process("expand", name, "--mirror", "x", cwd=tmp_path)
        assert ran.returncode == status
        assert (ran.stdout == "") == (status > 0)
        assert (ran.stderr == "") == (status == 0)


def test_console_script(tmp_path: Path) -> None:
    script = Path(sys.executable).with_name("seamfold")
    if not script.exists():
        pytest.skip("it is not installed beside the interpreter")
    ran = subprocess.run([script, "expand", "none.vtu", "--mirror", "x"], cwd=tmp_path, text=True,
                         capture_output=True, timeout=60)  # fmt: skip
    assert (ran.returncode, ran.stdout) == (2, "")
    assert ran.stderr.startswith("seamfold: none.vtu does not exist")


def test_reader_that_stops_listening_is_no_failed_check(tmp_path: Path) -> None:
    """As in `seamfold expand .. | head -1`: status 1 would say that a check failed."""
    box().save(tmp_path / "half.vtu")
    ours, theirs = os.pipe()
    os.close(ours)
    try:
        ran = subprocess.run(
            [sys.executable, "-m", "expander.commandline", "expand", "half.vtu", "--mirror", "x"],
            cwd=tmp_path, stdout=theirs, stderr=subprocess.PIPE, timeout=60,
        )  # fmt: skip
    finally:
        os.close(theirs)
    assert ran.stderr == b""
    assert ran.returncode != 1
    assert read(tmp_path / "half_full.vtu").n_cells == 16


def test_exit_status_of_usage(seamfold: Seamfold) -> None:
    ran = seamfold("expand")
    assert (ran.status, ran.out) == (2, "")
    assert "CASE" in ran.err
    ran = seamfold("expnd", "half.vtu")
    assert (ran.status, ran.out) == (2, "")
    assert "expnd" in ran.err
    ran = seamfold()
    assert "expand" in ran.out + ran.err
    assert "Traceback" not in ran.err


# The table


def rows(out: str) -> dict[str, dict[str, str]]:
    """What the printed tables say of each field, by heading; columns are found by the headings."""
    found: dict[str, dict[str, str]] = {}
    lines = iter(out.splitlines())
    for line in lines:
        if not re.match(r"\s*field\s{2,}", line):
            continue
        headings = re.split(r"\s{2,}", line.strip())
        starts = [line.index(h) for h in headings] + [10_000]
        next(lines)
        for row in lines:
            if not row.strip():
                break
            cells = [row[a:b].strip() for a, b in pairwise(starts)]
            found.setdefault(cells[0], {}).update(zip(headings, cells, strict=True))
    return found


def cell(row: dict[str, str], word: str) -> str:
    """The cell whose heading holds a word."""
    (heading,) = (h for h in row if word in h)
    return row[heading]


# Components that change sign across a cut plane with this normal, written by hand.
SIGNS = {
    "x": {"displacement": "x", "rotation": "y z", "stress": "xy zx"},
    "y": {"displacement": "y", "rotation": "x z", "stress": "xy yz"},
    "z": {"displacement": "z", "rotation": "x y", "stress": "yz zx"},
}
ODD_SIGNS = {
    "x": {"displacement": "y z", "rotation": "x", "stress": "xx yy zz yz"},
    "y": {"displacement": "x z", "rotation": "y", "stress": "xx yy zz zx"},
    "z": {"displacement": "x y", "rotation": "z", "stress": "xx yy zz xy"},
}


@pytest.mark.parametrize("normal", ["x", "y", "z"])
@pytest.mark.parametrize("load", ["symmetric", "antisymmetric"])
def test_table_says_what_was_decided(seamfold: Seamfold, normal: str, load: str) -> None:
    box().save("half.vtu")
    ran = seamfold("expand", "half.vtu", "--mirror", f"{normal} {load} called mid",
                   "--field", "temperature=scalar")  # fmt: skip
    assert (ran.status, ran.err) == (0, "")
    table = rows(ran.out)
    signs = SIGNS if load == "symmetric" else ODD_SIGNS
    right = {
        "temperature": ("points", "scalar", "declared", "load", "agree"),
        "displacement": ("points", "polar vector", "by name", "load", "agree"),
        "rotation": ("points", "axial vector", "by name", "load", "agree"),
        "stress": ("points", "symmetric tensor", "by name", "load", "recovered"),
        "von_mises": ("points", "invariant", "by name", "nothing", "recovered"),
        "part": ("cells", "label", "by name", "body", "-"),
    }
    assert table.keys() == right.keys()
    for name, expected in right.items():
        row = table[name]
        headings = ("on", "kind", "decided", "follows")
        assert (*(row[h] for h in headings), cell(row, "seam")) == expected, name
    for name, changes in signs[normal].items():
        assert cell(table[name], "mid") == changes
    assert cell(table["von_mises"], "mid") == "-"
    assert cell(table["temperature"], "mid") == ("-" if load == "symmetric" else "its sign")
    assert f"mid {load}" in ran.out
    assert "mirrored in 'mid' (9 nodes)" in ran.out
    assert "45 nodes, 16 cells" in ran.out
    assert "sector: 27 nodes, 8 cells" in ran.out


def test_signs_of_the_table_are_those_of_the_values(seamfold: Seamfold) -> None:
    """Read back from the file, on the mirrored copy of the far node (2, 2, 2)."""
    box().save("half.vtu")
    for normal in "xyz":
        for load in ("symmetric", "antisymmetric"):
            ran = seamfold("expand", "half.vtu", "--mirror", f"{normal} {load} called mid",
                           "--field", "temperature=scalar", "--json")  # fmt: skip
            whole = read("half_full.vtu")
            here = np.array([2.0, 2.0, 2.0])
            there = here.copy()
            there["xyz".index(normal)] = -2.0
            a, b = (whole.find_closest_point(p) for p in (here, there))
            for f in json.loads(ran.out)["fields"]:
                if f["name"] not in ("displacement", "rotation", "stress"):
                    continue
                values = whole.point_data[f["name"]]
                flipped = [c for c, u, v in zip(f["components"], values[a], values[b],
                                                strict=True) if v == -u]  # fmt: skip
                kept = [c for c, u, v in zip(f["components"], values[a], values[b],
                                             strict=True) if v == u]  # fmt: skip
                said = f["changes_sign"]["result"]["mid"].split()
                assert flipped == said
                assert kept == [c for c in f["components"] if c not in said]


def test_table_of_several_planes_and_cases(seamfold: Seamfold) -> None:
    box().save("half.vtu")
    Path("case.toml").write_text(
        '[model]\nfile = "half.vtu"\n[[mirror]]\nname = "a"\nnormal = "x"\n'
        '[[mirror]]\nname = "b"\nnormal = "y"\n[fields.temperature]\nkind = "scalar"\n'
        '[[case]]\nname = "even"\n[[case]]\nname = "odd"\nload = { a = "antisymmetric" }\n',
        encoding="utf-8",
    )
    ran = seamfold("expand", "case.toml")
    assert (ran.status, ran.err) == (0, "")
    row = rows(ran.out)["displacement"]
    assert cell(row, "a, even") == "x"
    assert cell(row, "a, odd") == "y z"
    assert cell(row, "b, even") == cell(row, "b, odd") == "y"
    assert cell(rows(ran.out)["von_mises"], "a, odd") == "-"
    assert re.search(r"even: a symmetric, b symmetric\s", ran.out)
    assert re.search(r"odd: a antisymmetric, b symmetric\s", ran.out)
    assert re.search(r"wrote \S*case_full_even.vtu", ran.out)
    assert re.search(r"wrote \S*case_full_odd.vtu", ran.out)
    assert re.search(r"index \S*case_full.pvd", ran.out)


def test_table_of_a_skew_plane(seamfold: Seamfold) -> None:
    box().save("half.vtu")
    ran = seamfold("expand", "half.vtu", "--mirror", "-1,-1,-1 called skew")
    assert (ran.status, ran.err) == (0, "")
    table = rows(ran.out)
    assert cell(table["displacement"], "skew") == "combined"
    assert cell(table["von_mises"], "skew") == "-"


def test_table_in_a_cylindrical_frame(seamfold: Seamfold) -> None:
    """A plane through the axis flips theta, one normal to it flips z."""
    grid = wedge(30.0)
    grid.points[:, 0] -= 1.0
    grid.clear_data()
    grid.cell_data["q"] = np.ones((8, 3))
    grid.cell_data["r"] = np.ones((8, 3))
    grid.cell_data["s"] = np.ones((8, 6))
    grid.save("half.vtu")
    fields = "".join(
        f'[fields.{n}]\nkind = "{k}"\nframe = "shaft"\n'
        for n, k in (("q", "polar vector"), ("r", "axial vector"), ("s", "symmetric tensor"))
    )
    Path("case.toml").write_text(
        '[model]\nfile = "half.vtu"\n[[mirror]]\nname = "side"\nnormal = "y"\n'
        '[[mirror]]\nname = "end"\nnormal = "z"\n[frames.shaft]\ntype = "cylindrical"\n' + fields,
        encoding="utf-8",
    )  # fmt: skip
    ran = seamfold("expand", "case.toml")
    assert (ran.status, ran.err) == (0, "")
    table = rows(ran.out)
    assert [cell(table[n], "side") for n in "qrs"] == ["t", "r z", "rt tz"]
    assert [cell(table[n], "end") for n in "qrs"] == ["z", "r t", "tz zr"]


def test_table_shows_units(seamfold: Seamfold) -> None:
    """Units are words shown in tables; that of the model is the unit of lengths."""
    box().save("half.vtu")
    ran = seamfold(
        "expand",
        "half.vtu",
        "--mirror",
        "x",
        "--field",
        "displacement=polar vector",
        "--set",
        "fields.displacement.unit=furlong",
        "--set",
        "model.unit=cubit",
    )
    assert (ran.status, ran.err) == (0, "")  # fmt: skip
    assert "furlong" in ran.out
    assert "cubit" in ran.out


def test_declared_against_the_name_is_said(seamfold: Seamfold) -> None:
    box().save("half.vtu")
    ran = seamfold("expand", "half.vtu", "--mirror", "x", "--field", "rotation=polar vector",
                   "--json")  # fmt: skip
    (field,) = (f for f in json.loads(ran.out)["fields"] if f["name"] == "rotation")
    assert field["kind"] == "polar vector"
    assert re.fullmatch(r"declared \(by name it would be an? axial vector\)", field["decided"])


def test_sum_says_what_was_left_out(seamfold: Seamfold) -> None:
    box().save("half.vtu")
    Path("case.toml").write_text(
        HALF + '[[case]]\nname = "a"\n[[case]]\nname = "b"\n[[sum]]\nname = "both"\n'
        "terms = { a = 1.0, b = -0.5 }\n",
        encoding="utf-8",
    )
    ran = seamfold("expand", "case.toml")
    assert (ran.status, ran.err) == (0, "")
    line = next(line for line in ran.out.splitlines() if line.startswith("wrote"))
    assert "both = 1 a + -0.5 b" in line or "both = 1 a - 0.5 b" in line
    assert "left out: von_mises" in line
    assert "von_mises" not in read("case_full.vtu").point_data


@pytest.mark.parametrize("columns", [60, 80, 120])
def test_table_on_a_narrow_terminal(
    seamfold: Seamfold, monkeypatch: pytest.MonkeyPatch, columns: int
) -> None:
    grid = box()
    grid.cell_data["a_field_whose_name_is_longer_than_a_line_of_sixty_letters_is"] = np.arange(8)
    grid.save("half.vtu")
    monkeypatch.setenv("COLUMNS", str(columns))
    monkeypatch.setenv("TTY_COMPATIBLE", "1")  # as on a terminal
    ran = seamfold("expand", "half.vtu", "--mirror", "x", "--mirror", "y", "--mirror", "z")
    assert ran.status == 0
    lines = re.sub("\x1b[^a-zA-Z]*[a-zA-Z]", "", ran.out).splitlines()
    assert max(map(len, lines)) <= columns
    assert any(re.match(r" *displacement +x +y +z *$", line) for line in lines)
    assert any(re.match(r" *stress +xy zx +xy yz +yz zx *$", line) for line in lines)
