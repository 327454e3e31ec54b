"""Running a demo case in a folder of its own, as a user would."""

from __future__ import annotations

from pathlib import Path

import click

from expander.casefile import read_case
from expander.commandline.tables import Progress, print_summary
from expander.errors import InputError
from expander.expansion import Expansion, plan
from expander.writers.newfiles import NewFiles
from viewer.offscreen import HOW_TO_GET_IT, NO_OPENGL, Trial
from viewer.pictures import draw
from viewer.scene import scene_of

CASE = "case.toml"


def run(source: Path, folder: Path, size: tuple[int, int], trial: Trial) -> list[Path]:
    """Copy a demo to `folder`, expand it there, draw it; returns every file written.

    Parameters
    ----------
    source : folder of the demo.
    trial : whether pictures can be drawn here; asked when the whole body is written.

    Raises
    ------
    InputError
        If a file of the folder is not the demo's and would be overwritten.
    """
    _check_ours(source, folder)
    files = copy_files(source, folder)
    for file in files:
        click.echo(f"copied {file}")
    case = read_case(folder / CASE)
    with Progress() as progress:
        expansion = plan(case, step=progress.step)
        pictures = [t.file.with_suffix(".png") for t in expansion.targets]
        written = [t.file for t in expansion.targets]
        written += ([expansion.index] if expansion.index else []) + pictures
        size_in_bytes = expansion.size()
        progress.start(f"writing {expansion.targets[0].file.name}", size_in_bytes)
        expansion.write(progress.advance)
    print_summary({**expansion.summary(), "written": True, "bytes": size_in_bytes})
    if not trial.succeeds():  # the whole body is there; only its picture is not
        click.echo(f"no picture: {NO_OPENGL}\n  {HOW_TO_GET_IT}", err=True)
        return files + [f for f in written if f not in pictures]
    _draw(expansion, pictures, size)
    return files + written


def _draw(expansion: Expansion, pictures: list[Path], size: tuple[int, int]) -> None:
    for target, file in zip(expansion.targets, pictures, strict=True):
        draw(scene_of(expansion.body, target.result, moment=target.moment), file, size)
        click.echo(f"picture {file}")


def copy_files(source: Path, folder: Path) -> list[Path]:
    """Copy the demo's files, all or none; those that are there already are left alone."""
    try:
        folder.mkdir(parents=True, exist_ok=True)
    except OSError as error:
        raise InputError(
            f"The folder {folder} cannot be made: {error.strerror or error}.",
            "Choose another one with --folder.",
        ) from None
    made = []
    with NewFiles() as new:
        for file in _files(source):
            target = folder / file.name
            if target.exists():
                continue
            data = memoryview(file.read_bytes())
            stream = new.open(target, len(data))
            while len(data):
                data = data[stream.write(data) :]
            made.append(target)
    return made


def _files(source: Path) -> list[Path]:
    """The demo's files, without the program that computed them and the picture of the README."""
    return sorted(f for f in source.iterdir() if f.is_file() and f.suffix not in (".py", ".png"))


def _same(a: Path, b: Path) -> bool:
    return a.is_file() and b.is_file() and a.read_bytes() == b.read_bytes()


def _check_ours(source: Path, folder: Path) -> None:
    """Nothing is overwritten that is not the demo's: its files are there unchanged, or not at all;
    and results are there only beside them."""
    there = [f for f in _files(source) if (folder / f.name).exists()]
    foreign = [folder / f.name for f in there if not _same(f, folder / f.name)]
    if source / CASE not in there:
        output = read_case(source / CASE).output.file or f"{Path(CASE).stem}_full.vtu"
        foreign += sorted(folder.glob(f"{Path(output).stem}*"))
    if foreign:
        raise InputError(
            f"{foreign[0]} is there already and is not the demo's file.",
            "Choose another folder with --folder, or remove the file.",
        )
