"""Bad input: one clear message that names what is wrong and a remedy, and nothing on disk."""

from __future__ import annotations

import copy
import errno
import json
import os
import re
import resource
import shutil
import signal
import subprocess
import sys
import tempfile
import time
import tomllib
from collections.abc import Sequence
from dataclasses import dataclass
from pathlib import Path
from typing import Any
from xml.sax.saxutils import quoteattr

import numpy as np
import pytest
import pyvista
from vtkmodules.vtkCommonCore import vtkStringOutputWindow
from vtkmodules.vtkCommonDataModel import vtkUnstructuredGrid
from vtkmodules.vtkIOXML import vtkXMLUnstructuredGridReader

import expander.images
from expander.casefile import validate_case
from expander.commandline import main
from expander.errors import InputError

JARGON = (
    "Traceback", "unexpected problem", "instance of", "dictionary", "NoneType", "pydantic",
    "<class", "Errno", "nan_to_num", "ufunc",
)  # fmt: skip


def box(n: int = 2) -> pyvista.UnstructuredGrid:
    """Hexahedra in 0 .. n along each axis, with a displacement that closes in any plane."""
    grid = pyvista.ImageData(dimensions=(n + 1,) * 3).cast_to_structured_grid()
    grid = grid.cast_to_unstructured_grid()
    grid.point_data["displacement"] = 0.01 * grid.points
    return grid


def wedge(degrees: float, layers: int = 2) -> pyvista.UnstructuredGrid:
    """Hexahedra between radii 1 and 2, from the angle 0 to `degrees` about z, height 0 to 1."""
    r, angle, z = np.meshgrid(
        np.linspace(1.0, 2.0, 3),
        np.deg2rad(np.linspace(0.0, degrees, layers + 1)),
        np.linspace(0.0, 1.0, 3),
        indexing="ij",
    )
    grid = pyvista.StructuredGrid(r * np.cos(angle), r * np.sin(angle), z)
    grid = grid.cast_to_unstructured_grid()
    grid.point_data["displacement"] = 0.01 * grid.points
    return grid


def toml(value: Any) -> str:
    """A value as TOML, tables inline."""
    if isinstance(value, dict):
        return "{ " + ", ".join(f"{toml(k)} = {toml(v)}" for k, v in value.items()) + " }"
    if isinstance(value, list):
        return "[" + ", ".join(toml(v) for v in value) + "]"
    if isinstance(value, float):
        return repr(float(value))
    return json.dumps(value, ensure_ascii=False)


@dataclass
class Ran:
    """What a command left: exit status, both streams, names of new or changed files."""

    status: Any
    out: str
    err: str
    changed: list[str]


@dataclass
class Bench:
    """A folder with models and cases, and the command run in it."""

    folder: Path
    capture: pytest.CaptureFixture[str]
    patch: pytest.MonkeyPatch

    def model(
        self, grid: pyvista.DataSet, name: str = "half.vtu", rename: str | None = None
    ) -> Path:
        """Save a model; the array `PLACE` is called `rename`: VTK's writer does not quote."""
        path = self.folder / name
        grid.save(path)
        if rename is not None:
            quoted = quoteattr(rename, {"\n": "&#10;", "\t": "&#9;"})
            content = path.read_bytes()
            assert content.count(b'Name="PLACE"') == 1
            path.write_bytes(content.replace(b'Name="PLACE"', b"Name=" + quoted.encode()))
        return path

    def case(self, content: str | dict[str, Any], name: str = "case.toml") -> Path:
        if isinstance(content, dict):
            content = "".join(f"{key} = {toml(value)}\n" for key, value in content.items())
        (self.folder / name).write_text(content, encoding="utf-8")
        return self.folder / name

    def state(self) -> dict[str, tuple[int, int]]:
        found = {}
        for path in self.folder.rglob("*"):
            about = path.lstat()
            size = 0 if path.is_dir() else about.st_size
            found[str(path.relative_to(self.folder))] = (size, about.st_ino)
        return found

    def run(self, *words: object) -> Ran:
        before = self.state()
        self.patch.setattr(sys, "argv", ["seamfold", "expand", *map(str, words)])
        self.capture.readouterr()
        status: Any = 0
        try:
            main()
        except SystemExit as stop:
            status = stop.code
        out, err = self.capture.readouterr()
        after = self.state()
        changed = sorted(n for n in after if before.get(n) != after[n])
        changed += sorted(n for n in before if n not in after)
        return Ran(status, out, err, changed)

    def accepts(self, *words: object) -> Ran:
        ran = self.run(*words)
        assert ran.err == ""
        assert ran.status == 0
        return ran

    def refuses(self, *words: object, says: Sequence[str] = (), status: int = 2) -> str:
        """One message with a remedy on stderr, nothing on stdout, nothing on disk.

        `says` are words of the message; "this|that" is one of the two.
        """
        ran = self.run(*words)
        assert ran.status == status, ran
        assert ran.out == ""
        assert ran.changed == []
        assert ran.err.startswith("seamfold: ")
        assert ran.err.count("seamfold: ") == 1, "one message"
        found, _, remedy = ran.err.removeprefix("seamfold: ").partition("\n  ")
        assert found.strip()
        assert remedy.strip(), f"no remedy in {ran.err!r}"
        for word in JARGON:
            assert word not in ran.err
        for word in says:
            assert any(w in ran.err for w in word.split("|")), f"{word!r} is not in {ran.err!r}"
        return ran.err


@pytest.fixture
def bench(
    tmp_path: Path, capfd: pytest.CaptureFixture[str], monkeypatch: pytest.MonkeyPatch
) -> Bench:
    monkeypatch.chdir(tmp_path)
    monkeypatch.setenv("COLUMNS", "200")
    return Bench(tmp_path, capfd, monkeypatch)


def read_back(path: Path) -> vtkUnstructuredGrid:
    """The file through VTK's own reader, which must not complain."""
    window = vtkStringOutputWindow()
    before = vtkStringOutputWindow.GetInstance()
    vtkStringOutputWindow.SetInstance(window)
    try:
        reader = vtkXMLUnstructuredGridReader()
        reader.SetFileName(str(path))
        reader.Update()
    finally:
        vtkStringOutputWindow.SetInstance(before)
    assert window.GetOutput() == ""
    return reader.GetOutput()


def names_of(data: Any) -> list[str]:
    return [data.GetArrayName(k) for k in range(data.GetNumberOfArrays())]


# Model files


def test_a_sound_model_is_accepted(bench: Bench) -> None:
    bench.model(box())
    ran = bench.accepts("half.vtu", "--mirror", "x")
    assert ran.changed == ["half_full.vtu"]


@pytest.mark.parametrize("name", ["no.vtu", "no.vtk", "no/such/half.vtu", "half.VTU"])
def test_missing_model(bench: Bench, name: str) -> None:
    bench.refuses(name, "--mirror", "x", says=[name, "does not exist"])
    bench.case(f'[model]\nfile = "{name}"\n[[mirror]]\nnormal = "x"\n')
    bench.refuses("case.toml", says=[name, "does not exist"])


@pytest.mark.parametrize("suffix", [".vtu", ".vtk", ".vtp"])
def test_empty_file(bench: Bench, suffix: str) -> None:
    (bench.folder / f"half{suffix}").write_bytes(b"")
    bench.refuses(f"half{suffix}", "--mirror", "x", says=[f"half{suffix}", "empty"])


@pytest.mark.parametrize("suffix", [".vtu", ".vtk", ".vtp"])
@pytest.mark.parametrize("seed", range(4))
def test_random_bytes(bench: Bench, suffix: str, seed: int) -> None:
    noise = np.random.default_rng(seed).bytes(3000)
    (bench.folder / f"half{suffix}").write_bytes(noise)
    bench.refuses(f"half{suffix}", "--mirror", "x", says=[f"half{suffix}"])


@pytest.mark.parametrize("binary", [True, False])
@pytest.mark.parametrize("part", [0.1, 0.3, 0.5, 0.7, 0.9, 0.98])
@pytest.mark.parametrize("suffix", [".vtu", ".vtk"])
def test_truncated_model(bench: Bench, suffix: str, part: float, binary: bool) -> None:
    path = bench.folder / f"half{suffix}"
    box(3).save(path, binary=binary)
    whole = path.read_bytes()
    path.write_bytes(whole[: int(part * len(whole))])
    bench.refuses(path.name, "--mirror", "x", says=[path.name])


def test_model_that_is_a_folder(bench: Bench) -> None:
    (bench.folder / "half.vtu").mkdir()
    bench.refuses("half.vtu", "--mirror", "x", says=["half.vtu", "folder"])


def test_model_that_is_a_pipe(bench: Bench) -> None:
    """Nothing waits for a writer that never comes."""
    os.mkfifo(bench.folder / "half.vtu")
    ran = subprocess.run(command("half.vtu", "--mirror", "x"), capture_output=True, text=True,
                         timeout=10)  # fmt: skip
    assert (ran.returncode, ran.stdout) == (2, "")
    assert "half.vtu is not a regular file" in ran.stderr


@pytest.mark.parametrize("name", ["half.docx", "half", "half.vtu.gz"])
def test_model_of_an_unknown_type(bench: Bench, name: str) -> None:
    (bench.folder / name).write_bytes(b"something")
    bench.refuses(name, "--mirror", "x", says=[name, ".vtu"])


def test_model_with_the_wrong_extension(bench: Bench) -> None:
    box().save(bench.folder / "half.vtk")
    (bench.folder / "half.vtk").rename(bench.folder / "half.vtu")
    bench.refuses("half.vtu", "--mirror", "x", says=["half.vtu", "extension"])


def test_mesh_without_cells_or_points(bench: Bench) -> None:
    grid = pyvista.UnstructuredGrid()
    bench.model(grid, "none.vtu")
    bench.refuses("none.vtu", "--mirror", "x", says=["none.vtu", "no points"])
    grid.points = np.eye(3)
    bench.model(grid, "points.vtu")
    bench.refuses("points.vtu", "--mirror", "x", says=["points.vtu", "no cells"])


def test_coordinates_that_are_not_finite(bench: Bench) -> None:
    grid = box()
    grid.points[5, 1] = np.nan
    bench.model(grid)
    bench.refuses("half.vtu", "--mirror", "x", says=["half.vtu", "5", "coordinate"])


@pytest.mark.parametrize(
    ("vtk_type", "name", "nodes"),
    [(11, "voxel", 8), (8, "pixel", 4), (6, "triangle strip", 5), (4, "poly-line", 4),
     (72, "Lagrange hexahedron", 8), (77, "Bezier quadrilateral", 4)],
)  # fmt: skip
def test_cell_type_that_is_not_served_is_named(
    bench: Bench, vtk_type: int, name: str, nodes: int
) -> None:
    points = np.array([[x, y, z] for z in (0, 1) for y in (0, 1) for x in (0, 1)], dtype=float)
    grid = pyvista.UnstructuredGrid(
        np.array([nodes, *range(nodes)]), np.array([vtk_type], dtype=np.uint8), points
    )
    bench.model(grid)
    message = bench.refuses("half.vtu", "--mirror", "x", says=["half.vtu", name])
    assert re.search(r"\byet\b", message)


def test_polyhedron_is_named(bench: Bench) -> None:
    points = np.array([[0, 0, 0], [1, 0, 0], [0, 1, 0], [0, 0, 1]], dtype=float)
    faces = [3, 0, 2, 1, 3, 0, 1, 3, 3, 1, 2, 3, 3, 0, 3, 2]
    grid = pyvista.UnstructuredGrid(
        np.array([len(faces) + 1, 4, *faces]), np.array([42], dtype=np.uint8), points
    )
    bench.model(grid)
    message = bench.refuses("half.vtu", "--mirror", "x", says=["half.vtu", "polyhedr"])
    assert re.search(r"\b(yet|later)\b", message)


# The case file as a file


def test_missing_case_file(bench: Bench) -> None:
    bench.refuses("nothing.toml", says=["nothing.toml", "no such"])


def test_case_file_that_is_a_folder(bench: Bench) -> None:
    (bench.folder / "case.toml").mkdir()
    bench.refuses("case.toml", says=["case.toml", "folder"])


@pytest.mark.parametrize("content", [b"\xff\xfe\x00m", bytes(range(256)), b"\x89PNG\r\n\x1a\n"])
def test_binary_case_file(bench: Bench, content: bytes) -> None:
    (bench.folder / "case.toml").write_bytes(content)
    bench.refuses("case.toml", says=["case.toml"])


@pytest.mark.parametrize(
    "text",
    ["[model\nfile = 'x'", "[model]\nfile = half.vtu", "normal = x", "[model]\nlinear = True",
     "[model]\nfile = 'a'\nfile = 'b'", "just words"],
)  # fmt: skip
def test_wrong_toml(bench: Bench, text: str) -> None:
    bench.case(text)
    bench.refuses("case.toml", says=["case.toml", "TOML", "at line|at end"])


def test_case_file_with_a_byte_order_mark(bench: Bench) -> None:
    bench.model(box())
    text = '[model]\nfile = "half.vtu"\n[[mirror]]\nnormal = "x"\n'
    (bench.folder / "case.toml").write_text(text, encoding="utf-8-sig")
    bench.accepts("case.toml")


@pytest.mark.parametrize("text", ["", "# nothing\n", '[model]\nfile = "half.vtu"\n'])
def test_case_without_plane_or_axis(bench: Bench, text: str) -> None:
    bench.model(box())
    bench.case(text)
    bench.refuses("case.toml", says=["plane", "axis", "[[mirror]]", "[cyclic]"])


def test_model_without_plane_or_axis(bench: Bench) -> None:
    bench.model(box())
    bench.refuses("half.vtu", says=["plane", "axis", "[[mirror]]|--mirror"])


def test_case_without_a_model(bench: Bench) -> None:
    bench.case('[[mirror]]\nnormal = "x"\n')
    bench.refuses("case.toml", says=["[model]", "file ="])


# Keys of the case file

FULL: dict[str, Any] = {
    "model": {"file": "sector.vtu", "linear": True, "unit": "mm"},
    "mirror": [{"name": "mid", "normal": "z", "point": [0.0, 0.0, 0.0], "load": "symmetric"}],
    "cyclic": {
        "sectors": 12, "axis": "z", "point": [0.0, 0.0, 0.0], "nodal_diameters": 0,
        "phase": "auto",
    },
    "frames": {"shaft": {"type": "cylindrical", "axis": "z", "point": [0.0, 0.0, 0.0]}},
    "fields": {
        "displacement": {"kind": "polar vector", "unit": "mm", "seam": "agree"},
        "stress": {
            "kind": "symmetric tensor", "components": "xx yy zz xy yz zx", "shear": "tensor",
            "seam": "recovered", "follows": "load", "frame": "shaft", "arrays": ["stress"],
            "on": "points", "unit": "MPa",
        },
        "turning": {"kind": "axial vector", "arrays": "motion", "columns": [4, 5, 6]},
        "moving": {"kind": "polar vector", "arrays": "motion", "columns": [1, 2, 3]},
    },
    "case": [
        {"name": "even", "file": "sector.vtu", "load": {"mid": "symmetric"},
         "nodal_diameters": 0, "phase": "auto", "factor": 1.0},
        {"name": "odd"},
    ],
    "sum": [{"name": "both", "terms": {"even": 1.0, "odd": 0.5}}],
    "seam": {"tolerance": 1e-4, "limit": 1e-4, "open": "refuse"},
    "output": {
        "file": "whole.vtu", "results": ["both"], "copies": [0, 1], "merge": True,
        "encoding": "raw", "derived": ["von mises"],
    },
}  # fmt: skip

Path_ = tuple[str | int, ...]
MISSING = object()


def changed(where: Path_, value: object) -> dict[str, Any]:
    """The full case with one key set, or taken away."""
    raw = copy.deepcopy(FULL)
    target: Any = raw
    for key in where[:-1]:
        target = target.setdefault(key, {}) if isinstance(target, dict) else target[key]
    if value is MISSING:
        del target[where[-1]]
    else:
        target[where[-1]] = value
    return raw


def words(where: Path_) -> str:
    """``("mirror", 0, "normal")`` as ``mirror[0].normal``."""
    text = ""
    for key in where:
        text += f"[{key}]" if isinstance(key, int) else f".{key}" if text else str(key)
    return text


@pytest.fixture
def sector(bench: Bench) -> Bench:
    grid = wedge(30.0)
    grid.point_data["stress"] = np.zeros((grid.n_points, 6))
    grid.point_data["motion"] = np.zeros((grid.n_points, 6))
    bench.model(grid, "sector.vtu")
    return bench


def test_every_key_of_this_version_is_accepted(sector: Bench) -> None:
    sector.case(FULL)
    ran = sector.accepts("case.toml")
    assert ran.changed == ["whole.vtu"]


WRONG_KEYS = [
    (("mirrors",), "mirror"), (("cyclc",), "cyclic"), (("feilds",), "fields"),
    (("model", "fil"), "file"), (("model", "liner"), "linear"), (("model", "result"), "results"),
    (("mirror", 0, "norml"), "normal"), (("mirror", 0, "points"), "point"),
    (("cyclic", "sector"), "sectors"), (("cyclic", "nodal_diameter"), "nodal_diameters"),
    (("cyclic", "nodal-diameters"), "nodal_diameters"),
    (("fields", "stress", "component"), "components"), (("fields", "stress", "follow"), "follows"),
    (("frames", "shaft", "axes"), "axis"), (("case", 1, "loads"), "load"),
    (("case", 0, "factors"), "factor"), (("sum", 0, "term"), "terms"),
    (("seam", "tolerence"), "tolerance"), (("output", "derive"), "derived"),
    (("output", "files"), "file"), (("output", "copy"), "copies"),
]  # fmt: skip


@pytest.mark.parametrize(("where", "meant"), WRONG_KEYS, ids=[words(w) for w, _ in WRONG_KEYS])
def test_wrong_key(sector: Bench, where: Path_, meant: str) -> None:
    sector.case(changed(where, 1))
    sector.refuses("case.toml", says=["case.toml", words(where), f"Did you mean '{meant}'?"])


@pytest.mark.parametrize("table", ["folder", "source"])
def test_names_used_inside_are_no_keys(sector: Bench, table: str) -> None:
    sector.case(changed((table,), "here"))
    sector.refuses("case.toml", says=["case.toml", table, "unknown", "mirror"])


MISSING_KEYS = [
    ("mirror", 0, "normal"), ("cyclic", "sectors"), ("fields", "stress", "kind"),
    ("frames", "shaft", "type"), ("case", 1, "name"), ("sum", 0, "name"), ("sum", 0, "terms"),
]  # fmt: skip


@pytest.mark.parametrize("where", MISSING_KEYS, ids=words)
def test_missing_key(sector: Bench, where: Path_) -> None:
    sector.case(changed(where, MISSING))
    sector.refuses("case.toml", says=["case.toml", words(where), "missing", f"{where[-1]} = "])


# Key, value, words of the message besides the key.
WRONG_VALUES: list[tuple[Path_, object, tuple[str, ...]]] = [
    (("model",), "half.vtu", ("[model]",)),
    (("model", "file"), 3, ("string",)),
    (("model", "file"), ["a.vtu"], ("string",)),
    (("model", "linear"), "yes", ("true or false|boolean",)),
    (("model", "linear"), 1, ("true or false|boolean",)),
    (("model", "results"), 3, ("list",)),
    (("model", "unit"), 5, ("string",)),
    (("mirror",), {"normal": "x"}, ("[[mirror]]",)),
    (("mirror",), "x", ("[[mirror]]",)),
    (("mirror", 0), "x", ("[[mirror]]",)),
    (("mirror", 0, "name"), 1, ("string",)),
    (("mirror", 0, "normal"), "w", ("'x'", "'y'", "'z'")),
    (("mirror", 0, "normal"), "X", ("'x'", "'y'", "'z'")),
    (("mirror", 0, "normal"), [1.0, 0.0], ("3",)),
    (("mirror", 0, "normal"), [1.0, 0.0, 0.0, 0.0], ("3",)),
    (("mirror", 0, "normal"), ["x", "y", "z"], ("number",)),
    (("mirror", 0, "normal"), True, ("'x'",)),
    (("mirror", 0, "point"), [0.0, 0.0], ("3",)),
    (("mirror", 0, "point"), "origin", ("list",)),
    (("mirror", 0, "point"), 0.0, ("list",)),
    (("mirror", 0, "load"), "odd", ("symmetric", "antisymmetric")),
    (("mirror", 0, "load"), "Symmetric", ("symmetric", "antisymmetric")),
    (("mirror", 0, "load"), -1, ("symmetric", "antisymmetric")),
    (("cyclic",), 12, ("[cyclic]",)),
    (("cyclic",), [{"sectors": 12}], ("[cyclic]",)),
    (("cyclic", "sectors"), 12.0, ("integer",)),
    (("cyclic", "sectors"), "12", ("integer",)),
    (("cyclic", "sectors"), True, ("integer",)),
    (("cyclic", "sectors"), 1, ("2",)),
    (("cyclic", "sectors"), 0, ("2",)),
    (("cyclic", "sectors"), -12, ("2",)),
    (("cyclic", "axis"), "r", ("'x'", "'y'", "'z'")),
    (("cyclic", "axis"), [0.0, 1.0], ("3",)),
    (("cyclic", "point"), [0.0], ("3",)),
    (("cyclic", "nodal_diameters"), -1, ("0",)),
    (("cyclic", "nodal_diameters"), 1.5, ("integer",)),
    (("cyclic", "nodal_diameters"), "0", ("integer",)),
    (("cyclic", "phase"), "plus", ("'auto'", "'+'", "'-'")),
    (("cyclic", "phase"), 1, ("'auto'", "'+'", "'-'")),
    (("fields",), ["stress"], ("[fields.",)),
    (("fields", "stress"), "symmetric tensor", ("kind =",)),
    (("fields", "stress", "kind"), "symetric tensor", ("Did you mean 'symmetric tensor'?",)),
    (("fields", "stress", "kind"), "Symmetric Tensor", ("symmetric tensor",)),
    (("fields", "stress", "kind"), "scaler", ("Did you mean 'scalar'?",)),
    (("fields", "stress", "kind"), "", ("polar vector", "invariant", "label")),
    (("fields", "stress", "kind"), 6, ("string",)),
    (("fields", "stress", "kind"), ["scalar"], ("string",)),
    (("fields", "stress", "components"), ["xx", "yy"], ("string",)),
    (("fields", "stress", "components"), "xx yy zz xy yz xw", ("xw",)),
    (("fields", "stress", "components"), "xx yy zz xy yz", ("5", "6")),
    (("fields", "stress", "components"), "xx yy zz xy yz xx", ("twice",)),
    (("fields", "stress", "components"), "xx yy zz xy yz yx", ("yx",)),
    (("fields", "stress", "components"), "", ("6",)),
    (("fields", "stress", "shear"), "gamma", ("'tensor'", "'engineering'")),
    (("fields", "stress", "shear"), True, ("'tensor'", "'engineering'")),
    (("fields", "displacement", "shear"), "engineering", ("polar vector",)),
    (("fields", "stress", "seam"), "average", ("'agree'", "'sum'", "'recovered'")),
    (("fields", "stress", "follows"), "none", ("'load'", "'body'")),
    (("fields", "stress", "frame"), "cylinder", ("[frames.cylinder]",)),
    (("fields", "stress", "frame"), 1, ("string",)),
    (("fields", "stress", "arrays"), 3, ("list",)),
    (("fields", "stress", "arrays"), [], ("array",)),
    (("fields", "stress", "arrays"), "sigma", ("sigma", "displacement")),
    (("fields", "turning", "columns"), "4 5 6", ("list",)),
    (("fields", "turning", "columns"), [3, 4, 7], ("1 to 6",)),
    (("fields", "turning", "columns"), [0, 1, 2], ("1 to 6",)),
    (("fields", "turning", "columns"), [4, 4, 5], ("twice",)),
    (("fields", "turning", "columns"), [], ("1 to 6",)),
    (("fields", "turning", "columns"), [4.0, 5.0, 6.0], ("integer",)),
    (("fields", "stress", "on"), "nodes", ("'points'", "'cells'")),
    (("fields", "stress", "unit"), 1, ("string",)),
    (("frames", "shaft", "type"), "spherical", ("'global'", "'cylindrical'")),
    (("frames", "shaft", "axis"), "r", ("'x'",)),
    (("frames", "shaft", "axis"), [0.0, 0.0, 0.0], ("x", "not all zero")),
    (("frames", "shaft", "point"), [0.0, 0.0], ("3",)),
    (("case",), {"name": "even"}, ("[[case]]",)),
    (("case", 0, "name"), 1, ("string",)),
    (("case", 0, "file"), 1, ("string",)),
    (("case", 0, "load"), "odd", ("symmetric", "antisymmetric")),
    (("case", 0, "load"), {"mid": "odd"}, ("symmetric", "antisymmetric")),
    (("case", 0, "load"), {"mid": 1}, ("symmetric", "antisymmetric")),
    (("case", 0, "nodal_diameters"), -1, ("0",)),
    (("case", 0, "nodal_diameters"), "1", ("integer",)),
    (("case", 0, "phase"), "auto+", ("'auto'", "'+'", "'-'")),
    (("case", 0, "factor"), "1.5", ("number",)),
    (("case", 0, "factor"), True, ("number",)),
    (("sum",), {"name": "both", "terms": {"even": 1.0}}, ("[[sum]]",)),
    (("sum", 0, "name"), 1, ("string",)),
    (("sum", 0, "terms"), {}, ("1",)),
    (("sum", 0, "terms"), ["even", "odd"], ("terms = {",)),
    (("sum", 0, "terms", "even"), "1", ("number",)),
    (("seam", "tolerance"), 0.0, ("greater than 0",)),
    (("seam", "tolerance"), -1.0, ("greater than 0",)),
    (("seam", "tolerance"), "1e-4", ("number",)),
    (("seam", "limit"), 0.0, ("greater than 0",)),
    (("seam", "limit"), [1e-4], ("number",)),
    (("seam", "open"), "yes", ("'refuse'", "'keep apart'")),
    (("seam", "open"), True, ("'refuse'", "'keep apart'")),
    (("output", "file"), 1, ("string",)),
    (("output", "results"), 3, ("list",)),
    (("output", "copies"), "all", ("list",)),
    (("output", "copies"), [0.5], ("integer",)),
    (("output", "copies"), [True], ("integer",)),
    (("output", "copies"), [], ("0",)),
    (("output", "copies"), [0, 24], ("0", "23")),
    (("output", "copies"), [-1], ("0", "23")),
    (("output", "merge"), "no", ("true or false|boolean",)),
    (("output", "encoding"), "zip", ("'raw'",)),
    (("output", "derived"), "mises", ("list|'von mises'",)),
    (("output", "derived"), ["tresca"], ("'von mises'", "'principal stresses'", "'magnitude'")),
]  # fmt: skip


@pytest.mark.parametrize(
    ("where", "value", "says"),
    WRONG_VALUES,
    ids=[f"{words(w)}={toml(v)}"[:60] for w, v, _ in WRONG_VALUES],
)
def test_wrong_value(sector: Bench, where: Path_, value: object, says: tuple[str, ...]) -> None:
    sector.case(changed(where, value))
    key = words(where) if where[0] != "fields" else words(where[:2])
    sector.refuses("case.toml", says=[key, *says])


@pytest.mark.parametrize("number", [float("nan"), float("inf"), -float("inf")], ids=str)
@pytest.mark.parametrize(
    "where",
    [("mirror", 0, "normal"), ("mirror", 0, "point"), ("cyclic", "axis"), ("cyclic", "point"),
     ("frames", "shaft", "axis"), ("frames", "shaft", "point"), ("case", 0, "factor"),
     ("sum", 0, "terms", "even"), ("seam", "tolerance"), ("seam", "limit")],
    ids=words,
)  # fmt: skip
def test_numbers_of_the_case_must_be_finite(sector: Bench, where: Path_, number: float) -> None:
    vector = where[-1] in ("axis", "point", "normal")
    sector.case(changed(where, [number, 0.0, 1.0] if vector else number))
    sector.refuses("case.toml", says=["case.toml", words(where), "finite|greater than 0"])


@pytest.mark.parametrize("word", ["vector", "pseudovector"])
def test_suggestion_for_a_vector_is_a_vector(sector: Bench, word: str) -> None:
    sector.case(changed(("fields", "displacement", "kind"), word))
    message = sector.refuses("case.toml", says=["polar vector", "axial vector"])
    assert "mean 'tensor'" not in message
    assert "mean 'pseudoscalar'" not in message


LATER: list[tuple[Path_, object]] = [
    (("model", "step"), 3),
    (("model", "step"), [0.5, 1.0]),
    (("case", 0, "step"), 3),
    (("fields", "displacement", "on"), "corners"),
    (("output", "encoding"), "compressed"),
    (("output", "file"), "whole.vtkhdf"),
    (("fields", "stress", "kind"), "stiffness"),
    (("fields", "stress", "kind"), "compliance"),
]


@pytest.mark.parametrize(
    ("where", "value"), LATER, ids=[f"{words(w)}={toml(v)}"[:60] for w, v in LATER]
)
def test_keys_of_later_versions_are_refused_by_name(
    sector: Bench, where: Path_, value: object
) -> None:
    raw = changed(where, value)
    if where[:2] == ("case", 1):
        raw["case"][0].pop("nodal_diameters")
    if where[-1] == "kind":
        raw["fields"]["stress"].pop("components")
        raw["fields"]["stress"].pop("shear")
    sector.case(raw)
    key = words(where) if where[-1] != "kind" else str(where[-1])
    message = sector.refuses("case.toml", says=[key.split(".terms.")[0]])
    assert re.search(r"\byet\b", message)
    if not isinstance(value, dict | list):
        assert where[-1] == "step" or str(value) in message


COMPLEX = {"real": "a", "imaginary": "b", "amplitude": "c", "phase_degrees": "d"}


@pytest.mark.parametrize(
    "given",
    [["real"], ["imaginary"], ["amplitude"], ["phase_degrees"], ["real", "phase_degrees"],
     ["real", "imaginary", "amplitude"]],
    ids=" ".join,
)  # fmt: skip
def test_a_complex_field_is_two_arrays_of_one_kind(sector: Bench, given: list[str]) -> None:
    raw = changed(("fields", "displacement"), {"kind": "polar vector"}
                  | {k: COMPLEX[k] for k in given})  # fmt: skip
    sector.case(raw)
    sector.refuses("case.toml", says=["fields.displacement", *given, "two arrays"])


# Names in the case


def test_two_planes_of_one_name(sector: Bench) -> None:
    raw = changed(("cyclic",), MISSING)
    raw = {k: raw[k] for k in ("model", "mirror")}
    raw["mirror"] = [{"name": "a", "normal": "y"}, {"name": "a", "normal": "z"}]
    sector.case(raw)
    sector.refuses("case.toml", says=["case.toml", "planes", "'a'", "[[mirror]]"])
    raw["mirror"] = [{"name": "plane 2", "normal": "y"}, {"normal": "z"}]
    sector.case(raw)
    sector.refuses("case.toml", says=["case.toml", "planes", "'plane 2'"])


def test_two_results_of_one_name(sector: Bench) -> None:
    sector.case(changed(("case", 1, "name"), "even"))
    sector.refuses("case.toml", says=["case.toml", "'even'", "[[case]]"])
    sector.case(changed(("sum", 0, "name"), "even"))
    sector.refuses("case.toml", says=["case.toml", "'even'", "[[sum]]"])


def test_names_that_refer_to_nothing(sector: Bench) -> None:
    sector.case(changed(("case", 0, "load"), {"middle": "symmetric"}))
    sector.refuses("case.toml", says=["case.toml", "'even'", "'middle'", "mid"])
    sector.case(changed(("sum", 0, "terms"), {"evn": 1.0}))
    sector.refuses("case.toml", says=["case.toml", "'both'", "'evn'", "Did you mean 'even'?"])
    sector.case(changed(("output", "results"), ["bth"]))
    sector.refuses("case.toml", says=["case.toml", "output.results", "'bth'", "mean 'both'?"])
    raw = changed(("case",), MISSING)
    raw["output"].pop("results")
    sector.case(raw)
    sector.refuses("case.toml", says=["case.toml", "[[sum]]", "[[case]]"])


def test_no_result_asked_for(sector: Bench) -> None:
    sector.case(changed(("output", "results"), []))
    sector.refuses("case.toml", says=["output.results"])


def test_nodal_diameters_of_a_case_without_an_axis(bench: Bench) -> None:
    bench.model(box())
    bench.case('[model]\nfile = "half.vtu"\n[[mirror]]\nnormal = "x"\n'
               '[[case]]\nname = "a"\nnodal_diameters = 1\n')  # fmt: skip
    bench.refuses("case.toml", says=["case.toml", "'a'", "nodal_diameters", "[cyclic]"])


@pytest.mark.parametrize(
    ("where", "text"),
    [(("case", 0, "name"), "even\x00odd"), (("fields", "a\x1bb"), None),
     (("mirror", 0, "name"), "mid\x07")],
    ids=["case", "field", "plane"],
)  # fmt: skip
def test_control_characters_in_names_are_refused(
    sector: Bench, where: Path_, text: str | None
) -> None:
    """XML cannot hold them, and a zero ends a text in a VTK file."""
    if text is None:
        raw = changed(where, {"kind": "polar vector", "arrays": "displacement"})
    else:
        raw = changed(where, text)
        raw.pop("sum")
        raw["output"].pop("results")
        raw["case"] = [{**raw["case"][0], "load": "symmetric"}]
        raw["output"]["derived"] = []
    sector.case(raw)
    sector.refuses("case.toml", says=["character"])


# Fields


HALF = '[model]\nfile = "half.vtu"\n[[mirror]]\nname = "mid"\nnormal = "x"\n'
ODD = HALF + 'load = "antisymmetric"\n'


def test_field_that_is_not_there(bench: Bench) -> None:
    bench.model(box())
    bench.case(HALF + '[fields.velocity]\nkind = "polar vector"\n')
    bench.refuses("case.toml", says=["case.toml", "fields.velocity", "half.vtu", "displacement"])
    bench.case(HALF + '[fields.v]\nkind = "polar vector"\narrays = ["displacement", "vy", "vz"]\n')
    bench.refuses("case.toml", says=["case.toml", "fields.v", "'vy'", "half.vtu", "displacement"])
    bench.case(HALF + '[fields.displacement]\nkind = "polar vector"\non = "cells"\n')
    bench.refuses("case.toml", says=["fields.displacement", "cells", "half.vtu"])


def test_field_of_one_case_is_missing_in_another(bench: Bench) -> None:
    bench.model(box(), "a.vtu")
    grid = box()
    grid.point_data.clear()
    bench.model(grid, "b.vtu")
    bench.case('[[mirror]]\nnormal = "x"\n[[case]]\nname = "a"\nfile = "a.vtu"\n'
               '[[case]]\nname = "b"\nfile = "b.vtu"\n')  # fmt: skip
    bench.refuses("case.toml", says=["b.vtu", "'displacement'"])


@pytest.mark.parametrize(
    ("size", "kind", "says"),
    [
        (4, "polar vector", ("4", "3 or 2")),
        (1, "polar vector", ("1", "3 or 2")),
        (2, "axial vector", ("2", "3 or 1")),
        (5, "symmetric tensor", ("5", "6")),
        (6, "tensor", ("6", "9")),
        (3, "scalar", ("3", "1")),
        (3, "invariant", ("3", "1")),
        (2, "pseudoscalar", ("2", "1")),
        (6, "axial tensor", ("6", "9")),
        (2, "principal values", ("2", "3")),
    ],
)
def test_wrong_number_of_components(
    bench: Bench, size: int, kind: str, says: tuple[str, ...]
) -> None:
    grid = box()
    grid.point_data["q"] = np.ones((grid.n_points, size))
    bench.model(grid)
    bench.case(HALF + f'[fields.q]\nkind = "{kind}"\n')
    bench.refuses("case.toml", says=["case.toml", "fields.q", kind, "component", *says])


def test_wide_array_among_single_ones(bench: Bench) -> None:
    grid = box()
    grid.point_data["a"] = np.ones(grid.n_points)
    bench.model(grid)
    bench.case(HALF + '[fields.v]\nkind = "polar vector"\narrays = ["a", "displacement", "a"]\n')
    bench.refuses("case.toml", says=["fields.v.arrays", "'displacement'", "3 components"])


def test_array_on_points_and_on_cells(bench: Bench) -> None:
    grid = box()
    grid.point_data["stress"] = np.ones((grid.n_points, 6))
    grid.cell_data["stress"] = np.ones((grid.n_cells, 6))
    bench.model(grid)
    bench.case(HALF + '[fields.stress]\nkind = "symmetric tensor"\n')
    bench.refuses("case.toml", says=["fields.stress", "half.vtu", 'on = "points"', 'on = "cells"'])


@pytest.mark.parametrize("value", [np.nan, np.inf, -np.inf])
@pytest.mark.parametrize("on", ["points", "cells"])
def test_values_that_are_not_finite(bench: Bench, value: float, on: str) -> None:
    grid = box(3)
    data = grid.point_data if on == "points" else grid.cell_data
    temperature = np.ones(grid.n_points if on == "points" else grid.n_cells)
    temperature[[7, 9]] = value
    data["temperature"] = temperature
    bench.model(grid)
    bench.refuses(
        "half.vtu", "--mirror", "x",
        says=["half.vtu", "'temperature'", "2 values", f"{on[:-1]} 7", "--allow-nan"],
    )  # fmt: skip
    ran = bench.accepts("half.vtu", "--mirror", "x", "--allow-nan")
    assert "temperature holds 2 values" in ran.out
    found = json.loads(bench.accepts("half.vtu", "--mirror", "x", "--allow-nan", "--json").out)
    assert found["not_finite"] == {"temperature": 2}
    back = read_back(bench.folder / "half_full.vtu")
    data = back.GetPointData() if on == "points" else back.GetCellData()
    array = data.GetArray("temperature")
    values = np.array([array.GetValue(k) for k in range(array.GetNumberOfTuples())])
    on_plane = 1 if on == "cells" else 2 - (grid.points[[7, 9], 0] == 0.0).mean()
    assert np.count_nonzero(~np.isfinite(values)) == (4 if on == "cells" else 2 * on_plane)


def test_infinity_in_an_array_of_several_components(bench: Bench) -> None:
    """VTK's own XML file of such an array, with what VTK adds to it."""
    grid = box()
    grid.point_data["displacement"][26, 1] = np.inf
    bench.model(grid)
    bench.refuses("half.vtu", "--mirror", "x", says=["'displacement'", "1 values", "--allow-nan"])
    bench.accepts("half.vtu", "--mirror", "x", "--allow-nan")


@pytest.mark.parametrize("value", [np.nan, np.inf])
def test_turned_values_that_are_not_finite_stay_where_they_are(bench: Bench, value: float) -> None:
    grid = wedge(30.0)
    grid.point_data["displacement"][4] = value
    bench.model(grid, "sector.vtk")
    bench.accepts("sector.vtk", "--sectors", 12, "--allow-nan")
    back = pyvista.wrap(read_back(bench.folder / "sector_full.vtu"))
    bad = ~np.isfinite(back.point_data["displacement"]).all(axis=1)
    assert set(back.point_data["sector_point"][bad]) == {4}


def test_infinity_does_not_hide_an_open_seam(bench: Bench) -> None:
    grid = box()
    temperature = np.ones(grid.n_points)
    temperature[26] = np.inf
    grid.point_data.clear()
    grid.point_data["temperature"] = temperature
    bench.model(grid)
    bench.refuses("half.vtu", "--mirror", "x antisymmetric", "--allow-nan", "--field",
                  "temperature=scalar", status=1,
                  says=["'temperature'", "does not close"])  # fmt: skip


def test_principal_stresses_of_a_tensor_that_is_not_finite(bench: Bench) -> None:
    grid = box()
    stress = np.ones((grid.n_points, 6))
    stress[26] = np.nan
    grid.point_data["stress"] = stress
    bench.model(grid)
    bench.accepts("half.vtu", "--mirror", "x", "--allow-nan",
                  "--set", 'output.derived=["von mises", "principal stresses"]')  # fmt: skip
    back = pyvista.wrap(read_back(bench.folder / "half_full.vtu"))
    for name in ("stress_von_mises", "stress_principal"):
        values = back.point_data[name].reshape(back.n_points, -1)
        bad = ~np.isfinite(values).all(axis=1)
        assert set(back.point_data["sector_point"][bad]) == {26}


def test_integers_that_cannot_hold_their_copies(bench: Bench) -> None:
    grid = box()
    grid.cell_data["direction"] = np.ones((grid.n_cells, 3), dtype=np.uint8)
    bench.model(grid)
    arguments = ("half.vtu", "--mirror", "x", "--field", "direction=polar vector")
    bench.refuses(*arguments, says=["'direction'", "uint8", "floating"])
    bench.refuses(*arguments, "--dry-run", says=["'direction'", "uint8", "floating"])
    grid = wedge(30.0)
    grid.cell_data["direction"] = np.ones((grid.n_cells, 3), dtype=np.int32)
    bench.model(grid, "sector.vtu")
    bench.refuses("sector.vtu", "--sectors", 12, "--field", "direction=polar vector",
                  says=["'direction'", "int32", "floating"])  # fmt: skip


def test_integers_that_can_hold_their_copies_are_kept(bench: Bench) -> None:
    grid = box()
    grid.cell_data["direction"] = np.ones((grid.n_cells, 3), dtype=np.int8)
    bench.model(grid)
    bench.accepts("half.vtu", "--mirror", "x", "--field", "direction=polar vector")
    back = pyvista.wrap(read_back(bench.folder / "half_full.vtu"))
    assert back.cell_data["direction"].dtype == np.int8
    assert sorted(set(back.cell_data["direction"][:, 0].tolist())) == [-1, 1]


# Undeclared arrays


def lines_to_add(message: str) -> str:
    """The proposed lines, the first kind of each comment in place of the dots."""
    block = re.search(r"Add to the case file:\n(.*)\n\s*or leave them out", message, re.S)
    assert block is not None, message
    return re.sub(
        r'kind = "\.\.\."(\s*# \d+ component\S*: )([a-z ]+?)(,|;| or |$)', r'kind = "\2"\1\2\3',
        block[1], flags=re.M,
    )  # fmt: skip


UNDECLARED: dict[str, tuple[str, str, int]] = {
    "vector": ("points", "q", 3),
    "pair": ("points", "q", 2),
    "six": ("cells", "q", 6),
    "four": ("cells", "q", 4),
    "nine": ("points", "q", 9),
    "seven": ("points", "q", 7),
    "moment": ("cells", "moment", 3),
    "words": ("points", "my array [N/m]", 3),
    "dots": ("points", "a.b.c", 3),
    "quotes": ("points", 'say "hello"', 3),
    "backslash": ("points", "a\\b", 3),
    "not ascii": ("points", "σ", 3),
    "line": ("points", "a\nb", 3),
    "digits": ("points", "2024-05", 3),
    "own name": ("cells", "copy", 1),
    "own wide name": ("cells", "sector_cell", 3),
}


@pytest.mark.parametrize("which", UNDECLARED)
def test_lines_of_the_message_can_be_added(bench: Bench, which: str) -> None:
    on, name, size = UNDECLARED[which]
    grid = box()
    count = grid.n_points if on == "points" else grid.n_cells
    values = np.zeros((count, size)) if size > 1 else np.zeros(count)
    (grid.point_data if on == "points" else grid.cell_data)["PLACE"] = values
    bench.model(grid, rename=name)
    bench.case(HALF)
    message = bench.refuses("case.toml", says=["half.vtu", on, "--skip-undeclared"])
    assert repr(name) in message
    added = lines_to_add(message)
    bench.case(HALF + added)
    (key,) = tomllib.loads(added)["fields"]
    assert key == name or "own" in which
    bench.accepts("case.toml")
    back = read_back(bench.folder / "case_full.vtu")
    assert key in names_of(back.GetPointData() if on == "points" else back.GetCellData())


@pytest.mark.parametrize("name", ["q", "my q", "q.q"])
def test_lines_for_one_name_on_points_and_cells(bench: Bench, name: str) -> None:
    grid = box()
    grid.point_data[name] = np.zeros((grid.n_points, 3))
    grid.cell_data[name] = np.zeros((grid.n_cells, 3))
    bench.model(grid)
    bench.case(HALF)
    message = bench.refuses("case.toml", says=["half.vtu", "on points", "on cells"])
    bench.case(HALF + lines_to_add(message))
    bench.accepts("case.toml")
    back = read_back(bench.folder / "case_full.vtu")
    assert len(names_of(back.GetPointData())) == 3
    assert len(names_of(back.GetCellData())) == 3


def test_several_undeclared_arrays_are_listed_at_once(bench: Bench) -> None:
    grid = box()
    grid.point_data["one"] = np.zeros((grid.n_points, 3))
    grid.cell_data["two"] = np.zeros((grid.n_cells, 6))
    grid.cell_data["three"] = np.zeros((grid.n_cells, 9))
    bench.model(grid)
    bench.case(HALF)
    message = bench.refuses("case.toml", says=["'one'", "'two'", "'three'"])
    bench.case(HALF + lines_to_add(message))
    bench.accepts("case.toml")


def test_undeclared_arrays_without_a_case_file(bench: Bench) -> None:
    """Who gave options is told the option, not the lines of a file that is not there."""
    grid = box()
    grid.point_data["q"] = np.zeros((grid.n_points, 3))
    bench.model(grid)
    bench.refuses("half.vtu", "--mirror", "x", says=["'q'", "--field", "--skip-undeclared"])


def test_skip_undeclared(bench: Bench) -> None:
    grid = box()
    grid.point_data["q"] = np.zeros((grid.n_points, 3))
    grid.cell_data["r"] = np.zeros((grid.n_cells, 6))
    bench.model(grid)
    ran = bench.accepts("half.vtu", "--mirror", "x", "--skip-undeclared")
    assert "'q' on points is undeclared and was left out" in ran.out
    assert "'r' on cells is undeclared and was left out" in ran.out
    ran = bench.accepts("half.vtu", "--mirror", "x", "--skip-undeclared", "--json")
    assert sum("undeclared" in note for note in json.loads(ran.out)["notes"]) == 2
    back = read_back(bench.folder / "half_full.vtu")
    assert names_of(back.GetPointData()) == ["displacement", "sector_point"]
    assert names_of(back.GetCellData()) == ["sector_cell", "copy"]


def test_single_numbers_must_be_declared_under_an_antisymmetric_load(bench: Bench) -> None:
    grid = box()
    grid.point_data["displacement"] = np.zeros((grid.n_points, 3))
    grid.point_data["quality"] = grid.points[:, 0].copy()
    bench.model(grid)
    bench.case(HALF)
    bench.accepts("case.toml")
    bench.case(ODD)
    message = bench.refuses("case.toml", says=["'quality'", "antisymmetric", "scalar", "invariant"])
    for kind in ("scalar", "invariant", "pseudoscalar"):
        bench.case(ODD + lines_to_add(message).replace('"scalar"', f'"{kind}"'))
        bench.accepts("case.toml")
        back = pyvista.wrap(read_back(bench.folder / "case_full.vtu"))
        # On the mirrored copy: -1 for a scalar, +1 for an invariant, (-1) * det Q for the other.
        sign = -1.0 if kind == "scalar" else 1.0
        right = np.where(back.points[:, 0] < 0, -sign, 1.0) * back.points[:, 0]
        np.testing.assert_array_equal(back.point_data["quality"], right)


@pytest.mark.parametrize("name", ["temperature", "pressure", "electric_potential"])
def test_scalars_by_name_must_be_declared_under_an_antisymmetric_load(
    bench: Bench, name: str
) -> None:
    """A difference changes its sign, an absolute temperature or pressure does not."""
    grid = box()
    grid.cell_data[name] = np.ones(grid.n_cells)
    grid.point_data.clear()
    bench.model(grid)
    bench.case(ODD)
    bench.refuses("case.toml", says=[f"'{name}'", "antisymmetric"])
    bench.case(HALF)
    bench.accepts("case.toml")


def test_single_numbers_must_be_declared_at_half_the_sectors(bench: Bench) -> None:
    grid = wedge(30.0)
    grid.point_data["displacement"] = np.zeros((grid.n_points, 3))
    grid.cell_data["quality"] = np.ones(grid.n_cells)
    bench.model(grid, "sector.vtu")
    bench.accepts("sector.vtu", "--sectors", 12)
    bench.refuses("sector.vtu", "--sectors", 12, "--nodal-diameters", 6, says=["'quality'"])


# What a field is


@pytest.mark.parametrize(
    "name",
    ["max_principal_stress", "principal_stress_1", "MaxPrincipal", "signed_von_mises",
     "von_mises_signed", "SignedVonMises", "failure_index", "interaction"],
)  # fmt: skip
@pytest.mark.parametrize("kind", [None, "scalar", "invariant"])
def test_lone_stress_measure_in_an_antisymmetric_case(
    bench: Bench, name: str, kind: str | None
) -> None:
    grid = box()
    grid.point_data["displacement"] = np.zeros((grid.n_points, 3))
    grid.point_data[name] = np.zeros(grid.n_points)
    bench.model(grid)
    declared = f'[fields.{name}]\nkind = "{kind}"\n' if kind else ""
    bench.case(ODD + declared)
    bench.refuses("case.toml", says=[f"'{name}'", "antisymmetric"])
    bench.case(HALF + declared)
    bench.accepts("case.toml")


def test_lone_principal_stress_at_half_the_sectors(bench: Bench) -> None:
    grid = wedge(30.0)
    grid.point_data["displacement"] = np.zeros((grid.n_points, 3))
    grid.point_data["max_principal_stress"] = np.zeros(grid.n_points)
    bench.model(grid, "sector.vtu")
    bench.refuses("sector.vtu", "--sectors", 12, "--nodal-diameters", 6,
                  says=["'max_principal_stress'", "principal values"])  # fmt: skip


@pytest.mark.parametrize("name", ["von_mises", "vonMisesStress", "energy_density",
                                  "displacement_magnitude"])  # fmt: skip
@pytest.mark.parametrize("kind", ["scalar", "pseudoscalar"])
def test_invariant_declared_a_scalar_in_an_antisymmetric_case(
    bench: Bench, name: str, kind: str
) -> None:
    grid = box()
    grid.point_data["displacement"] = np.zeros((grid.n_points, 3))
    grid.point_data[name] = np.zeros(grid.n_points)
    bench.model(grid)
    bench.case(ODD + f'[fields.{name}]\nkind = "{kind}"\n')
    bench.refuses("case.toml", says=[f"'{name}'", kind, "invariant", f"[fields.{name}]"])
    bench.case(ODD + f'[fields.{name}]\nkind = "invariant"\n')
    bench.accepts("case.toml")


def test_invariant_declared_a_scalar_in_a_sum(bench: Bench) -> None:
    """Von Mises values of two cases do not add up, whatever the load behaviour."""
    grid = box()
    grid.point_data["von_mises"] = np.ones(grid.n_points)
    bench.model(grid)
    bench.case(
        HALF + '[fields.von_mises]\nkind = "scalar"\n[[case]]\nname = "a"\n[[case]]\nname = "b"\n'
        '[[sum]]\nname = "both"\nterms = { a = 1.0, b = 1.0 }\n'
    )
    bench.refuses("case.toml", says=["'von_mises'", "invariant", "[fields.von_mises]"])


@pytest.mark.parametrize("components", ["ux uy rz", "x y rz", "UX UY ROTZ"])
def test_plane_translations_and_rotation_are_no_polar_vector(bench: Bench, components: str) -> None:
    grid = pyvista.Plane(i_resolution=2, j_resolution=2, center=(1, 1, 0), i_size=2, j_size=2)
    grid = grid.cast_to_unstructured_grid()
    grid.clear_data()
    grid.point_data["motion"] = np.zeros((grid.n_points, 3))
    bench.model(grid)
    field = '[fields.motion]\nkind = "polar vector"\n'
    bench.case(HALF + field + f'components = "{components}"\n')
    bench.refuses("case.toml", says=["fields.motion", components, "axial vector|columns"])
    bench.case(
        HALF + '[fields.moving]\nkind = "polar vector"\narrays = "motion"\ncolumns = [1, 2]\n'
        '[fields.turning]\nkind = "axial vector"\narrays = "motion"\ncolumns = [3]\n'
    )
    bench.accepts("case.toml")


def test_plane_rotation_told_by_the_names_of_components(bench: Bench) -> None:
    """The file itself says that the third component is a rotation."""
    grid = pyvista.Plane(i_resolution=2, j_resolution=2, center=(1, 1, 0), i_size=2, j_size=2)
    grid = grid.cast_to_unstructured_grid()
    grid.clear_data()
    grid.point_data["displacement"] = np.zeros((grid.n_points, 3))
    array = grid.GetPointData().GetArray("displacement")
    for k, name in enumerate(("UX", "UY", "ROTZ")):
        array.SetComponentName(k, name)
    bench.model(grid)
    bench.refuses("half.vtu", "--mirror", "x", says=["half.vtu", "'displacement'", "ROTZ"])


@pytest.mark.parametrize("kind", ["polar vector", "axial vector"])
def test_translations_and_rotations_in_one_array(bench: Bench, kind: str) -> None:
    grid = box()
    grid.point_data["displacement"] = np.zeros((grid.n_points, 6))
    bench.model(grid)
    bench.refuses("half.vtu", "--mirror", "x", "--field", f"displacement={kind}",
                  says=["displacement", "polar vector", "axial vector", "columns"])  # fmt: skip


def test_six_components_may_be_translations_and_rotations(bench: Bench) -> None:
    grid = box()
    grid.point_data["displacement"] = np.zeros((grid.n_points, 6))
    bench.model(grid)
    bench.case(HALF)
    bench.refuses("case.toml", says=["displacement", "rotations", "columns", "[4, 5, 6]"])


def strained(name: str) -> pyvista.UnstructuredGrid:
    grid = wedge(30.0)
    grid.point_data[name] = np.zeros((grid.n_points, 6))
    return grid


@pytest.mark.parametrize("name", ["strain", "PlasticStrain", "total_strain"])
@pytest.mark.parametrize("declared", [True, False])
def test_engineering_shear_that_matters_must_be_declared(
    bench: Bench, name: str, declared: bool
) -> None:
    bench.model(strained(name), "sector.vtu")
    case = '[model]\nfile = "sector.vtu"\n[cyclic]\nsectors = 12\n'
    field = f'[fields.{name}]\nkind = "symmetric tensor"\n'
    bench.case(case + (field if declared else ""))
    bench.refuses(
        "case.toml",
        says=[f"'{name}'", 'shear = "tensor"', 'shear = "engineering"', f"[fields.{name}]"],
    )
    for word in ("tensor", "engineering"):
        bench.case(case + field + f'shear = "{word}"\n')
        bench.accepts("case.toml")


def test_engineering_shear_that_does_not_matter(bench: Bench) -> None:
    grid = box()
    grid.point_data["strain"] = np.zeros((grid.n_points, 6))
    bench.model(grid)
    bench.accepts("half.vtu", "--mirror", "x", "--mirror", "y")


def test_engineering_shear_in_a_frame_about_another_axis(bench: Bench) -> None:
    """Turning about z combines the components of a frame about x."""
    bench.model(strained("strain"), "sector.vtu")
    bench.case(
        '[model]\nfile = "sector.vtu"\n[cyclic]\nsectors = 12\n'
        '[frames.other]\ntype = "cylindrical"\naxis = "x"\n'
        '[fields.strain]\nkind = "symmetric tensor"\nframe = "other"\n'
    )
    bench.refuses("case.toml", says=["'strain'", 'shear = "engineering"'])


def test_sum_at_the_seam_is_for_linear_quantities(bench: Bench) -> None:
    grid = box()
    grid.point_data["q"] = np.ones(grid.n_points)
    bench.model(grid)
    bench.case(HALF + '[fields.q]\nkind = "invariant"\nseam = "sum"\n')
    bench.refuses("case.toml", says=["fields.q", "sum", "invariant"])


def test_plane_tensor_cannot_leave_its_plane(bench: Bench) -> None:
    grid = wedge(30.0)
    grid.point_data["stress"] = np.ones((grid.n_points, 3))
    bench.model(grid, "sector.vtu")
    field = '[fields.stress]\nkind = "symmetric tensor"\n'
    bench.case('[model]\nfile = "sector.vtu"\n[cyclic]\nsectors = 12\n' + field)
    bench.accepts("case.toml")
    bench.case('[model]\nfile = "sector.vtu"\n[[mirror]]\nnormal = [0.0, 1.0, 1.0]\n' + field)
    bench.refuses("case.toml", says=["'stress'", "xx yy xy"])


def test_tensor_of_single_arrays_needs_its_order(bench: Bench) -> None:
    grid = box()
    names = [f"s{k}" for k in range(6)]
    for name in names:
        grid.point_data[name] = np.zeros(grid.n_points)
    bench.model(grid)
    field = f'[fields.stress]\nkind = "symmetric tensor"\narrays = {json.dumps(names)}\n'
    bench.case(HALF + field)
    bench.refuses("case.toml", says=["fields.stress", "components ="])
    bench.case(HALF + field + 'components = "xx yy zz xy yz zx"\n')
    bench.accepts("case.toml")


def test_field_called_like_an_array_of_the_program(bench: Bench) -> None:
    bench.model(box())
    bench.case(HALF + '[fields.copy]\nkind = "polar vector"\narrays = "displacement"\n')
    bench.refuses("case.toml", says=["fields.copy", "arrays ="])


# Planes, axis and tiling


def test_nodes_on_both_sides_of_a_plane(bench: Bench) -> None:
    grid = box()
    grid.translate((-1.0, 0.0, 0.0), inplace=True)
    bench.model(grid)
    bench.case(HALF)
    bench.refuses("case.toml", says=["'mid'", "both sides", "9 of 27 nodes", "mirror.point"])


@pytest.mark.parametrize(("degrees", "copies"), [(72.0, 10), (120.0, 6)])
def test_nodes_on_both_sides_of_an_implied_plane(bench: Bench, degrees: float, copies: int) -> None:
    """Planes at 72 degrees also make a finite group, but one that covers space twice."""
    bench.model(wedge(degrees, 6))
    a = np.deg2rad(degrees)
    bench.case(
        '[model]\nfile = "half.vtu"\n[[mirror]]\nname = "first"\nnormal = "y"\n'
        f'[[mirror]]\nname = "second"\nnormal = {toml([np.sin(a), -np.cos(a), 0.0])}\n'
    )
    bench.refuses("case.toml", says=["'first'", "'second'", f"{copies} copies", f"{degrees:g}"])


@pytest.mark.parametrize(
    ("degrees", "sectors", "fit"),
    [(30.0, 10, 12), (30.0, 15, 12), (40.0, 8, 9), (40.0, 18, 9), (90.0, 3, 4), (90.0, 5, 4)],
)
def test_sector_whose_angle_is_not_a_part_of_the_circle(
    bench: Bench, degrees: float, sectors: int, fit: int
) -> None:
    bench.model(wedge(degrees, 4), "sector.vtu")
    bench.refuses(
        "sector.vtu", "--sectors", sectors,
        says=[f"sectors = {sectors}", f"{degrees:g} degrees", f"{360 / sectors:g} degrees",
              f"sectors = {fit} would fit"],
    )  # fmt: skip


def test_sector_that_fits_no_number_of_sectors(bench: Bench) -> None:
    bench.model(wedge(50.0, 3), "sector.vtu")
    for sectors in (6, 7, 8):
        message = bench.refuses("sector.vtu", "--sectors", sectors, says=["50 degrees"])
        assert "would fit" not in message


def test_whole_sector_where_half_a_sector_belongs(bench: Bench) -> None:
    bench.model(wedge(30.0), "sector.vtu")
    bench.refuses("sector.vtu", "--sectors", 12, "--mirror", "y", says=["15 degrees", "sector"])
    bench.model(wedge(15.0), "half.vtu")
    bench.accepts("half.vtu", "--sectors", 12, "--mirror", "y")


def test_axis_in_the_wrong_place(bench: Bench) -> None:
    bench.model(wedge(30.0), "sector.vtu")
    bench.refuses("sector.vtu", "--sectors", 12, "--axis-point", "1.5,0.3,0", says=["cyclic"])


def test_planes_that_do_not_close(bench: Bench) -> None:
    bench.model(box())
    case = '[model]\nfile = "half.vtu"\n[[mirror]]\nname = "a"\nnormal = "x"\n'
    bench.case(case + '[[mirror]]\nname = "b"\nnormal = [1.0, 2.0, 0.0]\n')
    bench.refuses("case.toml", says=["'a'", "'b'", "63.43", "180/m"])


def test_planes_that_are_parallel(bench: Bench) -> None:
    bench.model(box())
    case = '[model]\nfile = "half.vtu"\n[[mirror]]\nname = "a"\nnormal = "x"\n'
    bench.case(case + '[[mirror]]\nname = "b"\nnormal = "x"\npoint = [2.0, 0.0, 0.0]\n')
    bench.refuses("case.toml", says=["'a'", "'b'", "parallel", "2 apart"])
    bench.case(case + '[[mirror]]\nname = "b"\nnormal = [-2.0, 0.0, 0.0]\n')
    bench.refuses("case.toml", says=["'a'", "'b'", "same plane"])


def test_planes_that_do_not_meet_in_one_point(bench: Bench) -> None:
    """Three planes around a prism: each pair closes, all three never do."""
    bench.model(box())
    bench.case(
        '[model]\nfile = "half.vtu"\n[[mirror]]\nname = "a"\nnormal = "y"\n'
        f'[[mirror]]\nname = "b"\nnormal = {toml([np.sqrt(3.0), 1.0, 0.0])}\n'
        f'[[mirror]]\nname = "c"\nnormal = {toml([np.sqrt(3.0), -1.0, 0.0])}\n'
        "point = [5.0, 0.0, 0.0]\n"
    )
    bench.refuses("case.toml", says=["'a'", "'b'", "'c'", "never close"])


def test_plane_beside_the_axis(bench: Bench) -> None:
    bench.model(wedge(30.0), "sector.vtu")
    bench.refuses("sector.vtu", "--sectors", 12, "--mirror", "y at 0,0.5,0 called side",
                  says=["'side'", "0.5", "axis"])  # fmt: skip
    bench.refuses("sector.vtu", "--sectors", 12, "--mirror", "0,1,1 called slanted",
                  says=["'slanted'", "45 degrees", "axis"])  # fmt: skip


def test_directions_of_no_length(bench: Bench) -> None:
    bench.model(box())
    bench.refuses("half.vtu", "--mirror", "0,0,0", says=["normal", "not all zero"])
    bench.refuses("half.vtu", "--sectors", 4, "--axis", "0,0,0", says=["axis", "not all zero"])


def test_plane_that_nothing_touches(bench: Bench) -> None:
    bench.model(box())
    bench.refuses("half.vtu", "--mirror", "x at -0.3,0,0 called gap",
                  says=["'gap'", "0.3", "mirror.point"])  # fmt: skip


@pytest.mark.parametrize(("sectors", "h", "most"), [(12, 7, 6), (12, 12, 6), (5, 3, 2), (2, 2, 1)])
def test_nodal_diameters_out_of_range(bench: Bench, sectors: int, h: int, most: int) -> None:
    bench.model(wedge(360.0 / sectors, 8), "sector.vtu")
    bench.refuses("sector.vtu", "--sectors", sectors, "--nodal-diameters", h,
                  says=[f"nodal_diameters = {h}", f"0 to {most}"])  # fmt: skip


def test_load_words_that_contradict_each_other(bench: Bench) -> None:
    bench.model(wedge(60.0, 4))
    a = np.deg2rad(60.0)
    bench.case(
        '[model]\nfile = "half.vtu"\n[[mirror]]\nname = "a"\nnormal = "y"\n'
        f'[[mirror]]\nname = "b"\nnormal = {toml([np.sin(a), -np.cos(a), 0.0])}\n'
        'load = "antisymmetric"\n'
    )
    bench.refuses("case.toml", says=["'a'", "'b'", "60 degrees", "load ="])


@pytest.mark.parametrize("h", [1, 2, 3, 4, 5])
def test_a_wave_needs_complex_fields(bench: Bench, h: int) -> None:
    grid = wedge(30.0)
    grid.point_data["displacement"] = np.ones((grid.n_points, 3))
    bench.model(grid, "sector.vtu")
    says = ["'displacement'", f"{h} nodal diameter", "real = ", "amplitude"]
    bench.refuses("sector.vtu", "--sectors", 12, "--nodal-diameters", h, says=says)


def test_an_invariant_of_a_wave_is_refused(bench: Bench) -> None:
    grid = wedge(30.0)
    grid.clear_data()
    grid.point_data["von_mises"] = np.ones(grid.n_points)
    bench.model(grid, "sector.vtu")
    bench.refuses("sector.vtu", "--sectors", 12, "--nodal-diameters", 2,
                  says=["'von_mises'", "differs from copy to copy"])  # fmt: skip


# Several results


def test_cases_with_different_meshes(bench: Bench) -> None:
    bench.model(box(), "a.vtu")
    case = ('[[mirror]]\nnormal = "x"\n[[case]]\nname = "a"\nfile = "a.vtu"\n'
            '[[case]]\nname = "b"\nfile = "b.vtu"\n')  # fmt: skip
    bench.case(case)
    bench.model(box(3), "b.vtu")
    bench.refuses("case.toml", says=["a.vtu", "b.vtu", "'b'", "64 nodes", "27"])
    grid = box()
    grid.points[13] += 0.1
    bench.model(grid, "b.vtu")
    bench.refuses("case.toml", says=["a.vtu", "b.vtu", "other places"])
    grid = box()
    order = np.random.default_rng(1).permutation(grid.n_cells)
    bench.model(grid.extract_cells(order[:-1]), "b.vtu")
    bench.refuses("case.toml", says=["a.vtu", "b.vtu"])
    grid = box()
    nodes = grid.cell_connectivity.reshape(-1, 8)[::-1]
    cells = np.insert(nodes, 0, 8, axis=1).ravel()
    again = pyvista.UnstructuredGrid(cells, grid.celltypes, grid.points)
    again.point_data["displacement"] = grid.point_data["displacement"]
    bench.model(again, "b.vtu")
    bench.refuses("case.toml", says=["a.vtu", "b.vtu", "order"])


def test_sum_of_cases_with_different_properties(bench: Bench) -> None:
    grid = box()
    grid.cell_data["thickness"] = np.ones(grid.n_cells)
    bench.model(grid, "a.vtu")
    grid.cell_data["thickness"] = np.full(grid.n_cells, 2.0)
    bench.model(grid, "b.vtu")
    case = ('[[mirror]]\nnormal = "x"\n[[case]]\nname = "a"\nfile = "a.vtu"\n'
            '[[case]]\nname = "b"\nfile = "b.vtu"\n')  # fmt: skip
    bench.case(case + '[[sum]]\nname = "both"\nterms = { a = 1.0, b = 1.0 }\n')
    bench.refuses("case.toml", says=["'both'", "'thickness'", "'a'", "'b'"])
    bench.case(case)
    bench.accepts("case.toml")


@pytest.mark.parametrize(
    ("words_", "says"),
    [
        ('[[mirror]]\nname = "mid"\nnormal = "x"\nload = "antisymmetric"\n', ["antisymmetric"]),
        ('[[mirror]]\nnormal = "x"\n[[case]]\nname = "a"\nfactor = 2.0\n', ["'a'", "factor"]),
        ('[[mirror]]\nnormal = "x"\n[[case]]\nname = "a"\n[[sum]]\nname = "s"\n'
         "terms = { a = 1.0 }\n", ["'s'"]),
    ],
    ids=["antisymmetric", "factor", "sum"],
)  # fmt: skip
def test_nonlinear_analysis(bench: Bench, words_: str, says: list[str]) -> None:
    grid = box()
    grid.point_data["displacement"] = np.zeros((grid.n_points, 3))
    bench.model(grid)
    for word in ("true", "false"):
        bench.case(f'[model]\nfile = "half.vtu"\nlinear = {word}\n' + words_)
        if word == "true":
            bench.accepts("case.toml")
        else:
            bench.refuses("case.toml", says=["linear = false", *says])


def test_nonlinear_analysis_with_nodal_diameters(bench: Bench) -> None:
    grid = wedge(30.0)
    grid.point_data["displacement"] = np.zeros((grid.n_points, 3))
    bench.model(grid, "sector.vtu")
    arguments = ("sector.vtu", "--sectors", 12, "--set", "model.linear=false")
    bench.accepts(*arguments)
    bench.refuses(*arguments, "--nodal-diameters", 6, says=["linear = false", "6 nodal diameters"])
    bench.refuses(*arguments, "--nodal-diameters", 3, says=["3"])


# A seam that does not close


def test_field_that_does_not_close(bench: Bench) -> None:
    grid = box()
    grid.point_data["displacement"][:, 0] += 0.01 * (1.0 + grid.points[:, 1])
    bench.model(grid)
    bench.case(HALF)
    # The largest jump is where y is largest, 2 * 0.03, as part of the field's largest value.
    worst = np.flatnonzero((grid.points[:, 0] == 0.0) & (grid.points[:, 1] == 2.0))
    message = bench.refuses(
        "case.toml", status=1,
        says=["'displacement'", "does not close", "'mid'", "9 of 9 seam nodes", "limit 0.01 %",
              "keep apart", "recovered"],
    )  # fmt: skip
    found = re.search(r"node (\d+) \(([^)]*)\) the model has \(([^)]*)\), the copy \(([^)]*)\)",
                      message)  # fmt: skip
    assert found is not None
    node = int(found[1])
    assert node in worst
    np.testing.assert_allclose([float(v) for v in found[2].split(",")], grid.points[node])
    own = grid.point_data["displacement"][node]
    np.testing.assert_allclose([float(v) for v in found[3].split(",")], own)
    np.testing.assert_allclose([float(v) for v in found[4].split(",")], own * [-1, 1, 1])
    largest = np.linalg.norm(grid.point_data["displacement"], axis=1).max()
    assert f"{100 * 0.06 / largest:.3g} %" in message


@pytest.mark.parametrize("word", ["symmetric", "antisymmetric"])
def test_hint_of_the_opposite_word(bench: Bench, word: str) -> None:
    grid = box()
    x, y, z = grid.points.T
    # Closes under the other word: tangential motion zero, or normal motion zero, at x = 0.
    moving = np.c_[1 + y, x, x * z] if word == "symmetric" else np.c_[x * y, 1 + y, z]
    grid.point_data["displacement"] = moving
    bench.model(grid)
    other = {"symmetric": "antisymmetric", "antisymmetric": "symmetric"}
    bench.case(HALF + f'load = "{word}"\n')
    bench.refuses("case.toml", status=1, says=[f"looks {other[word]} there"])
    bench.case(HALF + f'load = "{other[word]}"\n')
    bench.accepts("case.toml")


def test_no_hint_where_neither_word_closes(bench: Bench) -> None:
    grid = box()
    grid.point_data["displacement"][:] = 1.0
    bench.model(grid)
    bench.case(HALF)
    assert "looks" not in bench.refuses("case.toml", status=1)


def test_turned_seam_that_does_not_close(bench: Bench) -> None:
    grid = wedge(30.0)
    grid.point_data["displacement"][:, 0] += 0.5
    bench.model(grid, "sector.vtu")
    bench.refuses("sector.vtu", "--sectors", 12, status=1,
                  says=["'displacement'", "does not close", "turned", "30 degrees"])  # fmt: skip


def test_hint_of_half_the_sectors_speaks_of_nodal_diameters(bench: Bench) -> None:
    """There is no load word to change where only an axis is declared."""
    grid = wedge(30.0)
    angle = np.arctan2(grid.points[:, 1], grid.points[:, 0])
    grid.point_data["displacement"] = np.c_[0 * angle, 0 * angle, np.cos(6 * angle)]
    bench.model(grid, "sector.vtu")
    bench.accepts("sector.vtu", "--sectors", 12, "--nodal-diameters", 6)
    bench.refuses("sector.vtu", "--sectors", 12, status=1,
                  says=["does not close", "nodal_diameters = 6"])  # fmt: skip


def test_open_seam_kept_apart(bench: Bench) -> None:
    grid = box()
    opened = (grid.points[:, 0] == 0.0) & (grid.points[:, 1] > 0.5)
    grid.point_data["displacement"][opened, 0] = 0.01
    bench.model(grid)
    bench.case(HALF)
    bench.refuses("case.toml", status=1, says=["6 of 9 seam nodes"])
    bench.case(HALF + '[seam]\nopen = "keep apart"\n')
    ran = bench.accepts("case.toml")
    assert "open at 6 nodes" in ran.out
    back = pyvista.wrap(read_back(bench.folder / "case_full.vtu"))
    assert back.n_points == 2 * 27 - 3
    twice = np.flatnonzero(np.isin(back.point_data["sector_point"], np.flatnonzero(opened)))
    assert len(twice) == 12
    assert sorted(back.point_data["displacement"][twice, 0]) == [-0.01] * 6 + [0.01] * 6
    found = json.loads(bench.accepts("case.toml", "--json").out)
    (opening,) = found["openings"]
    assert opening["field"] == "displacement"
    assert opening["nodes"] == np.flatnonzero(opened).tolist()


def test_limit_of_the_seam(bench: Bench) -> None:
    grid = box()
    grid.point_data["displacement"][:, 0] += 1e-3 * 0.02 * np.sqrt(3.0) / 2.0
    bench.model(grid)
    bench.case(HALF + "[seam]\nlimit = 0.9e-3\n")
    bench.refuses("case.toml", status=1, says=["limit 0.09 %"])
    bench.case(HALF + "[seam]\nlimit = 1.1e-3\n")
    bench.accepts("case.toml")


def test_dry_run_finds_an_open_seam(bench: Bench) -> None:
    grid = box()
    grid.point_data["displacement"][:, 0] += 0.01
    bench.model(grid)
    bench.refuses("half.vtu", "--mirror", "x", "--dry-run", status=1, says=["does not close"])


# Output


@pytest.mark.parametrize("name", ["whole.stl", "whole", "whole.vtk", "whole.vtu.gz"])
def test_output_of_an_unknown_type(bench: Bench, name: str) -> None:
    bench.model(box())
    bench.refuses("half.vtu", "--mirror", "x", "-o", name, says=["output.file", name, ".vtu"])
    bench.case(HALF + f'[output]\nfile = "{name}"\n')
    bench.refuses("case.toml", says=["output.file", name, ".vtu"])


@pytest.mark.parametrize("more", [(), ("--dry-run",)], ids=["write", "dry run"])
def test_output_folder_that_does_not_exist(bench: Bench, more: tuple[str, ...]) -> None:
    bench.model(box())
    bench.refuses("half.vtu", "--mirror", "x", "-o", "no/whole.vtu", *more,
                  says=["whole.vtu", "folder", "does not exist", "Create"])  # fmt: skip


@pytest.mark.parametrize("more", [(), ("--dry-run",)], ids=["write", "dry run"])
def test_output_that_is_a_folder(bench: Bench, more: tuple[str, ...]) -> None:
    bench.model(box())
    (bench.folder / "whole.vtu").mkdir()
    bench.refuses("half.vtu", "--mirror", "x", "-o", "whole.vtu", *more,
                  says=["whole.vtu", "folder", "output.file"])  # fmt: skip


def test_output_in_a_file_taken_for_a_folder(bench: Bench) -> None:
    bench.model(box())
    bench.refuses("half.vtu", "--mirror", "x", "-o", "half.vtu/whole.vtu", says=["whole.vtu"])


def test_output_over_an_input(bench: Bench) -> None:
    path = bench.model(box())
    content = path.read_bytes()
    bench.refuses("half.vtu", "--mirror", "x", "-o", "half.vtu", says=["half.vtu", "output.file"])
    bench.refuses("half.vtu", "--mirror", "x", "-o", "./x/../half.vtu", says=["half.vtu"])
    (bench.folder / "same.vtu").symlink_to(path)
    bench.refuses("half.vtu", "--mirror", "x", "-o", "same.vtu", says=["same.vtu", "output.file"])
    bench.refuses("same.vtu", "--mirror", "x", "-o", "half.vtu", says=["half.vtu", "output.file"])
    assert path.read_bytes() == content


def test_one_of_several_outputs_over_an_input(bench: Bench) -> None:
    bench.model(box(), "whole_b.vtu")
    bench.case('[model]\nfile = "whole_b.vtu"\n[[mirror]]\nnormal = "x"\n[[case]]\nname = "a"\n'
               '[[case]]\nname = "b"\n[output]\nfile = "whole.vtu"\n')  # fmt: skip
    bench.refuses("case.toml", says=["whole_b.vtu", "output.file"])


def test_results_whose_names_make_one_file_name(bench: Bench) -> None:
    bench.model(box())
    names = ["a_b_2", "a b", "a_b", "a/b", "A B", "..", "a?b"]
    bench.case(HALF + "".join(f"[[case]]\nname = {json.dumps(n)}\n" for n in names))
    ran = bench.accepts("case.toml", "--json")
    files = [result["file"] for result in json.loads(ran.out)["results"]]
    assert len({f.lower() for f in files}) == len(names)
    assert len(ran.changed) == len(names) + 1


@pytest.mark.skipif(os.geteuid() == 0, reason="root may write everywhere")
def test_read_only_folder(bench: Bench) -> None:
    bench.model(box())
    (bench.folder / "locked").mkdir(mode=0o555)
    bench.refuses("half.vtu", "--mirror", "x", "-o", "locked/whole.vtu",
                  says=["whole.vtu", "Permission denied", "folder"])  # fmt: skip


def test_folder_that_refuses_new_files(bench: Bench, monkeypatch: pytest.MonkeyPatch) -> None:
    bench.model(box())

    def refuse(*_: Any, **__: Any) -> Any:
        raise PermissionError(errno.EACCES, "Permission denied")

    monkeypatch.setattr(tempfile, "mkstemp", refuse)
    bench.refuses("half.vtu", "--mirror", "x", "-o", "whole.vtu",
                  says=["whole.vtu", "Permission denied", "folder"])  # fmt: skip


@pytest.mark.parametrize("code", [errno.ENOSPC, errno.EDQUOT, errno.EIO])
@pytest.mark.parametrize("after", [0, 0.3, 0.9])
def test_full_disk(bench: Bench, monkeypatch: pytest.MonkeyPatch, after: float, code: int) -> None:
    bench.model(box())
    bench.accepts("half.vtu", "--mirror", "x", "-o", "first.vtu")
    whole = (bench.folder / "first.vtu").stat().st_size
    (bench.folder / "whole.vtu").write_bytes(b"from before")
    real, written = os.pwrite, [0]

    def pwrite(descriptor: int, data: Any, at: int) -> int:
        if written[0] >= after * whole:
            raise OSError(code, os.strerror(code))
        done = real(descriptor, bytes(data)[:1000], at)
        written[0] += done
        return done

    monkeypatch.setattr(os, "pwrite", pwrite)
    remedy = "space" if code != errno.EIO else "folder"
    bench.refuses("half.vtu", "--mirror", "x", "-o", "whole.vtu",
                  says=["whole.vtu", os.strerror(code), remedy])  # fmt: skip
    assert written[0] >= after * whole
    assert (bench.folder / "whole.vtu").read_bytes() == b"from before"


def test_short_writes_are_completed(bench: Bench, monkeypatch: pytest.MonkeyPatch) -> None:
    bench.model(box())
    bench.accepts("half.vtu", "--mirror", "x", "-o", "once.vtu")
    real = os.pwrite
    monkeypatch.setattr(os, "pwrite", lambda d, data, at: real(d, bytes(data)[:13], at))
    bench.accepts("half.vtu", "--mirror", "x", "-o", "bits.vtu")
    assert (bench.folder / "once.vtu").read_bytes() == (bench.folder / "bits.vtu").read_bytes()


def test_second_of_two_files_does_not_fit(bench: Bench, monkeypatch: pytest.MonkeyPatch) -> None:
    bench.model(box())
    bench.case(HALF + '[[case]]\nname = "a"\n[[case]]\nname = "b"\n[output]\nfile = "w.pvd"\n')
    usage = shutil.disk_usage(bench.folder)
    free = iter([10**9, 100])
    monkeypatch.setattr(shutil, "disk_usage", lambda _: usage._replace(free=next(free, 10**9)))
    bench.refuses("case.toml", says=["w_b.vtu", "free", "output.copies"])


def command(*words_: object) -> list[str]:
    return [sys.executable, "-m", "expander.commandline", "expand", *map(str, words_)]


def test_file_size_limit_of_the_system(bench: Bench) -> None:
    """A real failure of the operating system, in a process of its own."""
    bench.model(box(6))
    before = bench.state()
    ran = subprocess.run(
        command("half.vtu", "--mirror", "x"), capture_output=True, text=True, timeout=60,
        preexec_fn=lambda: resource.setrlimit(resource.RLIMIT_FSIZE, (20_000, 20_000)),
    )  # fmt: skip
    assert ran.returncode == 2
    assert ran.stdout == ""
    assert "half_full.vtu" in ran.stderr
    assert len(ran.stderr.splitlines()) == 2
    assert bench.state() == before


def test_disk_of_one_megabyte(bench: Bench) -> None:
    """In a mount name space of its own, so that nothing stays mounted."""
    bench.model(box(30))
    (bench.folder / "small").mkdir()
    enter = ["unshare", "--map-root-user", "--mount", "sh", "-c"]
    mount = "mount -t tmpfs -o size=1m tmpfs small"
    try:
        tried = subprocess.run([*enter, mount], capture_output=True, timeout=60)
    except OSError:
        pytest.skip("unshare is not there")
    if tried.returncode:
        pytest.skip("mounting is not permitted")
    line = f'{mount} && "$@"; status=$?; ls -A small >&2; exit $status'
    ran = subprocess.run(
        [*enter, line, "sh", *command("half.vtu", "--mirror", "x", "-o", "small/whole.vtu")],
        capture_output=True, text=True, timeout=60,
    )  # fmt: skip
    assert ran.returncode == 2
    assert ran.stdout == ""
    assert "whole.vtu" in ran.stderr
    assert "free" in ran.stderr
    assert ".part" not in ran.stderr
    assert ran.stderr.splitlines()[-1].startswith("  "), "the folder is listed as empty"


def interrupting(monkeypatch: pytest.MonkeyPatch, error: BaseException) -> None:
    """The third block of values fails."""
    real, count = expander.images.image_values, [0]

    def image_values(*arguments: Any) -> Any:
        count[0] += 1
        if count[0] == 3:
            raise error
        return real(*arguments)

    monkeypatch.setattr(expander.images, "image_values", image_values)


def test_interrupted_writing_leaves_nothing(bench: Bench, monkeypatch: pytest.MonkeyPatch) -> None:
    grid = box()
    grid.point_data["velocity"] = 0.01 * grid.points
    bench.model(grid)
    interrupting(monkeypatch, KeyboardInterrupt())
    ran = bench.run("half.vtu", "--mirror", "x", "--mirror", "y")
    assert ran.status == 130
    assert ran.out == ""
    assert ran.err.strip() == "seamfold: stopped; nothing was left behind."
    assert ran.changed == []


@pytest.mark.parametrize("error", [MemoryError(), InputError("found", "remedy")])
def test_problems_while_writing_leave_nothing(
    bench: Bench, monkeypatch: pytest.MonkeyPatch, error: BaseException
) -> None:
    grid = box()
    grid.point_data["velocity"] = 0.01 * grid.points
    bench.model(grid)
    interrupting(monkeypatch, error)
    ran = bench.run("half.vtu", "--mirror", "x", "--mirror", "y")
    assert (ran.status, ran.out, ran.changed) == (2, "", [])
    assert ran.err.startswith("seamfold: ")
    assert "Traceback" not in ran.err


def test_problem_of_the_program_is_said_in_one_message(
    bench: Bench, monkeypatch: pytest.MonkeyPatch
) -> None:
    bench.model(box())
    interrupting(monkeypatch, RuntimeError("odd [red]thing[/red]"))
    ran = bench.run("half.vtu", "--mirror", "x", "--mirror", "y")
    assert (ran.status, ran.out, ran.changed) == (2, "", [])
    assert "please report" in ran.err
    assert "odd [red]thing[/red]" in ran.err
    assert "SEAMFOLD_TRACE" in ran.err
    assert "Traceback" not in ran.err


SLOW = """
import sys, time
import expander.images
real = expander.images.image_values
def slow(*arguments):
    time.sleep(0.01)
    return real(*arguments)
expander.images.image_values = slow
from expander.commandline import main
main()
"""


@pytest.mark.parametrize("signals", [[signal.SIGTERM], [signal.SIGINT], [signal.SIGINT] * 2],
                         ids=["terminated", "interrupted", "interrupted twice"])  # fmt: skip
def test_stopped_process_leaves_nothing(bench: Bench, signals: list[signal.Signals]) -> None:
    grid = wedge(10.0)
    for k in range(12):
        grid.cell_data[f"force{k}"] = np.ones((grid.n_cells, 3))
    bench.model(grid, "sector.vtu")
    declared = [f"--field=force{k}=polar vector" for k in range(12)]
    before = bench.state()
    process = subprocess.Popen(
        [sys.executable, "-c", SLOW, "expand", "sector.vtu", "--sectors", "36", *declared],
        stdout=subprocess.PIPE, stderr=subprocess.PIPE, text=True,
    )  # fmt: skip
    try:
        end = time.monotonic() + 30.0
        while not list(bench.folder.glob(".seamfold-*")):
            assert process.poll() is None, process.stderr.read() if process.stderr else ""
            assert time.monotonic() < end
            time.sleep(0.01)
        for each in signals:
            time.sleep(0.05)
            process.send_signal(each)
        out, err = process.communicate(timeout=30)
    finally:
        process.kill()
        process.wait()
    assert process.returncode not in (0, 1)
    assert out == ""
    assert err.strip() == "seamfold: stopped; nothing was left behind."
    assert bench.state() == before


# Names that are hard to write


HOSTILE = {
    "markup": "<b>&\"'</b>]]>",
    "line": "two\nlines",
    "tab": "two\tcolumns",
    "long": "x" * 5000,
    "right to left": "\u202eabc \u05d0\u05d1",
    "style": "[red]stress[/red]",
    "closing style": "[/red]",
    "symbols": "σ_θθ ½ 😀",
    "blanks": "  two  blanks  ",
    "entity": "&lt;a&amp;b",
    "path": "../../etc/x",
    "percent": "100%s%20",
}


@pytest.mark.parametrize("which", HOSTILE)
@pytest.mark.parametrize("on", ["points", "cells"])
def test_names_are_written_and_read_back(bench: Bench, which: str, on: str) -> None:
    name = HOSTILE[which]
    grid = box()
    count = grid.n_points if on == "points" else grid.n_cells
    values = np.random.default_rng(1).random((count, 6))
    (grid.point_data if on == "points" else grid.cell_data)["plain"] = values
    bench.model(grid)
    bench.case(
        HALF + f'[fields.{toml(name)}]\nkind = "symmetric tensor"\narrays = "plain"\n'
        f'seam = "recovered"\nunit = {toml(name)}\n'
    )
    ran = bench.accepts("case.toml")
    if which in ("markup", "style", "closing style", "symbols", "entity", "path", "percent"):
        assert name in ran.out
    assert json.loads(bench.accepts("case.toml", "--json").out)["fields"][0]["name"] == name
    back = read_back(bench.folder / "case_full.vtu")
    data = back.GetPointData() if on == "points" else back.GetCellData()
    assert name in names_of(data)
    recorded = back.GetFieldData().GetAbstractArray("fields")
    assert recorded.GetValue(0).startswith(f"{name}: symmetric tensor on {on}")
    # The output is a model like any other.
    back = pyvista.wrap(back)
    bench.accepts("case_full.vtu", "--mirror", "x at -2,0,0", "--skip-undeclared",
                  "--set", 'seam.open="keep apart"')  # fmt: skip
    again = names_of(read_back(bench.folder / "case_full_full.vtu").GetFieldData())
    assert "fields" in again


@pytest.mark.parametrize("which", HOSTILE)
def test_names_of_the_model_are_kept(bench: Bench, which: str) -> None:
    grid = box()
    grid.cell_data["PLACE"] = np.arange(grid.n_cells)
    bench.model(grid, rename=HOSTILE[which])
    bench.accepts("half.vtu", "--mirror", "x")
    back = read_back(bench.folder / "half_full.vtu")
    assert names_of(back.GetCellData()) == [HOSTILE[which], "sector_cell", "copy"]


def test_hostile_names_of_planes_and_results(bench: Bench) -> None:
    name = '<a>&"]]> [red]\n\u202e'
    bench.model(box())
    bench.case({
        "model": {"file": "half.vtu"},
        "mirror": [{"name": name, "normal": "x"}],
        "case": [{"name": name}, {"name": name + "2"}],
        "output": {"file": "whole.pvd"},
    })  # fmt: skip
    bench.accepts("case.toml")
    reader = pyvista.PVDReader(bench.folder / "whole.pvd")
    assert len(reader.datasets) == 2
    back = read_back(bench.folder / reader.datasets[0].path)
    fields = back.GetFieldData()
    assert fields.GetAbstractArray("result").GetValue(0) == name
    assert name in fields.GetAbstractArray("copy_words").GetValue(1) or repr(name) in (
        fields.GetAbstractArray("copy_words").GetValue(1)
    )


def test_message_with_hostile_names_is_not_styled(bench: Bench) -> None:
    grid = box()
    grid.point_data["[red]x[/red]"] = np.zeros((grid.n_points, 3))
    bench.model(grid)
    bench.refuses("half.vtu", "--mirror", "x", says=["[red]x[/red]"])


@pytest.mark.parametrize("encoding", ["ascii", "cp1252"])
def test_terminal_that_cannot_show_every_letter(
    bench: Bench, monkeypatch: pytest.MonkeyPatch, encoding: str
) -> None:
    grid = box()
    grid.cell_data["σ"] = np.arange(grid.n_cells)
    bench.model(grid)
    monkeypatch.setenv("PYTHONIOENCODING", encoding)
    ran = subprocess.run(command("half.vtu", "--mirror", "x"), capture_output=True, timeout=60)
    assert ran.stderr == b""
    assert ran.returncode == 0
    assert b"wrote" in ran.stdout
    assert (bench.folder / "half_full.vtu").exists()


def test_file_name_that_is_not_utf_8(bench: Bench) -> None:
    path = bench.model(box())
    strange = os.fsdecode(b"caf\xe9.vtu")
    path.rename(bench.folder / strange)
    ran = subprocess.run(command(strange, "--mirror", "x"), capture_output=True, timeout=60)
    written = (bench.folder / os.fsdecode(b"caf\xe9_full.vtu")).exists()
    assert b"Traceback" not in ran.stderr
    assert b"unexpected" not in ran.stderr
    assert written == (ran.returncode == 0), "a file only where the status says so"


# What the command line is given


@pytest.mark.parametrize(
    ("words_", "says"),
    [
        (("--mirror", "w"), ("--mirror", "'w'", "0,0.5,0")),
        (("--mirror", "x odd"), ("--mirror", "x odd", "antisymmetric")),
        (("--mirror", "x at 1,2"), ("--mirror", "1,2", "three numbers")),
        (("--mirror", "x at 1,2,nan"), ("point", "finite")),
        (("--sectors", "12", "--axis", "w"), ("--axis", "'w'")),
        (("--sectors", "12", "--axis-point", "0"), ("--axis-point", "three numbers")),
        (("--mirror", "x", "--field", "stress"), ("--field", "NAME=KIND")),
        (("--mirror", "x", "--field", "displacement=vector"), ("displacement", "polar vector")),
        (("--mirror", "x", "--set", "output.copies"), ("--set", "KEY=VALUE")),
        (("--mirror", "x", "--set", "mirror.3.load=symmetric"), ("--set", "mirror.3.load")),
        (("--mirror", "x", "--set", "mirror.-1.load=symmetric"), ("--set", "mirror.-1.load")),
        (("--mirror", "x", "--set", "mirror.load=symmetric"), ("--set", "mirror.load")),
        (("--mirror", "x", "--set", "output.flie=a.vtu"), ("output.flie", "mean 'file'?")),
        (("--axis", "z"), ("sectors",)),
        (("--nodal-diameters", "0"), ("sectors",)),
    ],
)  # fmt: skip
def test_wrong_options(bench: Bench, words_: tuple[str, ...], says: tuple[str, ...]) -> None:
    bench.model(box())
    bench.refuses("half.vtu", *words_, says=says)


@pytest.mark.parametrize("words_", [("--sectors", "many"), ("--no-such",), ("--mirror",)])
def test_wrong_usage(bench: Bench, words_: tuple[str, ...]) -> None:
    bench.model(box())
    ran = bench.run("half.vtu", *words_)
    assert (ran.status, ran.out, ran.changed) == (2, "", [])
    assert words_[0] in ran.err
    assert "Traceback" not in ran.err


def test_options_that_describe_a_case_beside_a_case_file(bench: Bench) -> None:
    bench.model(box())
    bench.case(HALF)
    for option, value in (("--mirror", "y"), ("--sectors", 3), ("--axis", "z"),
                          ("--axis-point", "0,0,0"), ("--nodal-diameters", 0),
                          ("--field", "displacement=polar vector")):  # fmt: skip
        bench.refuses("case.toml", option, value, says=[option, "case.toml", "--set"])


def test_validation_does_not_need_a_file() -> None:
    """Scripts get the same message as the command line."""
    with pytest.raises(InputError, match=r"model\.fil") as caught:
        validate_case({"model": {"fil": "a.vtu"}}, Path())
    assert "Did you mean 'file'?" in str(caught.value)
    assert caught.value.exit_status == 2
