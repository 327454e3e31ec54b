"""`seamfold check`: do the seams close, and does the whole body hang together?"""

from __future__ import annotations

import json
import sys
from dataclasses import dataclass
from importlib import resources
from pathlib import Path
from typing import TYPE_CHECKING, Any

import click

from expander.commandline.options import case_from, case_options
from expander.errors import InputError

if TYPE_CHECKING:
    from expander.checking.continuity import Continuity
    from expander.checking.report import CheckUp
    from expander.checking.seamlist import Seam
    from expander.checking.verdicts import Verdict


def _print_schema(context: click.Context, _: click.Parameter, wanted: bool) -> None:
    if wanted and not context.resilient_parsing:
        file = resources.files("expander.checking").joinpath("report_schema.json")
        click.echo(file.read_text(encoding="utf-8"), nl=False)
        context.exit()


@click.command()
@case_options
@click.option("--json", "as_json", is_flag=True, help="Print the report as JSON.")
@click.option("--json-schema", is_flag=True, is_eager=True, expose_value=False,
              callback=_print_schema, help="Print the JSON Schema of the report.")  # fmt: skip
@click.option("--strict", is_flag=True, help="Doubts fail the check too (exit status 1).")
@click.option("--seams-only", is_flag=True, help="Leave out the audit of the whole body.")
@click.option("--section", multiple=True, metavar="PLANE",
              help='Force and moment across a plane through the whole body: NORMAL [at X,Y,Z] '
                   "[called NAME]. Repeat for more.")  # fmt: skip
@click.option("--seam-mesh", type=click.Path(path_type=Path), metavar="VTU",
              help="Write the seams with their jumps.")  # fmt: skip
@click.option("--csv", "csv_file", type=click.Path(path_type=Path), metavar="CSV",
              help="Write both sides along a seam.")  # fmt: skip
@click.option("--plot", type=click.Path(path_type=Path), metavar="PNG",
              help="Draw both sides along a seam.")  # fmt: skip
@click.option("--seam", metavar="NAME", help="For --csv and --plot [default: the worst one].")
@click.option("--show", metavar="FIELD", help="For --plot: the field [default: the worst one].")
@click.option("--in-case", metavar="CASE", help="For --plot: the load case [default: the worst].")
@click.option("--component", metavar="NAME", help="For --plot, such as x or xy [default: length].")
@click.option("--along", type=click.Choice(["auto", "arc", "radius", "x", "y", "z"]),
              default="auto", show_default=True, help="For --csv and --plot.")  # fmt: skip
def check(
    skip_undeclared: bool,
    allow_nan: bool,
    as_json: bool,
    strict: bool,
    seams_only: bool,
    section: tuple[str, ...],
    seam_mesh: Path | None,
    csv_file: Path | None,
    plot: Path | None,
    seam: str | None,
    show: str | None,
    in_case: str | None,
    component: str | None,
    along: str,
    **description: Any,
) -> None:
    """Check that the copies close along their seams, and audit the whole body.

    CASE is a case file (.toml), or a model file with options in its place. Exit status 0: nothing
    contradicts the case; 1: a check failed; 2: bad input.

    \b
    Examples:
      seamfold check bracket.toml
      seamfold check ring.toml --json > ring_check.json
      seamfold check half.vtu --mirror x --section "x at 0.1,0,0"
      seamfold check bracket.toml --plot seam.png --show stress --component xx --along z
    """
    from expander.checking.report import report
    from expander.checkup import check as run
    from expander.commandline.checktables import print_check
    from expander.commandline.tables import Progress
    from expander.expansion import program_version

    of_plot = {"--show": show, "--in-case": in_case, "--component": component}
    of_both = {"--seam": seam, "--along": None if along == "auto" else along}
    idle = [o for o, v in of_plot.items() if v is not None and plot is None]
    idle += [o for o, v in of_both.items() if v is not None and plot is None and csv_file is None]
    if idle:
        where = "--plot or --csv" if idle[0] in of_both else "--plot"
        raise InputError(
            f"{idle[0]} belongs to {where}, which was not given.",
            "Add --plot seam.png, or leave it out.",
        )
    case = case_from(sections=section, **description)
    with Progress() as progress:
        found = run(case, skip_undeclared, allow_nan, seams_only, progress.step)
        chosen = _Chosen(seam, show, in_case, component, along)
        written = _hand_over(found, chosen, seam_mesh, csv_file, plot)
    facts = report(found, program_version())
    facts["written"] = [str(p) for p in written]
    if as_json:
        click.echo(json.dumps(facts, indent=1))
    else:
        print_check(facts)
        for path in written:
            click.echo(f"wrote {path}")
    if found.verdict == "failed" or (strict and found.verdict == "doubtful"):
        sys.exit(1)


@dataclass(frozen=True)
class _Chosen:
    """What is written and drawn along a seam; None where the worst one is meant."""

    seam: str | None
    field: str | None
    case: str | None
    component: str | None
    along: str


def _hand_over(
    found: CheckUp, chosen: _Chosen, seam_mesh: Path | None, csv: Path | None, plot: Path | None
) -> list[Path]:
    """Write the files that were asked for, all or none."""
    from expander.expansion import program_version
    from expander.writers.newfiles import NewFiles

    paths = {"--seam-mesh": seam_mesh, "--csv": csv, "--plot": plot}
    for (option, path), suffix in zip(paths.items(), (".vtu", ".csv", ".png"), strict=True):
        if path is not None and path.suffix.lower() != suffix:
            raise InputError(f"{option} {path}: a {suffix} file is written.",
                             f"Expected {path.stem}{suffix}.")  # fmt: skip
    _check_inputs(found, [p for p in paths.values() if p is not None])
    if csv is None and plot is None and seam_mesh is None:
        return []
    continuity = found.continuity
    with NewFiles() as files:
        if seam_mesh is not None:
            from expander.writers.seam_mesh import write_seam_mesh

            write_seam_mesh(files, seam_mesh, continuity, program=f"seamfold {program_version()}")
        if csv is not None:
            from expander.writers.seam_tables import write_csv

            write_csv(files, csv, continuity, _seam(continuity, chosen), by=chosen.along)
        if plot is not None:
            from expander.writers.seam_plot import plot as drawn
            from expander.writers.seam_tables import write_all

            seam = _seam(continuity, chosen)
            field, case = _field_and_case(continuity, seam, chosen)
            data = drawn(continuity, seam, field, case, chosen.component, chosen.along)
            write_all(files, plot, data)
    return [p for p in paths.values() if p is not None]


def _check_inputs(found: CheckUp, paths: list[Path]) -> None:
    from expander.expansion import input_files

    inputs = {f.resolve() for f in input_files(found.continuity.sector.case)}
    for path in paths:
        if path.resolve() in inputs:
            raise InputError(f"{path} is read by this case and would be overwritten.",
                             "Choose another file.")  # fmt: skip


def _seam(continuity: Continuity, chosen: _Chosen) -> Seam:
    seams = [s for s in continuity.seams if s.touches]
    names = [s.name for s in seams]
    if not seams:
        raise InputError(
            "There is no seam: the copies do not touch.", "Leave out --csv and --plot."
        )
    if chosen.seam is None:
        worst = _worst(continuity, None, chosen)
        return seams[0] if worst is None else seams[names.index(worst.seam)]
    given = [s.name for s in seams if chosen.seam in (s.name, s.plane)]
    if not given:
        raise InputError(f"There is no seam {chosen.seam!r}.", f"Seams: {', '.join(names)}.")
    return seams[names.index(given[0])]


def _worst(continuity: Continuity, seam: str | None, chosen: _Chosen) -> Verdict | None:
    """The verdict to show: the gravest, then the largest jump, among nodal values."""
    from expander.checking.verdicts import gravity

    nodal = {f.name for f in continuity.sector.fields if f.on == "points"}
    fitting = [
        v for v in continuity.verdicts
        if v.measure != "kink" and v.field in nodal and seam in (None, v.seam)
        and chosen.field in (None, v.field) and chosen.case in (None, v.case)
    ]  # fmt: skip
    return max(fitting, key=lambda v: (gravity(v.result), v.relative), default=None)


def _field_and_case(continuity: Continuity, seam: Seam, chosen: _Chosen) -> tuple[str, str]:
    from expander.checking.along import case_named

    if chosen.case is not None:
        case_named(continuity, chosen.case)
    worst = _worst(continuity, seam.name, chosen)
    field = chosen.field or (worst.field if worst is not None else None)
    case = chosen.case or (worst.case if worst is not None else continuity.cases[0].case.name)
    if field is None:
        raise InputError("There is no field on points to draw.", "Leave out --plot.")
    return field, case
