"""`seamfold split`: a load on the whole body as load cases on the sector."""

from __future__ import annotations

import json
from pathlib import Path
from typing import TYPE_CHECKING, Any

import click

from expander.commandline.options import case_from, case_options
from expander.errors import InputError

if TYPE_CHECKING:
    from expander.casefile import CaseFile
    from expander.splitting import Split
    from expander.waves.patterns import PatternSplit

_FILE = click.Path(path_type=Path)


@click.command()
@case_options
@click.option("--loads", type=_FILE, metavar="FILE",
              help="Nodal loads on the whole body: .csv with x,y,z and fx,fy,fz (mx,my,mz) or q; "
                   ".npz with points and arrays; a model file with arrays.")  # fmt: skip
@click.option("--array", multiple=True, metavar="LOAD=NAME",
              help="Array of force, moment or heat_flow in a .npz or model file "
                   "[default: that name].")  # fmt: skip
@click.option("--sector-loads", type=_FILE, metavar="CSV",
              help="A column for each sector: how many times it carries the model's load; a row "
                   "for each pattern.")  # fmt: skip
@click.option("--order", type=int, metavar="E",
              help="What a rotating excitation of order E meets on the sectors.")  # fmt: skip
@click.option("--least", type=float, metavar="PART",
              help="Leave out parts with less than this part of the load's norm "
                   "[default: 1e-12].")  # fmt: skip
@click.option("--output", "-o", type=_FILE, metavar="FOLDER",
              help="Folder to write to [default: that of the case].")  # fmt: skip
@click.option("--dry-run", is_flag=True, help="Print the table, write nothing.")
@click.option("--json", "as_json", is_flag=True, help="Print the table as JSON.")
def split(
    loads: Path | None,
    array: tuple[str, ...],
    sector_loads: Path | None,
    order: int | None,
    least: float | None,
    output: Path | None,
    dry_run: bool,
    as_json: bool,
    skip_undeclared: bool,
    allow_nan: bool,
    **description: Any,
) -> None:
    """Split a load on the whole body into cases to run on the sector.

    CASE is a case file (.toml), or a model file with options in its place; only its model, planes
    and axis are read. A table of nodal loads is written for each case, and split.toml with the
    [[case]] and [[sum]] tables that put the results together.

    \b
    Examples:
      seamfold split bracket.toml --loads wind.csv
      seamfold split ring.toml --sector-loads factors.csv --output cases
      seamfold split ring.toml --order 7
    """
    from expander.splitting import LEAST, split_loads

    given = [loads is not None, sector_loads is not None, order is not None]
    if sum(given) != 1:
        raise InputError(
            f"split was given {'more than one' if sum(given) else 'none'} of --loads, "
            "--sector-loads and --order.",
            "Give one of them.",
        )
    case = case_from(**description)
    if order is not None:
        facts = _order_facts(case, order)
        if as_json:
            click.echo(json.dumps(facts, indent=1))
        else:
            _print_order(facts)
        return
    least = LEAST if least is None else least
    if not 0.0 <= least < 1.0:
        raise InputError(f"--least {least:g} is no part of the load.", "Expected 0 to 1.")
    found: Split | PatternSplit
    if loads is not None:
        from expander.commandline.tables import Progress

        with Progress() as progress:
            found = split_loads(case, loads, _arrays(array), least, progress.step)
    else:
        from expander.waves.patterns import read_patterns, split_patterns

        assert sector_loads is not None
        found = split_patterns(case, sector_loads, read_patterns(sector_loads), least)
    from expander.waves.splitfiles import targets, write

    folder = case.folder if output is None else output
    files = targets(case, found, folder) if dry_run else write(case, found, folder)
    facts = _facts(found, files, not dry_run)
    if as_json:
        click.echo(json.dumps(facts, indent=1))
    else:
        _print_parts(facts)


def _arrays(given: tuple[str, ...]) -> dict[str, str]:
    from expander.waves.wholeloads import LOADS

    known = {name.replace(" ", "_"): name for name in LOADS}
    found = {}
    for entry in given:
        load, _, name = entry.partition("=")
        if load not in known or not name:
            raise InputError(f"--array {entry!r} is not understood.",
                             f"Expected LOAD=NAME, LOAD one of {', '.join(known)}.")  # fmt: skip
        found[known[load]] = name
    return found


def _order_facts(case: CaseFile, order: int) -> dict[str, Any]:
    from expander.waves.orders import meets, orders_exciting

    if case.cyclic is None:
        raise InputError("--order: the case has no [cyclic] table.", "Add one with sectors = N.")
    N = case.cyclic.sectors
    met = meets(order, N)
    others = orders_exciting(met.nodal_diameters, N, max(order, 2 * N))
    return {
        "order": order,
        "sectors": N,
        "nodal_diameters": met.nodal_diameters,
        "direction": met.direction,
        "multiple": met.multiple,
        "phase": met.phase,
        "orders_of_these_nodal_diameters": [
            {"order": m.order, "direction": m.direction} for m in others
        ],
    }


_DIRECTIONS = {
    "with": "a wave that runs with the excitation",
    "against": "a wave that runs against the excitation",
    "in step": "all sectors in step, no direction",
    "alternating": "the sign changes from sector to sector, no direction",
}


def _print_order(facts: dict[str, Any]) -> None:
    e, N, h = facts["order"], facts["sectors"], facts["nodal_diameters"]
    sign = "-" if facts["direction"] == "against" else "+"
    click.echo(
        f"order {e} on {N} sectors meets h = {h}: {_DIRECTIONS[facts['direction']]} "
        f"({e} = {facts['multiple']} x {N} {sign} {h})"
    )
    if facts["phase"] is not None:
        click.echo(
            "  for an excitation that runs toward higher sector numbers, written Re(f exp(+i omega "
            f't)): phase = "{facts["phase"]}"'
        )
    listed = [
        f"{m['order']}" + (f" ({m['direction']})" if facts["phase"] is not None else "")
        for m in facts["orders_of_these_nodal_diameters"]
    ]
    click.echo(f"  orders that meet h = {h}: {', '.join(listed)}, ..")


def _facts(found: Split | PatternSplit, files: list[Path], written: bool) -> dict[str, Any]:
    """The split as plain data."""
    import numpy as np

    from expander.splitting import Split

    def numbers(values: Any) -> Any:
        if np.iscomplexobj(values):
            return {"real": values.real.tolist(), "imag": values.imag.tolist()}
        return values.tolist()

    facts: dict[str, Any] = {"copies": len(found.group), "loads": str(found.source), "cases": []}
    for part in found.parts:
        b = part.character.behaviour
        entry: dict[str, Any] = {
            "name": part.name,
            "behaviour": b.words(),
            "load": dict(b.load),
            "nodal_diameters": b.nodal_diameters,
            "weight": part.character.weight,
            "share": dict(part.share),
        }
        if isinstance(found, Split):
            entry["resultant_on_model"] = {k: numbers(v) for k, v in found.resultant(part).items()}
            entry["resultant_on_whole_body"] = {k: v.tolist() for k, v in found.total(part).items()}
        facts["cases"].append(entry)
    facts["left_out"] = [{"name": p.name, "norm": p.norm} for p in found.left_out]
    facts["sums"] = []
    if isinstance(found, Split):
        facts["points"] = found.points
        facts["largest"] = {n: float(abs(t.data).max()) for n, t in found.turned.items()}
        facts["notes"] = list(found.notes)
    else:
        facts["notes"] = []
        facts["sums"] = [
            {"name": p.name, "terms": {n: [f.real, f.imag] for n, f in p.factors.items()}}
            for p in found.patterns
        ]
    facts["files"] = [str(f) for f in files]
    facts["written"] = written
    return facts


def _print_parts(facts: dict[str, Any]) -> None:
    from rich import box
    from rich.console import Console
    from rich.markup import escape
    from rich.table import Table

    from expander.commandline.tables import FILE_WIDTH

    console = Console(highlight=False)
    if not console.is_terminal:
        console.width = FILE_WIDTH
    table = Table(box=box.SIMPLE_HEAD, pad_edge=False)
    loads = list(facts["cases"][0]["share"]) if facts["cases"] else []
    nodal = "points" in facts
    for heading in ["case", "load behaviour"]:
        table.add_column(heading, overflow="fold")
    for load in loads:
        if nodal:
            table.add_column(f"{load} on the model", overflow="fold")
            table.add_column("on the whole body", overflow="fold")
        table.add_column(escape(f"share of {load}"), justify="right", overflow="fold")
    sums = ("resultant_on_model", "resultant_on_whole_body") if nodal else ()
    for case in facts["cases"]:
        row = [case["name"], case["behaviour"]]
        for load in loads:
            row += [_vector(case[s][load], 1e-12 * facts["largest"][load]) for s in sums]
            row.append(f"{case['share'][load]:.4%}")
        table.add_row(*(escape(cell) for cell in row))
    console.print(table)
    for result in facts["sums"]:
        terms = " + ".join(f"{_factor(*f)} {n}" for n, f in result["terms"].items())
        console.print(escape(f"{result['name']} = {terms}"), soft_wrap=True)
    if facts["left_out"]:
        names = ", ".join(p["name"] for p in facts["left_out"])
        worst = max(p["norm"] for p in facts["left_out"])
        line = f"left out, no load in them (at most {worst:.2g} of its norm): {names}"
        console.print(escape(line), soft_wrap=True)
    for note in facts["notes"]:
        console.print(escape(f"note: {note}"), soft_wrap=True)
    mark = "wrote" if facts["written"] else "would write"
    for file in facts["files"]:
        console.print(escape(f"{mark} {file}"), soft_wrap=True)


def _vector(values: Any, round_off: float) -> str:
    """Components to read; those below round-off are shown as 0."""
    if isinstance(values, dict):
        return " + i ".join(_vector(values[part], round_off) for part in ("real", "imag"))
    shown = ", ".join(f"{v:.4g}" if abs(v) > round_off else "0" for v in values)
    return f"({shown})" if len(values) > 1 else shown


def _factor(real: float, imag: float) -> str:
    return f"{real:.6g}" if imag == 0.0 else f"({real:.6g} {imag:+.6g} i)"
