"""`seamfold check` at the command line: exit statuses, streams, files, tables and odd names."""

from __future__ import annotations

import csv
import errno
import json
import os
import re
import stat
import subprocess
import sys
import tomllib
from collections.abc import Callable
from dataclasses import dataclass
from importlib.metadata import version
from pathlib import Path
from typing import Any

import jsonschema
import numpy as np
import pytest
import pyvista
from check_cases import clamped, even, half, other_mesh, wave
from meshes import Sector, box
from PIL import Image

from expander.commandline import main


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
    monkeypatch.setenv("COLUMNS", "240")
    monkeypatch.setenv("SEAMFOLD_TRACE", "")

    def run(*words: object) -> Ran:
        monkeypatch.setattr(sys, "argv", ["seamfold", *map(str, words)])
        capfd.readouterr()
        status: Any = 0
        try:
            main()
        except SystemExit as stop:
            status = stop.code or 0
        ran = Ran(status, *capfd.readouterr())
        for text in (ran.out, ran.err):
            assert "Traceback" not in text
            assert "unexpected problem" not in text
            assert "Warning" not in text
        return ran

    return run


def process(*words: object, **more: Any) -> subprocess.CompletedProcess[str]:
    """The command in a process of its own, where neither stream is a terminal."""
    line = [sys.executable, "-m", "expander.commandline", "check", *map(str, words)]
    return subprocess.run(line, capture_output=True, text=True, timeout=120, **more)


def save(
    name: str, sector: Sector, points: dict[str, Any], cells: dict[str, Any] | None = None
) -> None:
    grid = sector.grid()
    for key, array in points.items():
        grid.point_data[key] = array
    for key, array in (cells or {}).items():
        grid.cell_data[key] = array
    grid.save(name)


def good(name: str = "good.vtu", **more: Any) -> None:
    given = half()
    save(name, given.sector, given.points | more)


def wrong(name: str = "wrong.vtu") -> None:
    """Symmetric in the plane z = 0, not in x = 0."""
    given = half()
    u = given.points["displacement"][:, [1, 0, 2]]
    save(name, given.sector, {"displacement": u})


def doubtful(name: str = "doubtful.vtu") -> None:
    """A displacement of an eighth of the body's size: too large for a linear analysis."""
    given = half()
    u = even(given.sector.points)
    save(name, given.sector, {"displacement": 0.25 * u / np.linalg.norm(u, axis=1).max()})


def listing(folder: Path = Path()) -> dict[str, bytes]:
    return {p.name: p.read_bytes() for p in sorted(folder.iterdir()) if p.is_file()}


X = ("--mirror", "x called mid")


# --- exit status ----------------------------------------------------------------------------------


def test_passed(seamfold: Seamfold) -> None:
    good()
    ran = seamfold("check", "good.vtu", *X)
    assert (ran.status, ran.err) == (0, "")
    assert ran.out.endswith("verdict: passed\n")
    assert seamfold("check", "good.vtu", *X, "--strict").status == 0


def test_failed(seamfold: Seamfold) -> None:
    wrong()
    for more in ([], ["--strict"], ["--seams-only"]):
        ran = seamfold("check", "wrong.vtu", *X, *more)
        assert (ran.status, ran.err) == (1, "")
        assert ran.out.endswith("verdict: failed\n")


def test_doubtful_fails_only_if_strict(seamfold: Seamfold) -> None:
    doubtful()
    ran = seamfold("check", "doubtful.vtu", *X)
    assert (ran.status, ran.err) == (0, "")
    assert ran.out.endswith("verdict: doubtful\n")
    strict = seamfold("check", "doubtful.vtu", *X, "--strict")
    assert (strict.status, strict.err) == (1, "")
    assert strict.out == ran.out
    assert seamfold("check", "doubtful.vtu", *X, "--strict", "--seams-only").status == 0
    ran = seamfold("check", "doubtful.vtu", *X, "--strict", "--set", "expect.mode_shape=true")
    assert ran.status == 0


def test_case_file_and_options_are_the_same(seamfold: Seamfold) -> None:
    wrong()
    Path("case.toml").write_text(
        '[model]\nfile = "wrong.vtu"\n[[mirror]]\nname = "mid"\nnormal = "x"\n', encoding="utf-8"
    )
    by_file = json.loads(seamfold("check", "case.toml", "--json").out)
    by_options = json.loads(seamfold("check", "wrong.vtu", *X, "--json").out)
    assert Path(by_file.pop("source")).name == "case.toml"
    assert Path(by_options.pop("source")).name == "wrong.vtu"
    for told in (by_file, by_options):
        for f in told["findings"]:
            f.pop("line")
    assert by_file == by_options


NO_FILE = "does not exist|there is no such"
BAD: list[tuple[list[str], str]] = [
    ([], "CASE"),
    (["none.vtu", *X], NO_FILE),
    (["none.toml"], NO_FILE),
    ([".", *X], "folder|not read|extension"),
    (["good.xyz", *X], "xyz"),
    (["empty.vtu", *X], "empty.vtu"),
    (["torn.vtu", *X], "torn.vtu"),
    (["not.toml"], "not.toml is not valid TOML"),
    (["unknown_key.toml"], "unknown key"),
    (["good.vtu", "--mirror", "w"], "--mirror"),
    (["good.vtu", "--mirror", "0,0,0"], "no direction"),
    (["good.vtu", "--mirror", "x at 0.5,0,0"], "both sides"),
    (["good.vtu", "--sectors", "1"], "sectors"),
    (["good.vtu", "--sectors", "many"], "many"),
    (["good.vtu", *X, "--set", "seam.limit=-1"], "seam.limit"),
    (["good.vtu", *X, "--set", "seam.limit=nan"], "seam.limit"),
    (["good.vtu", *X, "--set", "seam.scatter=0"], "seam.scatter"),
    (["good.vtu", *X, "--set", "expect.result=spam"], "spam"),
    (["good.vtu", *X, "--set", "expect.tolerence=1"], "tolerence"),
    (["good.vtu", *X, "--set", "expect.mass=0"], "mass"),
    (["good.vtu", *X, "--set", "re_reference.method=guess"], "re_reference"),
    (["good.vtu", *X, "--section", "x"], "stress"),
    (["good.vtu", *X, "--section", "x antisymmetric"], "--section"),
    (["good.vtu", *X, "--section", "x at 1,2"], "--section"),
    (["good.vtu", *X, "--section", "sideways"], "--section"),
    (["good.vtu", *X, "--nonsense"], "--nonsense"),
    (["good.vtu", *X, "--along", "sideways", "--csv", "a.csv"], "sideways"),
    (["good.vtu", *X, "--csv", "a.txt"], r"a\.csv"),
    (["good.vtu", *X, "--csv", "a"], r"a\.csv"),
    (["good.vtu", *X, "--plot", "a.jpg"], r"a\.png"),
    (["good.vtu", *X, "--seam-mesh", "a.vtk"], r"a\.vtu"),
    (["good.vtu", *X, "--csv", "a.csv", "--seam", "spam"], "spam.*mid"),
    (["good.vtu", *X, "--plot", "a.png", "--seam", "spam"], "spam.*mid"),
    (["good.vtu", *X, "--plot", "a.png", "--show", "spam"], "spam.*displacement"),
    (["good.vtu", *X, "--plot", "a.png", "--in-case", "spam"], "spam.*result"),
    (["good.vtu", *X, "--plot", "a.png", "--component", "q"], "'?q'?.*x, y, z"),
    (["good.vtu", *X, "--csv", "a.csv", "--along", "radius"], "no cyclic axis"),
    (["good.vtu", *X, "--csv", "nowhere/a.csv"], "nowhere"),
    (["good.vtu", *X, "--csv", "folder.csv"], "folder"),
    (["good.vtu", *X, "--seam-mesh", "good.vtu"], "overwritten"),
    (["good.vtu", *X, "--seam-mesh", "./sub/../good.vtu"], "overwritten"),
    (["far.vtu", *X, "--csv", "a.csv"], "no seam|do not touch"),
    (["far.vtu", *X, "--plot", "a.png"], "no seam|do not touch"),
    (["nan.vtu", *X], "not finite"),
    (["undeclared.vtu", *X], "fields.w"),
    (["case.toml", "--mirror", "x"], "--mirror"),
    (["half_wave.vtu", "--sectors", "6", "--nodal-diameters", "1"], "real"),
    (["good.vtu", *X, "--csv", "same.csv", "--plot", "same.csv"], r"same\.png"),
]


@pytest.fixture
def inputs(seamfold: Seamfold) -> None:
    """All files that the bad command lines name."""
    good()
    given = half()
    save("far.vtu", given.sector.moved(np.eye(3), (3.0, 0.0, 0.0)), given.points)
    save("undeclared.vtu", given.sector, given.points | {"w": np.ones((36, 3))})
    save("half_wave.vtu", wave().sector, {"displacement": wave().points["u_re"]})
    u = given.points["displacement"].copy()
    u[3] = np.nan
    save("nan.vtu", given.sector, {"displacement": u})
    Path("empty.vtu").write_bytes(b"")
    Path("torn.vtu").write_bytes(Path("good.vtu").read_bytes()[:900])
    Path("good.xyz").write_bytes(b"1 2 3")
    Path("not.toml").write_text("[model\n", encoding="utf-8")
    Path("case.toml").write_text('[model]\nfile = "good.vtu"\n[[mirror]]\nnormal = "x"\n')
    Path("unknown_key.toml").write_text('[model]\nfile = "good.vtu"\n[seam]\nlimits = 1.0\n')
    Path("folder.csv").mkdir()
    Path("sub").mkdir()


@pytest.mark.usefixtures("inputs")
@pytest.mark.parametrize(
    ("words", "said"), BAD, ids=lambda v: " ".join(v) if isinstance(v, list) else ""
)
def test_bad_input(seamfold: Seamfold, words: list[str], said: str) -> None:
    before = listing()
    for more in ([], ["--json"]):
        ran = seamfold("check", *words, *more)
        assert ran.status == 2, ran.out + ran.err
        assert ran.out == ""
        assert re.search(said, ran.err, re.S | re.I), ran.err
        assert len(ran.err.strip().splitlines()) <= 6
        assert listing() == before


@pytest.mark.usefixtures("inputs")
def test_bad_input_of_files_that_are_not_reached(seamfold: Seamfold) -> None:
    """Nothing of several files is left behind when the last one cannot be made."""
    before = listing()
    ran = seamfold("check", "good.vtu", *X, "--seam-mesh", "s.vtu", "--csv", "s.csv", "--plot",
                   "nowhere/s.png")  # fmt: skip
    assert (ran.status, ran.out) == (2, "")
    assert "nowhere" in ran.err
    assert listing() == before


def test_one_file_twice_is_refused(seamfold: Seamfold) -> None:
    """The seams may not overwrite what the case itself is: here by another name of it."""
    good()
    Path("other.vtu").symlink_to("good.vtu")
    os.link("good.vtu", "hard.vtu")
    before = Path("good.vtu").read_bytes()
    for name in ("other.vtu", "hard.vtu"):
        seamfold("check", "good.vtu", *X, "--seam-mesh", name)
        assert Path("good.vtu").read_bytes() == before, "the model is as it was"


@pytest.mark.skipif(os.geteuid() == 0, reason="root may write anywhere")
def test_folder_that_is_read_only(seamfold: Seamfold, tmp_path: Path) -> None:
    good()
    locked = tmp_path / "locked"
    locked.mkdir()
    locked.chmod(stat.S_IRUSR | stat.S_IXUSR)
    try:
        ran = seamfold("check", "good.vtu", *X, "--csv", "locked/a.csv")
    finally:
        locked.chmod(stat.S_IRWXU)
    assert (ran.status, ran.out) == (2, "")
    assert "a.csv cannot be written" in ran.err


@pytest.mark.parametrize("number", [errno.EACCES, errno.EROFS, errno.ENOSPC])
def test_disk_that_refuses(
    seamfold: Seamfold, monkeypatch: pytest.MonkeyPatch, number: int
) -> None:
    """Read-only, unwritable or full: one message, nothing printed, nothing left."""
    good()
    before = listing()

    def refuse(*_: Any, **__: Any) -> Any:
        raise OSError(number, os.strerror(number))

    monkeypatch.setattr("expander.writers.newfiles.tempfile.mkstemp", refuse)
    for option, name in (("--csv", "a.csv"), ("--seam-mesh", "a.vtu")):
        ran = seamfold("check", "good.vtu", *X, option, name)
        assert (ran.status, ran.out) == (2, "")
        assert f"{name} cannot be written: {os.strerror(number)}" in ran.err
        assert listing() == before


def test_model_that_may_not_be_read(seamfold: Seamfold, monkeypatch: pytest.MonkeyPatch) -> None:
    good()
    Path("case.toml").write_text('[model]\nfile = "good.vtu"\n[[mirror]]\nnormal = "x"\n')
    read = Path.read_text

    def refuse(self: Path, *more: Any, **named: Any) -> str:
        if self.name == "case.toml":
            raise PermissionError(errno.EACCES, os.strerror(errno.EACCES))
        return read(self, *more, **named)

    monkeypatch.setattr(Path, "read_text", refuse)
    ran = seamfold("check", "case.toml")
    assert (ran.status, ran.out) == (2, "")
    assert "cannot be read: Permission denied" in ran.err


def test_exit_status_and_streams_of_a_process(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    monkeypatch.chdir(tmp_path)
    good()
    wrong()
    for name, status in (("good.vtu", 0), ("wrong.vtu", 1), ("none.vtu", 2)):
        for more in ([], ["--json"]):
            ran = process(name, *X, *more, cwd=tmp_path)
            assert ran.returncode == status
            assert (ran.stdout == "") == (status == 2)
            assert (ran.stderr == "") == (status < 2)
            assert "\x1b" not in ran.stdout + ran.stderr
            assert "\r" not in ran.stdout + ran.stderr
            if more and status < 2:
                json.loads(ran.stdout)


def test_values_that_are_not_finite_say_nothing_on_the_error_stream(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    """In a process of its own, where numpy would print its warnings."""
    monkeypatch.chdir(tmp_path)
    given = half()
    u = given.points["displacement"].copy()
    u[0], u[-1, 1] = np.nan, np.inf
    save("nan.vtu", given.sector, {"displacement": u})
    ran = process("nan.vtu", *X, "--allow-nan", "--json", cwd=tmp_path)
    assert ran.returncode in (0, 1)
    assert ran.stderr == ""
    json.loads(ran.stdout, parse_constant=no_number)


# --- JSON and help --------------------------------------------------------------------------------


def no_number(word: str) -> float:
    raise AssertionError(f"{word} is not JSON")


def test_json_fits_the_schema_that_the_command_prints(seamfold: Seamfold) -> None:
    ran = seamfold("check", "--json-schema")
    assert (ran.status, ran.err) == (0, "")
    schema = json.loads(ran.out)
    jsonschema.Draft202012Validator.check_schema(schema)
    wrong()
    ran = seamfold("check", "wrong.vtu", *X, "--json", "--csv", "a.csv")
    assert (ran.status, ran.err) == (1, "")
    told = json.loads(ran.out, parse_constant=no_number)
    jsonschema.Draft202012Validator(schema).validate(told)
    assert told["written"] == ["a.csv"]
    assert told["program"] == f"seamfold {version('seamfold')}"
    assert told["verdict"] == "failed"
    told.pop("written")
    with pytest.raises(jsonschema.ValidationError):
        jsonschema.Draft202012Validator(schema).validate(told)


@pytest.mark.parametrize("words", [["--json-schema"], ["none.vtu", "--json-schema"],
                                   ["--json-schema", "--json", "none.vtu"]])  # fmt: skip
def test_the_schema_needs_no_case(seamfold: Seamfold, words: list[str]) -> None:
    ran = seamfold("check", *words)
    assert (ran.status, ran.err) == (0, "")
    assert json.loads(ran.out)["properties"]["schema"]["const"] == 1


def test_help_and_schema_answer_at_once() -> None:
    code = (
        "import sys; sys.argv = ['seamfold', 'check', sys.argv[1]]\n"
        "from expander.commandline import main\n"
        "try: main()\n"
        "except SystemExit as stop: assert not stop.code\n"
        "heavy = {'numpy', 'scipy', 'vtkmodules', 'pyvista', 'meshio', 'matplotlib'}\n"
        "assert not heavy & {n.partition('.')[0] for n in sys.modules}\n"
    )
    for word in ("--help", "--json-schema"):
        ran = subprocess.run([sys.executable, "-c", code, word], capture_output=True, text=True,
                             timeout=60)  # fmt: skip
        assert (ran.returncode, ran.stderr) == (0, "")
        assert ran.stdout


def test_help_has_examples_that_run(seamfold: Seamfold) -> None:
    ran = seamfold("check", "--help")
    assert (ran.status, ran.err) == (0, "")
    assert re.search(r"^ *Examples?:\n +seamfold check ", ran.out, re.M)
    assert "0: nothing" in " ".join(ran.out.split())
    examples = re.findall(r"^ +(seamfold check .+)$", ran.out, re.M)
    assert len(examples) >= 3
    given = half()
    stress = np.zeros((36, 6))
    save("half.vtu", given.sector, given.points | {"stress": stress})
    case = '[model]\nfile = "half.vtu"\n[[mirror]]\nnormal = "x"\n'
    for name in ("bracket.toml", "ring.toml"):
        Path(name).write_text(case, encoding="utf-8")
    for example in examples:
        words = [w.strip('"') for w in re.findall(r'"[^"]*"|\S+', example.partition(" > ")[0])]
        ran = seamfold(*words[1:])
        assert (ran.status, ran.err) == (0, ""), example


# --- the table ------------------------------------------------------------------------------------


def test_the_table_names_node_verdict_and_the_line_to_change(seamfold: Seamfold) -> None:
    """Node 7 of the plane moves through it the most."""
    given = half()
    u = given.points["displacement"].copy()
    at = given.sector.points[:, 0] == 0.0
    u[at] = [1e-4, 0.0, 0.0]
    u[7] = [3e-4, 0.0, 0.0]
    save("model.vtu", given.sector, {"displacement": u})
    ran = seamfold("check", "model.vtu", *X)
    assert ran.status == 1
    assert re.search(r"displacement +values .* 7 +open", ran.out)
    assert re.search(r"plane 'mid' +symmetric +antisymmetric .* open", ran.out)
    assert "[[mirror]] 'mid': load = \"antisymmetric\"" in ran.out
    said = " ".join(ran.out.split())
    assert "FAILS plane 'mid': case 'result' is declared symmetric, found: antisymmetric" in said
    assert re.search(r"FAILS plane 'mid': case 'result': 'displacement' jumps .* at node 7 ", said)
    assert ran.out.count("verdict: failed") == 1
    Path("case.toml").write_text(
        '[model]\nfile = "model.vtu"\n[[mirror]]\nname = "mid"\nnormal = "x"\n'
        '[[case]]\nname = "wind"\n', encoding="utf-8",
    )  # fmt: skip
    ran = seamfold("check", "case.toml")
    assert '[[case]] \'wind\': load = { "mid" = "antisymmetric" }' in ran.out


def test_the_line_of_the_table_helps(seamfold: Seamfold) -> None:
    """What the table says is the load closes the seam."""
    given = half()
    u = given.sector.points.copy()[:, [1, 2, 0]] * [[1.0, 0.0, 0.0]]
    save("odd.vtu", given.sector, {"displacement": 1e-3 * u})
    assert seamfold("check", "odd.vtu", *X).status == 1
    assert seamfold("check", "odd.vtu", "--mirror", "x antisymmetric").status == 0


def test_clamped_plane_names_its_line(seamfold: Seamfold) -> None:
    given = clamped()
    save("model.vtu", given.sector, given.points)
    ran = seamfold("check", "model.vtu", *X)
    assert ran.status == 1
    assert "looks clamped" in ran.out
    assert "held = true" in ran.out
    ran = seamfold("check", "model.vtu", *X, "--set", "mirror.0.held=true")
    assert "looks clamped" in ran.out
    assert ran.status == 0, "declared as held: a note, no failure"


def test_open_nodes_shown_are_few(seamfold: Seamfold) -> None:
    """A seam of many nodes that are all open fills no screen."""
    sector = box((2, 20, 20))
    u = np.random.default_rng(1).normal(size=(len(sector.points), 3))
    save("model.vtu", sector, {"displacement": 1e-3 * u})
    ran = seamfold("check", "model.vtu", *X)
    assert ran.status == 1
    assert max(map(len, ran.out.splitlines())) < 1000
    told = json.loads(seamfold("check", "model.vtu", *X, "--json").out)
    (value, *_) = told["fields"][0]["seams"]
    assert value["open_nodes"] == 441
    assert len(value["worst_nodes"]) == 20


@pytest.mark.parametrize("columns", [60, 80, 120])
def test_table_on_a_narrow_terminal(
    seamfold: Seamfold, monkeypatch: pytest.MonkeyPatch, columns: int
) -> None:
    wrong()
    monkeypatch.setenv("COLUMNS", str(columns))
    monkeypatch.setenv("TTY_COMPATIBLE", "1")  # as on a terminal
    ran = seamfold("check", "wrong.vtu", *X)
    assert ran.status == 1
    lines = re.sub("\x1b[^a-zA-Z]*[a-zA-Z]", "", ran.out).splitlines()
    assert max(map(len, lines)) <= columns


def test_sections(seamfold: Seamfold) -> None:
    """Stress zz = 4 over the whole body's area of 2 x 1 across z: a pull of 8 along z."""
    sector = box((2, 2, 2))
    stress = np.zeros((8, 6))
    stress[:, 2] = 4.0
    save("model.vtu", sector, {"displacement": even(sector.points)}, {"stress": stress})
    ran = seamfold("check", "model.vtu", *X, "--section", "z at 0,0,0.3 called [red]waist[/red]",
                   "--section", "0,0,-2 at 0,0,0.5")  # fmt: skip
    assert (ran.status, ran.err) == (0, "")
    assert re.search(
        r"\[red\]waist\[/red\], result, from stress: force \(0, 0, 8\), moment .*area 2\b", ran.out
    )
    assert re.search(r"section 2, result, from stress: force \(0, 0, -8\)", ran.out)
    told = json.loads(seamfold("check", "model.vtu", *X, "--section", "z at 0,0,0.3", "--json").out)
    (section,) = told["audit"]["sections"]
    assert section["force"] == pytest.approx([0.0, 0.0, 8.0], abs=1e-9)
    assert section["centroid"] == pytest.approx([0.0, 0.5, 0.3])
    ran = seamfold("check", "model.vtu", *X, "--section", "z called a", "--section", "z called a")
    assert (ran.status, ran.out) == (2, "")
    assert "two sections" in ran.err


def test_sections_of_a_case_file_and_of_options(seamfold: Seamfold) -> None:
    """An option takes the place of the sections of the case file."""
    sector = box((2, 2, 2))
    save("model.vtu", sector, {"displacement": even(sector.points)}, {"stress": np.ones((8, 6))})
    Path("case.toml").write_text(
        '[model]\nfile = "model.vtu"\n[[mirror]]\nnormal = "x"\n[[section]]\nname = "own"\n'
        'normal = "y"\npoint = [0.0, 0.5, 0.0]\n', encoding="utf-8",
    )  # fmt: skip
    told = json.loads(seamfold("check", "case.toml", "--json").out)
    assert [s["name"] for s in told["audit"]["sections"]] == ["own"]
    words = ["check", "case.toml", "--section", "z at 0,0,0.4 called new", "--json"]
    assert [s["name"] for s in json.loads(seamfold(*words).out)["audit"]["sections"]] == ["new"]


# --- files ----------------------------------------------------------------------------------------


def table(path: str | Path) -> list[dict[str, str]]:
    with open(path, encoding="utf-8", newline="") as stream:
        return list(csv.DictReader(stream))


def test_all_files_at_once(seamfold: Seamfold) -> None:
    wrong()
    before = set(listing())
    ran = seamfold(
        "check", "wrong.vtu", *X, "--seam-mesh", "s.vtu", "--csv", "s.csv", "--plot", "s.png"
    )
    assert (ran.status, ran.err) == (1, ""), "what failed is written all the same"
    assert set(listing()) - before == {"s.vtu", "s.csv", "s.png"}
    for name in ("s.vtu", "s.csv", "s.png"):
        assert f"wrote {name}\n" in ran.out
    rows = table("s.csv")
    told = json.loads(seamfold("check", "wrong.vtu", *X, "--json").out)
    value = told["fields"][0]["seams"][0]
    jumps = {
        int(r["node"]): [float(r[f"result: displacement: jump_{c}"]) for c in "xyz"] for r in rows
    }
    assert len(jumps) == told["seams"][0]["nodes"] == 9
    worst = max(jumps, key=lambda n: float(np.linalg.norm(jumps[n])))
    assert np.linalg.norm(jumps[worst]) == pytest.approx(value["jump"], rel=1e-12)
    assert np.linalg.norm(jumps[value["node"]]) == pytest.approx(value["jump"], rel=1e-12)
    mesh = pyvista.read("s.vtu")
    assert isinstance(mesh, pyvista.UnstructuredGrid)
    assert float(mesh.point_data["jump_displacement_length"].max()) == pytest.approx(value["jump"])
    with Image.open("s.png") as image:
        assert min(image.size) > 200


def test_files_are_the_same_every_time_and_replace_old_ones(seamfold: Seamfold) -> None:
    good()
    words = ["check", "good.vtu", *X, "--csv", "s.csv", "--seam-mesh", "s.vtu", "--plot", "s.png"]
    assert seamfold(*words).status == 0
    first = listing()
    for name in ("s.csv", "s.vtu", "s.png"):
        Path(name).write_bytes(b"old")
    assert seamfold(*words).status == 0
    assert listing() == first


def test_no_files_without_options(seamfold: Seamfold) -> None:
    wrong()
    before = listing()
    for more in ([], ["--json"], ["--seams-only"]):
        assert seamfold("check", "wrong.vtu", *X, *more).status == 1
        assert listing() == before


@pytest.mark.parametrize(
    ("option", "value"),
    [("--show", "displacement"), ("--in-case", "a"), ("--component", "x"), ("--seam", "mid"),
     ("--along", "z")],
)  # fmt: skip
def test_options_of_a_plot_need_one(seamfold: Seamfold, option: str, value: str) -> None:
    good()
    found = seamfold("check", "good.vtu", *X, option, value)
    assert found.status == 2
    assert option in found.err
    assert "--plot" in found.err


def quarter() -> None:
    """Symmetric in x and not in y = 0, which is the worst seam."""
    sector = box((2, 2, 2))
    x, y, z = sector.points.T
    u = np.stack([x, 1.0 + y, z], axis=1)
    save(
        "quarter.vtu",
        sector,
        {
            "displacement": 1e-3 * u,
        },
    )


QUARTER = ("--mirror", "x called right", "--mirror", "y called floor")


def test_the_worst_seam_or_the_one_named(seamfold: Seamfold) -> None:
    quarter()
    for seam, axis in ((None, "y"), ("floor", "y"), ("right", "x"), ("plane 'right'", "x")):
        more = [] if seam is None else ["--seam", seam]
        ran = seamfold("check", "quarter.vtu", *QUARTER, "--csv", "s.csv", *more)
        assert (ran.status, ran.err) == (1, "")
        rows = table("s.csv")
        assert len(rows) == 9
        assert {float(r[axis]) for r in rows} == {0.0}


def test_order_along_the_seam(seamfold: Seamfold) -> None:
    quarter()
    for along in ("x", "y", "z", "auto"):
        ran = seamfold("check", "quarter.vtu", *QUARTER, "--csv", "s.csv", "--seam", "right",
                       "--along", along)  # fmt: skip
        assert ran.status == 1
        rows = table("s.csv")
        place = [float(r["position"]) for r in rows]
        assert place == sorted(place)
        if along != "auto":
            assert place == [float(r[along]) for r in rows]


def test_radius_along_a_sector(seamfold: Seamfold) -> None:
    given = wave()
    save("ring.vtu", given.sector, given.points)
    Path("case.toml").write_text(
        '[model]\nfile = "ring.vtu"\n[cyclic]\nsectors = 6\nnodal_diameters = 1\n'
        '[fields.displacement]\nkind = "polar vector"\nreal = "u_re"\nimaginary = "u_im"\n',
        encoding="utf-8",
    )
    ran = seamfold("check", "case.toml", "--csv", "s.csv", "--along", "radius", "--seam-mesh",
                   "s.vtu", "--plot", "s.png")  # fmt: skip
    assert (ran.status, ran.err) == (0, "")
    for row in table("s.csv"):
        radius = np.hypot(float(row["x"]), float(row["y"]))
        assert float(row["position"]) == pytest.approx(radius, abs=1e-12)
        assert abs(float(row["result: displacement: jump_x_imag"])) < 1e-12
    told = json.loads(seamfold("check", "case.toml", "--json").out)
    assert told["cases"][0]["phase"] == "+"
    ran = seamfold("check", "case.toml", "--set", "cyclic.phase=-")
    assert ran.status == 1
    assert "conjugated" in ran.out
    assert 'phase = "+"' in ran.out, "the line that closes it"


def test_faces_with_different_meshes(seamfold: Seamfold) -> None:
    given = other_mesh()
    save("ring.vtu", given.sector, given.points)
    ran = seamfold("check", "ring.vtu", "--sectors", 4, "--csv", "s.csv", "--seam-mesh", "s.vtu")
    assert (ran.status, ran.err) == (0, "")
    assert "by interpolation" in ran.out
    assert "other mesh" in ran.out


# --- odd names ------------------------------------------------------------------------------------

ODD = {
    "markup": "[red]hot[/red]",
    "a tag that is not closed": "[bold",
    "a closing tag": "[/]",
    "a link": "[link=https://example.org]x[/link]",
    "very long": "long_" * 60,
    "right to left": "הזזה",
    "mixed directions": "\u202eabc\u202c",
    "brackets": "s[1][2]]",
    "backslash": "a\\[b]\\",
    "quotes": 'it\'s "so"',
    "an apostrophe": "it's",
    "xml": "<a href='x'>&amp;</a>",
    "formula": "$\\frac{1}{0}$",
    "emoji": ":smile: 😀",
    "format": "{0} %s %d {x}",
    "comma": "a, b; c",
    "blanks": "a  b",
}


def quoted(name: str) -> str:
    """As TOML has it: JSON's escapes are TOML's too, but for pairs of surrogates."""
    return json.dumps(name, ensure_ascii=False)


def declare(field: str, plane: str, case: str | None = None) -> None:
    """A case whose names are these, on a model that does not close."""
    words = [
        "[model]", 'file = "wrong.vtu"', "[[mirror]]", f"name = {quoted(plane)}",
        'normal = "x"', f"[fields.{quoted(field)}]", 'kind = "polar vector"',
        'arrays = ["displacement"]',
    ]  # fmt: skip
    if case is not None:
        words += ["[[case]]", f"name = {quoted(case)}"]
    Path("case.toml").write_text("\n".join(words), encoding="utf-8")


@pytest.mark.parametrize("name", ODD.values(), ids=ODD)
def test_names_are_shown_as_they_are(seamfold: Seamfold, name: str) -> None:
    wrong()
    declare(name, name, name)
    ran = seamfold("check", "case.toml")
    assert (ran.status, ran.err) == (1, "")
    told = json.loads(seamfold("check", "case.toml", "--json").out)
    assert told["fields"][0]["field"] == name
    assert told["cases"][0]["name"] == name
    assert name in told["cases"][0]["behaviour"]
    squeezed = re.sub(r"\s", "", ran.out)
    assert squeezed.count(re.sub(r"\s", "", name)) >= 2


@pytest.mark.parametrize("name", ODD.values(), ids=ODD)
def test_the_line_to_change_can_be_written_as_it_is_shown(seamfold: Seamfold, name: str) -> None:
    """load = { .. } of a [[case]] is TOML, with this name as its key."""
    given = half()
    u = given.sector.points[:, [1, 2, 0]] * [[1.0, 0.0, 0.0]]
    save("wrong.vtu", given.sector, {"displacement": 1e-3 * u})
    declare("displacement", name, "a")
    told = json.loads(seamfold("check", "case.toml", "--json").out)
    line = told["loads"][0]["line"]
    assert line.startswith("[[case]] 'a': load = ")
    assert tomllib.loads(line.removeprefix("[[case]] 'a': ")) == {"load": {name: "antisymmetric"}}


@pytest.mark.parametrize("name", ODD.values(), ids=ODD)
def test_seams_are_found_by_the_name_of_their_plane(seamfold: Seamfold, name: str) -> None:
    wrong()
    declare("displacement", name)
    ran = seamfold("check", "case.toml", "--csv", "s.csv", "--seam", name)
    assert (ran.status, ran.err) == (1, "")
    assert len(table("s.csv")) == 9


@pytest.mark.parametrize("name", ODD.values(), ids=ODD)
def test_files_hold_names_as_they_are(seamfold: Seamfold, name: str) -> None:
    wrong()
    declare(name, "mid", name)
    files = ["--csv", "s.csv", "--plot", "s.png", "--seam-mesh", "s.vtu"]
    ran = seamfold("check", "case.toml", *files, "--show", name, "--in-case", name)
    assert (ran.status, ran.err) == (1, "")
    assert f"{name}: {name}: jump_x" in table("s.csv")[0]
    assert f"jump_{name}" in pyvista.read("s.vtu").point_data
    with Image.open("s.png") as image:
        image.load()


@pytest.mark.parametrize("name", ["a\x1b[31mred", "bell\x07", "nul\x00"])
def test_names_of_arrays_with_control_characters(seamfold: Seamfold, name: str) -> None:
    """They would command the terminal: refused, or shown without doing so."""
    wrong()
    declare(name, "mid")
    ran = seamfold("check", "case.toml")
    assert ran.status == 2
    assert not re.search("[\x00\x07\x1b]", ran.out + ran.err)
