"""The tables of a check on the terminal."""

from __future__ import annotations

from typing import Any

from rich import box
from rich.console import Console
from rich.markup import escape
from rich.table import Table

from expander.commandline.tables import FILE_WIDTH

ROUND_OFF = 1e-9  # beside the numbers that it is the rest of
_MARKS = {"fails": "FAILS", "doubts": "doubt", "note": "note"}
_MEASURES = {"value": "values", "traction": "traction", "flux": "normal part", "kink": "slope"}


def print_check(found: dict[str, Any]) -> None:
    """The whole report, the verdict last."""
    console = Console(highlight=False, emoji=False)
    if not console.is_terminal:
        console.width = FILE_WIDTH
    facts = Table.grid(padding=(0, 2))
    facts.add_column(style="bold")
    facts.add_column()
    facts.add_row("model", escape(f"{found['nodes']:,} nodes, {found['cells']:,} cells, "
                                  f"{found['copies']} copies"))  # fmt: skip
    for case in found["cases"]:
        phase = f", phase {case['phase']}" if case["phase"] else ""
        facts.add_row("case", escape(f"{case['name']}: {case['behaviour']}{phase}"))
    console.print(facts)
    console.print(_seams(found))
    if found["loads"]:
        console.print("load, declared against found")
        console.print(_loads(found))
    if found["fields"]:
        console.print("both sides of each seam")
        console.print(_jumps(found))
    if found["audit"] is not None:
        _print_audit(console, found["audit"])
    for f in sorted(found["findings"], key=lambda f: -list(_MARKS).index(f["weight"])):
        line = f"{_MARKS[f['weight']]:5}  {f['about']}: {f['words']}"
        console.print(escape(line), style="bold red" if f["weight"] == "fails" else None)
        if f["line"]:
            console.print(escape(f"       {f['line']}"))
    for note in found["notes"]:
        console.print(escape(f"assumed  {note}"))
    console.print("[dim]" + escape("caution: " + " ".join(found["cautions"])) + "[/dim]")
    console.print(escape(f"verdict: {found['verdict']}"), style="bold")


def _table(*headings: str) -> Table:
    table = Table(box=box.SIMPLE_HEAD, pad_edge=False)
    for heading in headings:
        table.add_column(heading, overflow="fold")
    return table


def _seams(found: dict[str, Any]) -> Table:
    table = _table("seam", "nodes", "compared", "partners apart", "area", "of it")
    for s in found["seams"]:
        apart = "-" if s["worst_distance"] is None else f"{s['worst_distance']:.2g}"
        parts = []
        for key, word in (("area_other_mesh", "other mesh"), ("area_apart", "stands off")):
            if s[key]:
                parts.append(f"{word} {s[key]:.4g}")
        area = f"{s['area']:.5g}" if s["kind"] != "lines and points" else "-"
        table.add_row(*(escape(c) for c in (s["name"], str(s["nodes"]), s["pairing"], apart, area,
                                            ", ".join(parts) or "meets")))  # fmt: skip
    return table


def _several(found: dict[str, Any]) -> bool:
    return len(found["cases"]) > 1


def _loads(found: dict[str, Any]) -> Table:
    several = _several(found)
    table = _table(*["case"] * several, "seam", "declared", "found", "jump", "best other", "jump",
                   "verdict")  # fmt: skip
    for f in found["loads"]:
        table.add_row(
            *([escape(f["case"])] * several), escape(f["seam"]), escape(f["declared"]),
            escape(f["found"]), _percent(f["residual"]), escape(f["best_other"] or "-"),
            _percent(f["best_other_residual"]), f["verdict"],
        )  # fmt: skip
    return table


def _jumps(found: dict[str, Any]) -> Table:
    several = _several(found)
    seams = len({v["seam"] for entry in found["fields"] for v in entry["seams"]}) > 1
    table = _table(*["case"] * several, "field", *["seam"] * seams, "compared", "largest jump",
                   "rms", "of scatter", "node", "verdict")  # fmt: skip
    for entry in found["fields"]:
        name = escape(entry["field"])
        case = escape(entry["case"])
        for v in entry["seams"]:
            table.add_row(
                *([case] * several), name, *([escape(v["seam"])] * seams),
                _MEASURES[v["measure"]],
                _percent(v["relative"]), _percent(v["relative_rms"]),
                "-" if v["times_scatter"] is None else f"{v['times_scatter']:.2g} x",
                "-" if v["node"] is None else str(v["node"]), v["verdict"],
            )  # fmt: skip
            name, case = "", ""
    return table


def _percent(value: float | None) -> str:
    if value is None:
        return "-"
    return "0" if value == 0.0 else f"{100 * value:.2g} %"


def _print_audit(console: Console, audit: dict[str, Any]) -> None:
    totals = [(c["name"], t) for c in audit["cases"] for t in c["totals"]]
    if totals:
        console.print(f"whole body: totals, moments about {_triple(audit['about'])}")
        table = _table("case", "forces", "modelled part", "whole body", "moment, whole body")
        for case, t in totals:
            size = t["sum_of_magnitudes"]
            for name, x in ((", ".join(t["fields"]), t), *((f"  at {s['name']}", s)
                                                           for s in t["supports"])):  # fmt: skip
                table.add_row(*(escape(c) for c in (
                    case, name, _triple(x["sector"]["force"], size["force"]),
                    _triple(x["whole"]["force"], size["force"]),
                    _triple(x["whole"]["moment"], size["moment"]))))  # fmt: skip
                case = ""
        console.print(table)
    facts = Table.grid(padding=(0, 2))
    facts.add_column(style="bold")
    facts.add_column()
    for c in audit["cases"]:
        words = c["vanish_by_symmetry"]
        if "vanish" in words and "no force" not in words:
            words += f" (moments about {_triple(c['vanish_about'])})"
        if c["balance"] is None:
            words += f"; balance not tried: {c['not_balanced']}"
        else:
            words += f"; {' + '.join(c['balance']['fields'])} left over: "
            words += _percent(c["balance"]["relative"])
        facts.add_row("balance", escape(f"{c['name']}: {words}"))
    m, direct = audit["mass"]["whole"], audit["mass"]["whole_by_cells"]
    sizes = [f"{k} {m[k]:.6g}" for k in ("volume", "area", "length") if m[k]]
    by_cells = ", ".join(f"{direct[k]:.6g}" for k in ("volume", "area", "length") if m[k])
    facts.add_row("mass", escape(f"{m['mass']:.6g} (from {audit['mass']['from']}), centre "
                                 f"{_triple(m['centre'])}, {', '.join(sizes)}; by the copies' own "
                                 f"cells {by_cells}"))  # fmt: skip
    if m["mass"]:
        size = max(abs(v) for row in m["inertia"] for v in row)
        rows = "; ".join(_triple(row, size).strip("()") for row in m["inertia"])
        facts.add_row("inertia", escape(f"about the centre: {rows}"))
    p = audit["pieces"]
    facts.add_row("pieces", escape(f"{p['before']} before joining, {p['after']} after: "
                                   + "; ".join(x["words"] for x in p["list"][:4])))  # fmt: skip
    for s in audit["sections"]:
        words = (
            f"{s['name']}, {s['result']}, from {s['stress']}: force {_triple(s['force'])}, moment "
        )
        words += f"{_triple(s['moment'])} about {_triple(s['about'])}, area {s['area']:.5g}"
        facts.add_row("section", escape(words))
    console.print(facts)


def _triple(values: list[Any], size: float = 0.0) -> str:
    """Three numbers, those that are round-off beside the largest (or `size`) as zero; complex as
    a + bi."""
    numbers = [complex(*v) if isinstance(v, list) else complex(v or 0.0) for v in values]
    most = max(size, *(abs(n) for n in numbers))
    shown = []
    for n in numbers:
        parts = [0.0 if abs(x) < ROUND_OFF * most else x for x in (n.real, n.imag)]
        shown.append(f"{parts[0]:.5g}" + (f"{parts[1]:+.5g}i" if parts[1] else ""))
    return f"({', '.join(shown)})"
