"""The commands `seamfold picture` and `seamfold demo`.

Nothing heavy is imported until a command runs: the help must answer at once.
"""

from __future__ import annotations

import json
import math
import re
from pathlib import Path
from typing import TYPE_CHECKING, Any

import click

from expander.commandline.options import case_from, case_options
from expander.errors import InputError

if TYPE_CHECKING:
    from expander.body import WholeBody
    from expander.casefile import CaseFile
    from viewer.scene import Scene

_LEAST, _MOST = (480, 270), (8000, 8000)

size_option = click.option(
    "--size", default="1600x900", show_default=True, metavar="WIDTHxHEIGHT", help="In pixels."
)


@click.command()
@case_options
@click.option("--output", "-o", type=click.Path(path_type=Path), metavar="PNG",
              help="File to write; with several results NAME_RESULT.png for each.")  # fmt: skip
@click.option("--component", metavar="NAME",
              help='Such as x, xy, "magnitude", "von Mises" or "largest principal".')  # fmt: skip
@click.option("--result", metavar="NAME", help="A case or sum; all results without it.")
@click.option("--factor", type=float, metavar="F",
              help="Deformation so many times as large; 0 for none.")  # fmt: skip
@click.option("--view", metavar="X,Y,Z", help="Direction from which one looks at the body.")
@size_option
@click.option("--json", "as_json", is_flag=True, help="Print what was drawn as JSON.")
def picture(
    case: Path,
    field: tuple[str, ...],
    output: Path | None,
    component: str | None,
    result: str | None,
    factor: float | None,
    view: str | None,
    size: str,
    as_json: bool,
    skip_undeclared: bool,
    allow_nan: bool,
    **description: Any,
) -> None:
    """Draw the modelled sector and the whole body next to each other.

    CASE is a case file (.toml), or a model file with options in its place. --field NAME chooses
    what gives the colours; without it von Mises stress, or else the displacement.

    \b
    Examples:
      seamfold picture bracket.toml
      seamfold picture ring.toml --field stress --component xx --output ring_xx.png
      seamfold picture half.vtu --mirror x --view 1,-1,0.5 --factor 100
    """
    from viewer.offscreen import Trial

    pixels = size_from(size)
    towards = None if view is None else _direction(view)
    if factor is not None and not math.isfinite(factor):
        raise InputError(f"--factor {factor} is not a number.", "Expected for example 100.")
    shown, declared = _split_fields(case, field)
    path = _picture_file(output, case)
    with Trial() as trial:
        described = case_from(case, field=declared, **description)
        if result is not None:
            described = _with_result(described, result)
        from expander.body import prepare
        from expander.commandline.tables import Progress
        from viewer.pictures import draw
        from viewer.scene import scene_of

        with Progress() as progress:
            body = prepare(described, skip_undeclared, allow_nan, progress.step)
            files = _files(path, [r.name for r in body.results])
            # All scenes first: what is wrong with one is said before any is drawn
            scenes = [scene_of(body, r, shown, component, factor, towards) for r in body.results]
            trial.require()
            for file, scene in zip(files, scenes, strict=True):
                progress.step(f"drawing {file.name}")
                draw(scene, file, pixels)
    if as_json:
        facts = [_facts(f, s, pixels) for f, s in zip(files, scenes, strict=True)]
        click.echo(json.dumps({"pictures": facts, "notes": _notes(body)}, indent=1))
        return
    for file, scene in zip(files, scenes, strict=True):
        click.echo(f"picture {file}  ({drawn_words(scene)})")


# The shared option declares what an array is; here its plain form chooses one to show.
for _parameter in picture.params:
    if _parameter.name == "field" and isinstance(_parameter, click.Option):
        _parameter.metavar = "NAME or NAME=KIND"
        _parameter.help = (
            "NAME: the field that gives the colours. NAME=KIND: what an array of a model file is, "
            'for example "spin=axial vector"; repeat for more.'
        )


@click.command()
@click.argument("name", required=False)
@click.option("--folder", type=click.Path(path_type=Path), metavar="DIR",
              help="New folder for the demo [default: seamfold_demo/NAME].")  # fmt: skip
@size_option
def demo(name: str | None, folder: Path | None, size: str) -> None:
    """List the demo cases, or run one in a folder of its own.

    Without NAME the demo cases are listed; the NAME all runs every one of them.

    \b
    Examples:
      seamfold demo
      seamfold demo rotor
      seamfold demo all --folder /tmp/demos
    """
    from demo_cases import available, summary

    cases = available()
    if name is None:
        wide = max((len(n) for n in cases), default=0)
        for known in cases:
            click.echo(f"{known:{wide}}  {summary(known)}")
        click.echo("\nRun one with: seamfold demo NAME, or all with: seamfold demo all")
        return
    if name != "all" and name not in cases:
        raise InputError(f"There is no demo {name!r}.", f"Demos: {', '.join(cases)}, all.")
    pixels = size_from(size)
    from viewer.demo import run
    from viewer.offscreen import Trial

    chosen = list(cases) if name == "all" else [name]
    with Trial() as trial:
        for k, each in enumerate(chosen):
            where = Path("seamfold_demo", each) if folder is None else folder
            if folder is not None and name == "all":
                where = folder / each
            click.echo(("\n" if k else "") + f"{each}: {summary(each)}")
            run(cases[each], where, pixels, trial)


def size_from(text: str) -> tuple[int, int]:
    """Width and height in pixels.

    >>> size_from("1600x900")
    (1600, 900)
    """
    found = re.fullmatch(r"(\d{1,6})[xX](\d{1,6})", text.strip())
    size = (int(found[1]), int(found[2])) if found else (0, 0)
    if not all(low <= s <= high for low, s, high in zip(_LEAST, size, _MOST, strict=True)):
        raise InputError(
            f"--size {text!r} is not a size of a picture.",
            f"Expected WIDTHxHEIGHT, from {_LEAST[0]}x{_LEAST[1]} to {_MOST[0]}x{_MOST[1]} pixels, "
            "for example 1600x900.",
        )
    return size


def _direction(text: str) -> list[float]:
    try:
        numbers = [float(part) for part in text.split(",")]
    except ValueError:
        numbers = []
    if len(numbers) != 3 or not any(numbers) or not all(math.isfinite(n) for n in numbers):
        raise InputError(
            f"--view {text!r} is not a direction.",
            "Expected three numbers that are not all zero, for example 1,-1,0.5.",
        )
    return numbers


def _split_fields(case: Path, given: tuple[str, ...]) -> tuple[str | None, tuple[str, ...]]:
    """The field to show, and the declarations of a case that is given as options."""
    is_case_file = case.suffix.lower() == ".toml"
    names = [g for g in given if is_case_file or "=" not in g]
    if len(names) > 1:
        raise InputError(
            f"--field names {len(names)} fields to show: {', '.join(names)}.",
            "A picture shows one field; draw one picture for each.",
        )
    declared = tuple(g for g in given if g not in names)
    return (names[0] if names else None), declared


def _picture_file(output: Path | None, case: Path) -> Path:
    path = output if output is not None else Path(f"{case.stem}.png")
    if path.suffix.lower() != ".png":
        raise InputError(
            f"--output {path}: pictures are written as PNG.", f"Expected {path.stem}.png."
        )
    if not path.parent.is_dir():
        raise InputError(
            f"--output {path}: there is no folder {path.parent}.",
            "Create it, or choose another file.",
        )
    return path


def _files(path: Path, results: list[str]) -> list[Path]:
    """The file of each result: the one named, or one for each result."""
    if len(results) == 1:
        return [path]
    found: list[str] = []
    for result in results:
        slug = re.sub(r"[^A-Za-z0-9.-]+", "_", result).strip("_") or "result"
        found.append(slug if slug not in found else f"{slug}_{len(found)}")
    return [path.with_name(f"{path.stem}_{slug}{path.suffix}") for slug in found]


def _with_result(case: CaseFile, result: str) -> CaseFile:
    """The case with this one as its only result."""
    names = [c.name for c in case.case] + [s.name for s in case.sum]
    if not names:
        raise InputError(
            f"There is no result {result!r}: the case has a single one without a name.",
            "Leave out --result.",
        )
    if result not in names:
        raise InputError(f"There is no result {result!r}.", f"Results: {', '.join(names)}.")
    chosen = case.output.model_copy(update={"results": [result]})
    return case.model_copy(update={"output": chosen})


def drawn_words(scene: Scene) -> str:
    """What a picture shows, in one line."""
    from viewer.colours import number

    words = [scene.title + (f": {scene.shown.words()}" if scene.shown else "")]
    if scene.shown and scene.span:
        words.append(f"{number(scene.span[0])} to {number(scene.span[1])}")
    if scene.factor:
        words.append(f"deformation × {number(scene.factor)}")
    return ", ".join(words)


def _facts(file: Path, scene: Scene, size: tuple[int, int]) -> dict[str, Any]:
    shown = scene.shown
    return {
        "file": str(file),
        "size": list(size),
        "result": scene.title,
        "load": scene.words,
        "field": shown.field.name if shown else None,
        "component": shown.measure.name or None if shown else None,
        "unit": shown.field.unit or None if shown else None,
        "smallest": scene.span[0] if scene.span else None,
        "largest": scene.span[1] if scene.span else None,
        "missing_values": scene.missing,
        "deformation_factor": scene.factor,
        "largest_displacement": scene.largest[0] if scene.largest else None,
        "view": scene.view.towards.tolist(),
    }


def _notes(body: WholeBody) -> list[str]:
    return list(body.notes)
