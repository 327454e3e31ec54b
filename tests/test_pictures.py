"""Pictures: what is drawn can be read back from the pixels."""

from __future__ import annotations

import json
import subprocess
import sys
from pathlib import Path
from typing import Any

import numpy as np
import pytest
import pyvista
from click.testing import CliRunner
from PIL import Image

from expander.body import WholeBody, prepare
from expander.casefile import validate_case
from expander.errors import InputError
from expander.groups import CyclicAxis, make_group
from expander.placements import unit
from viewer import offscreen
from viewer.colours import MISSING, OUTLINE, for_labels, rising, two_sided
from viewer.commands import picture
from viewer.layout import Sheet, arrange
from viewer.legend import Scale
from viewer.pictures import draw, pixels
from viewer.scene import MOVED, VALUE, Scene, scene_of
from viewer.surfaces import skin_of
from viewer.views import View, automatic, turning_axis

pytestmark = pytest.mark.usefixtures("opengl")

SIZE = (480, 270)
FRONT = [0.0, -1.0, 0.0]
STRESS = {"kind": "symmetric tensor", "components": "xx yy zz xy yz zx", "seam": "recovered"}


def block(cells: tuple[int, int, int] = (4, 2, 2)) -> pyvista.UnstructuredGrid:
    """A block of hexahedra, 2 x 1 x 1, one face in the plane x = 0, with results on it."""
    spacing = tuple(s / n for s, n in zip((2.0, 1.0, 1.0), cells, strict=True))
    image = pyvista.ImageData(dimensions=tuple(n + 1 for n in cells), spacing=spacing)
    grid = image.cast_to_structured_grid().cast_to_unstructured_grid()
    x = np.asarray(grid.points, dtype=float)[:, 0]
    zero = 0.0 * x
    grid.clear_data()
    grid["displacement"] = np.stack([0.001 * x, zero, zero], axis=1)
    grid["stress"] = np.stack([x - 0.5, zero, zero, zero, zero, zero], axis=1)
    grid["temperature"] = 20.0 + x
    grid.cell_data["part"] = np.arange(grid.n_cells) % 2
    grid.cell_data["flow"] = np.full(grid.n_cells, 5.0)
    return grid


@pytest.fixture
def model(tmp_path: Path) -> Path:
    path = tmp_path / "block.vtu"
    block().save(path)
    return path


def whole(model: Path, allow_nan: bool = False, **tables: Any) -> WholeBody:
    """The half block mirrored in x = 0, with everything declared."""
    kind = {"kind": "scalar"}
    raw = {
        "model": {"file": model.name},
        "mirror": [{"normal": "x"}],
        "fields": {"stress": {**STRESS, "unit": "MPa"}, "temperature": kind, "flow": kind},
        **tables,
    }
    return prepare(validate_case(raw, model.parent), allow_nan=allow_nan)


def scene(body: WholeBody, **wanted: Any) -> Scene:
    return scene_of(body, body.results[0], **wanted)


def near(image: np.ndarray, colour: Any, off: int = 12) -> np.ndarray:
    """Pixels of about this colour."""
    return np.asarray(np.abs(image.astype(int) - np.array(colour)).max(axis=2) <= off)


def drawing(image: np.ndarray) -> np.ndarray:
    """The strip with the bodies, without the legend."""
    first, last = Sheet(image.shape[1], image.shape[0]).drawing
    return image[first:last]


def halves(image: np.ndarray) -> tuple[np.ndarray, np.ndarray]:
    """Sector and body of a picture in which they stand side by side.

    They are parted at the middle of the empty columns between them.
    """
    strip = drawing(image)
    used = np.flatnonzero((strip[: strip.shape[0] // 2] < 250).any(axis=(0, 2)))
    gap = int(np.argmax(np.diff(used)))
    middle = (used[gap] + used[gap + 1]) // 2
    return strip[:, :middle], strip[:, middle:]


def test_size_and_contents(model: Path, tmp_path: Path) -> None:
    draw(scene(whole(model)), tmp_path / "a.png", SIZE)
    image = np.asarray(Image.open(tmp_path / "a.png"))
    assert image.shape == (270, 480, 3)
    assert (image[0] == 255).all()
    assert (image[:, -1] == 255).all()
    assert (image < 250).any(axis=2).mean() > 0.05
    assert [p.name for p in tmp_path.iterdir() if p.name.startswith(".")] == []


def test_the_same_scene_gives_the_same_pixels(model: Path) -> None:
    body = whole(model)
    assert np.array_equal(pixels(scene(body), SIZE), pixels(scene(body), SIZE))


def test_von_mises_of_the_stress_comes_first(model: Path) -> None:
    shown = scene(whole(model))
    assert shown.shown is not None
    assert shown.shown.words() == "stress, von Mises [MPa]"
    assert shown.span == pytest.approx((0.0, 1.5))


@pytest.mark.parametrize(
    ("field", "component", "limits", "table"),
    [
        ("stress", "xx", (-1.5, 1.5), two_sided()),
        ("stress", "Von_Mises", (0.0, 1.5), rising()),
        ("stress", "smallest-principal", (-0.5, 0.5), two_sided()),
        ("displacement", None, (0.0, 0.002), rising()),
        ("displacement", "x", (-0.002, 0.002), two_sided()),
        ("temperature", None, (20.0, 22.0), rising()),
        ("part", None, (-0.5, 1.5), for_labels(2)),
        ("flow", None, (5.0, 10.0), rising()),
    ],
)
def test_scale(
    model: Path, field: str, component: str | None, limits: tuple[float, float], table: np.ndarray
) -> None:
    scale = Scale.of(scene(whole(model), field=field, component=component))
    assert scale.limits == pytest.approx(limits)
    assert np.array_equal(scale.table, table)


def test_maps_are_read_in_grey_and_by_everybody() -> None:
    grey = np.array([0.2126, 0.7152, 0.0722])

    def lightness(table: np.ndarray) -> np.ndarray:
        linear = ((table / 255.0 + 0.055) / 1.055) ** 2.4
        return np.asarray(np.cbrt(linear @ grey))

    assert (np.diff(lightness(rising())[::8]) < 0).all()
    low, high = lightness(two_sided()[:128:8]), lightness(two_sided()[128::8])
    assert (np.diff(low) > 0).all()
    assert (np.diff(high) < 0).all()
    # Blue below zero, red above: told apart without green
    assert (two_sided()[:100, 2] > two_sided()[:100, 0]).all()
    assert (two_sided()[156:, 0] > two_sided()[156:, 2]).all()


def test_colours_are_those_of_the_scale(model: Path) -> None:
    body = whole(model, mirror=[{"normal": "x", "load": "antisymmetric"}],
                 fields={"flow": {"kind": "scalar"}, "stress": STRESS,
                         "temperature": {"kind": "scalar", "seam": "recovered"}})  # fmt: skip
    image = pixels(scene(body, field="flow", towards=FRONT, factor=0.0), (800, 450))
    _, right = halves(image)
    # chi = -1: the modelled half has 5, its image -5
    plus, minus = near(right, two_sided()[-1], 4), near(right, two_sided()[0], 4)
    assert plus.mean() > 0.1
    assert minus.mean() > 0.1
    assert np.argwhere(minus)[:, 1].max() < np.argwhere(plus)[:, 1].min()


def test_cell_values_are_flat(model: Path) -> None:
    image = pixels(scene(whole(model), field="part", towards=FRONT, factor=0.0), (800, 450))
    sector, _ = halves(image)
    both = near(sector, for_labels(2)[0]).sum() + near(sector, for_labels(2)[1]).sum()
    between = near(sector, for_labels(2).astype(int).mean(axis=0), 20).sum()
    assert both > 1000
    assert between < 0.02 * both


def outlined(image: np.ndarray) -> int:
    """Pixels of the outline's hue, also of its thin lines."""
    red, green, blue = (image[..., c].astype(int) for c in range(3))
    return int(((red - green > 70) & (blue - green > 30)).sum())


def test_outline_of_the_sector(model: Path) -> None:
    body = whole(model, mirror=[{"normal": "x"}, {"normal": "z"}])
    image = pixels(scene(body, towards=[1, -0.2, 1]), (800, 450))
    assert near(image, OUTLINE).sum() > 100
    sector, right = halves(image)
    assert outlined(sector) > 300
    # From below and behind, other copies hide the sector and most of its lines
    _, behind = halves(pixels(scene(body, towards=[-1, -0.2, -1]), (800, 450)))
    assert 50 < outlined(behind) < 0.7 * outlined(right)


def test_sector_left_out_of_a_partial_body_is_not_outlined(model: Path) -> None:
    shown = scene(whole(model, output={"copies": [1]}), towards=FRONT)
    assert not shown.outlined
    assert shown.copies == (1, 2)
    sector, right = halves(pixels(shown, SIZE))
    assert near(sector, OUTLINE).any()
    assert not near(right, OUTLINE).any()


def test_both_at_one_scale(model: Path) -> None:
    shown = scene(whole(model), towards=FRONT, factor=0.0)
    sector, body = (np.asarray(g.points) for g in (shown.sector, shown.body))
    placed = arrange(sector, body, shown.view, (1600, 600), 1.0)
    (a, top, b, bottom), (c, _, d, _) = placed.sector, placed.body
    assert d - c == pytest.approx(2.0 * (b - a))
    assert bottom - top == pytest.approx(placed.scale)
    assert 0.0 < a < b < c < d < 1600.0


def test_long_bodies_lie_above_each_other() -> None:
    long = np.array([[0.0, 0.0, 0.0], [10.0, 0.0, 0.2]])
    placed = arrange(long / 2, long, View.looking_from(FRONT), (1600, 600), 1.0)
    assert placed.sector[3] < placed.body[1]


def test_largest_displacement_is_a_sixteenth_of_the_body(model: Path) -> None:
    shown = scene(whole(model))
    size = np.linalg.norm([4.0, 1.0, 1.0])
    assert shown.factor in (100.0, 200.0)
    assert 0.04 < shown.factor * 0.002 / size < 0.09
    assert np.abs(shown.body.point_data[MOVED]).max() == pytest.approx(0.002)


def test_missing_values_are_grey(tmp_path: Path) -> None:
    grid = block()
    values = np.array(grid.point_data["temperature"])
    values[np.asarray(grid.points)[:, 0] > 1.2] = np.nan
    grid["temperature"] = values
    grid.save(tmp_path / "holes.vtu")
    body = whole(tmp_path / "holes.vtu", allow_nan=True)
    shown = scene(body, field="temperature", towards=FRONT)
    assert shown.missing
    assert shown.span == pytest.approx((20.0, 21.0))
    assert near(drawing(pixels(shown, SIZE)), MISSING, 8).sum() > 100


def test_all_values_missing(tmp_path: Path) -> None:
    grid = block()
    grid["temperature"] = np.full(grid.n_points, np.nan)
    grid.save(tmp_path / "none.vtu")
    shown = scene(whole(tmp_path / "none.vtu", allow_nan=True), field="temperature")
    assert shown.span is None
    assert near(drawing(pixels(shown, SIZE)), MISSING, 8).any()


def test_a_model_without_fields(tmp_path: Path) -> None:
    grid = block()
    grid.clear_data()
    grid.save(tmp_path / "bare.vtu")
    shown = scene(whole(tmp_path / "bare.vtu", fields={}))
    assert shown.shown is None
    assert (drawing(pixels(shown, SIZE)) < 250).any()


def test_quadratic_faces_follow_their_mid_side_nodes(tmp_path: Path) -> None:
    corners = np.array([[0, 0, 0], [1, 0, 0], [0, 1, 0], [0, 0, 1]], dtype=float)
    edges = [(0, 1), (1, 2), (0, 2), (0, 3), (1, 3), (2, 3)]
    points = np.vstack([corners, [(corners[a] + corners[b]) / 2 for a, b in edges]])
    points[4, 1] = -0.2
    grid = pyvista.UnstructuredGrid(np.r_[10, np.arange(10)], [24], points)
    grid.cell_data["copy"] = [0]
    assert skin_of(grid).faces.bounds[2] == pytest.approx(-0.2)


def test_borders_of_copies(model: Path) -> None:
    skin = skin_of(scene(whole(model)).body)
    ends = np.asarray(skin.faces.points)[skin.borders]
    assert len(skin.borders) == 8  # around the plane x = 0: two cells on each of four sides
    assert np.abs(ends[..., 0]).max() == 0.0
    assert np.array_equal(np.sort(skin.cuts, axis=0), np.sort(skin.borders, axis=0))


def test_views() -> None:
    view = View.looking_from([2.0, -3.0, 1.0])
    axes = np.stack([view.right, view.up, view.towards])
    assert axes @ axes.T == pytest.approx(np.eye(3))
    assert np.linalg.det(axes) == pytest.approx(1.0)
    assert view.up[2] > 0.0
    axis = unit([1, 2, 2])
    group = make_group([], CyclicAxis(12, axis, np.zeros(3)))
    assert turning_axis(group) == pytest.approx(axis)
    points = np.random.default_rng(1).normal(size=(50, 3))
    along = automatic(points, points[:5], group).towards @ axis
    assert np.degrees(np.arccos(abs(along))) == pytest.approx(36.0)
    # Without an axis one looks from the side on which the sector lies
    assert automatic(points, points[points[:, 0] > 0.5], None).towards[0] > 0.0


def test_unknown_fields_and_components_are_listed(model: Path) -> None:
    body = whole(model)
    with pytest.raises(InputError, match="no field 'stres'") as found:
        scene(body, field="stres")
    assert "Did you mean 'stress'?" in str(found.value)
    assert "displacement, temperature" in str(found.value) or "temperature" in str(found.value)
    with pytest.raises(InputError, match="has no component 'w'") as found:
        scene(body, field="displacement", component="w")
    assert "magnitude, x, y, z" in str(found.value)
    with pytest.raises(InputError, match="a single number"):
        scene(body, field="temperature", component="x")


def run(*arguments: str, folder: Path) -> subprocess.CompletedProcess[str]:
    return subprocess.run(
        [sys.executable, "-m", "expander.commandline", *arguments],
        capture_output=True, text=True, cwd=folder, check=False,
    )  # fmt: skip


def test_command_line(model: Path) -> None:
    case = model.with_name("pair.toml")
    case.write_text(
        f"""
[[mirror]]
normal = "x"
[[case]]
name = "even"
file = "{model.name}"
[[case]]
name = "odd one"
file = "{model.name}"
load = "antisymmetric"
[fields.temperature]
kind = "scalar"
seam = "recovered"
[fields.flow]
kind = "scalar"
"""
    )
    options = ("--field", "stress", "--component", "yx", "--size", "480x270", "--view", "1,-1,1")
    done = run("picture", "pair.toml", "-o", "p.png", *options, "--json", folder=model.parent)
    assert (done.returncode, done.stderr) == (0, "")
    facts = json.loads(done.stdout)["pictures"]
    assert [f["file"] for f in facts] == ["p_even.png", "p_odd_one.png"]
    assert facts[1]["component"] == "xy"
    for f in facts:
        assert Image.open(model.parent / f["file"]).size == (480, 270)

    wrong = run("picture", "pair.toml", "--field", "strain", folder=model.parent)
    assert wrong.returncode == 2
    assert "There is no field 'strain'" in wrong.stderr
    assert "stress" in wrong.stderr
    assert not (model.parent / "pair_even.png").exists()


@pytest.mark.parametrize(
    ("arguments", "message"),
    [
        (["--size", "9x9"], "--size"),
        (["--size", "wide"], "--size"),
        (["--view", "0,0,0"], "--view"),
        (["--factor", "nan"], "--factor"),
        (["--output", "nowhere/p.png"], "no folder"),
        (["--output", "p.jpg"], "PNG"),
        (["--result", "x"], "no result 'x'"),
        (["--field", "stress", "--field", "temperature"], "2 fields"),
    ],
)
def test_refused_options(model: Path, arguments: list[str], message: str) -> None:
    given = [str(model), "--mirror", "x", "--skip-undeclared", *arguments]
    result = CliRunner().invoke(picture, given)
    assert isinstance(result.exception, InputError)
    assert message in str(result.exception)


def test_machine_without_opengl(model: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr(offscreen, "_TRIAL", "import os; os.abort()")
    target = model.with_name("p.png")
    given = [str(model), "--mirror", "x", "--skip-undeclared", "-o", str(target)]
    result = CliRunner().invoke(picture, given)
    assert isinstance(result.exception, InputError)
    assert "no OpenGL" in str(result.exception)
    assert not target.exists()


def test_nothing_heavy_is_imported_for_the_help() -> None:
    code = (
        "import sys, viewer.commands; "
        "print([m for m in ('numpy', 'vtkmodules', 'pyvista', 'PIL') if m in sys.modules])"
    )
    done = subprocess.run([sys.executable, "-c", code], capture_output=True, text=True, check=True)
    assert done.stdout.strip() == "[]"


def test_scene_arrays(model: Path) -> None:
    shown = scene(whole(model), field="part")
    assert VALUE in shown.body.cell_data
    assert shown.sector.n_cells * 2 == shown.body.n_cells
