"""Demo cases through the command that users run."""

from __future__ import annotations

from pathlib import Path

import numpy as np
import pytest
import pyvista
from click.testing import CliRunner, Result
from PIL import Image
from vtkmodules.vtkIOXML import vtkXMLUnstructuredGridReader

from demo_cases import available, summary
from expander.casefile import read_case
from expander.errors import InputError
from expander.expansion import plan
from viewer.commands import demo

pytestmark = pytest.mark.usefixtures("opengl")


def run(*arguments: str | Path) -> Result:
    return CliRunner().invoke(demo, [*map(str, arguments), "--size", "480x270"])


def read(path: Path) -> pyvista.UnstructuredGrid:
    reader = vtkXMLUnstructuredGridReader()
    reader.SetFileName(str(path))
    reader.Update()
    assert reader.GetErrorCode() == 0
    return pyvista.wrap(reader.GetOutput())


@pytest.mark.parametrize("name", available())
def test_every_demo_runs(name: str, tmp_path: Path) -> None:
    folder = tmp_path / name
    result = run(name, "--folder", folder)
    assert result.exception is None, result.output
    case = read_case(folder / "case.toml")
    expansion = plan(case)
    sector, copies = expansion.body.mesh.cell_count, len(expansion.body.copies)
    dropped = expansion.summary()["cells"]["merged"]
    assert expansion.targets
    for target in expansion.targets:
        grid = read(target.file)
        assert grid.n_cells == copies * sector - dropped
        assert (np.unique(grid.cell_data["copy"]) == np.arange(copies)).all()
        image = target.file.with_suffix(".png")
        assert Image.open(image).size == (480, 270)
        assert image.name in result.output.replace("\n", "")
    for file in ("case.toml", "README.md"):
        assert str(folder / file) in result.output.replace("\n", "")
    assert not list(folder.glob("*.py"))
    assert not [p.name for p in folder.iterdir() if p.name.startswith(".")]


def test_without_a_name_the_demos_are_listed() -> None:
    result = CliRunner().invoke(demo, [])
    assert result.exit_code == 0
    for name in available():
        assert f"{name} " in result.output
        assert summary(name) in result.output
    assert "seamfold demo NAME" in result.output


def test_unknown_demo() -> None:
    result = run("none of these")
    assert isinstance(result.exception, InputError)
    assert next(iter(available())) in str(result.exception)


def test_again_in_the_same_folder(tmp_path: Path) -> None:
    name = next(iter(available()))
    for _ in range(2):
        assert run(name, "--folder", tmp_path).exception is None
    # What the user has changed stays as it is
    case = tmp_path / "case.toml"
    case.write_text(case.read_text() + "\n# mine\n")
    result = run(name, "--folder", tmp_path)
    assert isinstance(result.exception, InputError)
    assert "case.toml" in str(result.exception)
    assert case.read_text().endswith("# mine\n")


def test_files_of_others_are_not_overwritten(tmp_path: Path) -> None:
    name = next(iter(available()))
    output = read_case(available()[name] / "case.toml").output.file
    assert output is not None
    mine = (tmp_path / output).with_suffix(".png")
    mine.write_bytes(b"mine")
    for _ in range(2):
        result = run(name, "--folder", tmp_path)
        assert isinstance(result.exception, InputError)
        assert [p.name for p in tmp_path.iterdir()] == [mine.name]
        assert mine.read_bytes() == b"mine"


def test_folder_that_cannot_be_made(tmp_path: Path) -> None:
    (tmp_path / "file").write_text("")
    result = run(next(iter(available())), "--folder", tmp_path / "file" / "demo")
    assert isinstance(result.exception, InputError)
    assert "cannot be made" in str(result.exception)


def test_without_opengl_the_body_is_written_all_the_same(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    monkeypatch.setattr("viewer.offscreen.Trial.succeeds", lambda self: False)
    result = run("baffle", "--folder", tmp_path)
    assert result.exit_code == 0
    assert "libegl1" in result.output
    assert read(tmp_path / "baffle_whole.vtu").n_cells == 4 * 294
    assert not list(tmp_path.glob("*.png"))
