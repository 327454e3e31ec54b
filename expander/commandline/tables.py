"""Tables and progress bars on the terminal."""

from __future__ import annotations

from types import TracebackType
from typing import Any

from rich import box
from rich.console import Console
from rich.markup import escape
from rich.progress import BarColumn, DownloadColumn, TaskID, TextColumn, TimeElapsedColumn
from rich.progress import Progress as Bar
from rich.table import Table

FILE_WIDTH = 110  # characters, where no terminal says how wide it is


class Progress:
    """A progress bar on the error stream; quiet when that is no terminal."""

    def __init__(self) -> None:
        console = Console(stderr=True)
        self._bar = Bar(
            TextColumn("{task.description}"), BarColumn(), DownloadColumn(), TimeElapsedColumn(),
            console=console, transient=True, disable=not console.is_terminal,
        )  # fmt: skip
        self._task: TaskID | None = None

    def __enter__(self) -> Progress:
        self._bar.start()
        return self

    def __exit__(
        self,
        kind: type[BaseException] | None,
        error: BaseException | None,
        trace: TracebackType | None,
    ) -> None:
        self._bar.stop()

    def step(self, words: str) -> None:
        """A part without a known length begins."""
        self.start(words, None)

    def start(self, words: str, total: int | None) -> None:
        """A part of `total` bytes begins."""
        if self._task is not None:
            self._bar.remove_task(self._task)
        self._task = self._bar.add_task(escape(words), total=total)

    def advance(self, done: int) -> None:
        """So many bytes more are written."""
        if self._task is not None:
            self._bar.advance(self._task, done)


def print_summary(found: dict[str, Any]) -> None:
    """The short table of an expansion."""
    console = Console(highlight=False, emoji=False)
    if not console.is_terminal:
        console.width = FILE_WIDTH
    points, cells = found["points"], found["cells"]
    facts = Table.grid(padding=(0, 2))
    facts.add_column(style="bold")
    facts.add_column()
    copies = len(found["copies"])
    of = "" if copies == found["whole_body_copies"] else f" of {found['whole_body_copies']}"
    made = ", ".join(c["made"] for c in found["copies"][:4]) + (", .." if copies > 4 else "")
    facts.add_row("copies", escape(f"{copies}{of}: {made}"))
    for case in found["cases"]:
        facts.add_row("case", escape(f"{case['name']}: {case['behaviour']}"))
    searched = [s for s in found["seams"] if s["nodes"]]
    seams = ", ".join(f"{s['made']} ({s['nodes']} nodes)" for s in searched[:4])
    facts.add_row("seams", escape(seams + (", .." if len(searched) > 4 else "")) or "none")
    if found["seam_nodes"]:
        low, high = found["tolerance"]
        facts.add_row(
            "stitched",
            f"{points['merged']:,} nodes and {cells['merged']:,} cells merged; partners "
            + (
                f"at most {found['worst_distance']:.3g} apart"
                if found["worst_distance"]
                else "coincide"
            )
            + f" (tolerance {low:.3g}"
            + (f" to {high:.3g})" if high > low else ")"),
        )
    facts.add_row(
        "body",
        f"{points['body']:,} nodes, {cells['body']:,} cells (sector: {points['sector']:,} nodes, "
        f"{cells['sector']:,} cells)",
    )
    if found["unit"]:
        facts.add_row("units", escape(found["unit"]))
    console.print(facts)
    console.print(_field_table(found))
    signs = _sign_table(found)
    if signs is not None:
        console.print("components that change sign across a cut plane")
        console.print(signs)
        if any("mixed" in w.values() for f in found["fields"] for w in f["changes_sign"].values()):
            console.print("combined: the plane is oblique, so components mix (Q v, Q T Q^T)")
    several = len(found["cases"]) > 1
    for result in found["results"]:
        terms = " + ".join(f"{_factor(a)} {name}" for name, a in result["terms"].items())
        mark = "wrote" if found["written"] else "would write"
        left = f"; left out: {', '.join(result['left_out'])}" if result["left_out"] else ""
        alone = list(result["terms"].items()) == [(result["name"], 1.0)]
        what = f"({result['name']} = {terms}{left})" if not alone else f"({result['name']})"
        line = escape(f"{mark} {result['file']}  " + (what if several else ""))
        console.print(line, soft_wrap=True)  # a path must stay in one piece
    waves = {r["name"]: r["wave"] for r in found["results"] if r["wave"]}
    for name, words in waves.items():
        line = f"{name}: {words}; field = Re(amplitude * exp({found['time_factor']}))"
        console.print(escape(line))
    if found["index"]:
        console.print(escape(f"index {found['index']}"), soft_wrap=True)
    for name, count in found["not_finite"].items():
        console.print(escape(f"note: {name} holds {count} values that are not finite numbers"))
    for note in found["notes"]:
        console.print(escape(f"note: {note}"))
    console.print("[dim]" + escape("caution: " + " ".join(found["cautions"])) + "[/dim]")


def _factor(a: float | list[float]) -> str:
    return f"({a[0]:g}{a[1]:+g}i)" if isinstance(a, list) else f"{a:g}"


def _field_table(found: dict[str, Any]) -> Table:
    table = Table(box=box.SIMPLE_HEAD, pad_edge=False)
    units = any(f["unit"] for f in found["fields"])
    headings = ["field", "on", "kind", "decided", "follows", "at seams"]
    for heading in headings + ["unit"] * units:
        table.add_column(heading, overflow="fold")
    for f in found["fields"]:
        seam = f["seam"] if f["on"] == "points" or f["seam"] == "sum" else "-"
        row = [f["name"], f["on"], f["kind"], f["decided"], f["follows"], seam]
        row += [f["unit"]] * units
        table.add_row(*(escape(cell) for cell in row))
    return table


def _sign_table(found: dict[str, Any]) -> Table | None:
    """Which components change sign across each cut plane, a column for each plane and case."""
    planes = [p["name"] for p in found["planes"]]
    cases = [c["name"] for c in found["cases"]]
    if not planes:
        return None
    table = Table(box=box.SIMPLE_HEAD, pad_edge=False)
    table.add_column("field", overflow="fold")
    columns = [(plane, case) for plane in planes for case in cases]
    for plane, case in columns:
        table.add_column(escape(f"{plane}, {case}" if len(cases) > 1 else plane), overflow="fold")
    for f in found["fields"]:
        if f["kind"] == "label":
            continue
        words = [f["changes_sign"][case][plane] for plane, case in columns]
        shown = [{"none": "-", "mixed": "combined", "sign": "its sign"}.get(w, w) for w in words]
        table.add_row(*(escape(cell) for cell in [f["name"], *shown]))
    return table
