"""`seamfold expand`: the whole body as an open VTK file."""

from __future__ import annotations

import json
from pathlib import Path
from typing import Any

import click

from expander.commandline.options import case_from, case_options


@click.command()
@case_options
@click.option("--output", "-o", type=click.Path(path_type=Path), help="File to write (.vtu, .pvd).")
@click.option("--dry-run", is_flag=True, help="Check everything, print the table, write nothing.")
@click.option("--json", "as_json", is_flag=True, help="Print the summary as JSON.")
def expand(
    skip_undeclared: bool, allow_nan: bool, dry_run: bool, as_json: bool, **description: Any
) -> None:
    """Write the results of the whole body.

    CASE is a case file (.toml), or a model file with options in its place.

    \b
    Examples:
      seamfold expand ring.toml
      seamfold expand half.vtu --mirror "x at 0,0,0 antisymmetric" -o whole.vtu
      seamfold expand sector.vtu --sectors 12 --axis z --field "spin=axial vector"
    """
    from expander.commandline.tables import Progress, print_summary
    from expander.expansion import plan

    case = case_from(**description)
    with Progress() as progress:
        expansion = plan(case, skip_undeclared, allow_nan, progress.step)
        size = expansion.size()
        if not dry_run:
            progress.start(f"writing {expansion.targets[0].file.name}", size)
            expansion.write(progress.advance)
    found = expansion.summary()
    found["written"] = not dry_run
    found["bytes"] = size
    if as_json:
        click.echo(json.dumps(found, indent=1))
    else:
        print_summary(found)
