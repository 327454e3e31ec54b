"""Speed and memory of ``seamfold expand`` beside the straightforward way with pyvista and VTK.

All sides are measured in one run, interleaved, each as a whole process timed from outside, the
median of several runs, and each less its own start-up: the same command on a model of one cell.
For the ring, a stricter net takes off the start-up of a ring of four one-cell sectors.
An untimed run of each side first fills the caches, and its outputs are compared: all sides must
hold the same body.  Two baselines are shown:

``baseline``
    what the goals are set against: pyvista's transform or VTK's reflection filter.
``tuned``
    the fastest that numpy and VTK give to someone who knows VTK's data model well.

Usage::

    python expand_speed.py                     # a few minutes, 4 GB of disk
    python expand_speed.py --quick             # small models, to see that everything runs
    python expand_speed.py --sides baselines   # without seamfold
    python expand_speed.py --command seamfold  # the installed command
"""

from __future__ import annotations

import argparse
import json
import os
import shlex
import shutil
import subprocess
import sys
import tempfile
from collections.abc import Callable
from dataclasses import asdict
from pathlib import Path

from plain_write import plain_write
from speed_table import (
    BASELINE,
    OURS,
    TUNED,
    Goals,
    Measured,
    print_comparison,
    print_peaks,
    ratios,
)
from whole_process import CommandFailedError, Usage, memory_of_children, run_measured

HERE = Path(__file__).resolve().parent

Case = dict[str, str | int]
Command = Callable[[Case], tuple[list[str], Path]]


class Runner:
    """Runs the sides of the comparisons in one work folder."""

    def __init__(self, folder: Path, options: argparse.Namespace) -> None:
        self.folder = folder
        self.options = options
        paths = [str(HERE.parents[1]), os.environ.get("PYTHONPATH", "")]
        self.environment = os.environ | {"PYTHONPATH": os.pathsep.join(filter(None, paths))}

    def script(self, name: str, *arguments: object) -> list[str]:
        """Command line of a script of this folder."""
        return [sys.executable, str(HERE / name), *map(str, arguments)]

    def build_models(self) -> dict[str, Case]:
        """Write the models in a process of its own, so that this one stays small.

        The peak memory that the system reports for a child is at least that of its parent.
        """
        quick = ["--quick"] if self.options.quick else []
        command = self.script("models.py", self.folder, *quick)
        return json.loads(subprocess.run(command, check=True, capture_output=True).stdout)

    def ours(self, case: Case) -> tuple[list[str], Path]:
        """Command and output file of seamfold."""
        return [*self.options.command, "expand", str(case["case"])], Path(str(case["full"]))

    def baseline(self, side: str, script: str, *extra: object) -> Command:
        """Command and output file of a baseline script."""

        def command(case: Case) -> tuple[list[str], Path]:
            output = self.folder / f"{side}_{Path(str(case['full'])).name}"
            ring = ["--sectors", case["sectors"]] if case["sectors"] else []
            return self.script(script, case["model"], output, *ring, *extra), output

        return command

    def sides(self, script: str, plain: list[object], tuned: list[object]) -> dict[str, Command]:
        """The sides that the options ask for."""
        found: dict[str, Command] = {OURS: self.ours} if self.options.sides == "all" else {}
        found[BASELINE] = self.baseline(BASELINE, script, *plain)
        found[TUNED] = self.baseline(TUNED, script, *tuned)
        return found

    def verify(self, case: Case, sides: dict[str, Command]) -> tuple[dict[str, float], dict]:
        """Run every side untimed and compare what it wrote with the baseline.

        Returns the memory of child processes by side, and the comparisons.
        """
        family, outputs, comparisons = {}, {}, {}
        for side, command in sides.items():
            arguments, outputs[side] = command(case)
            family[side] = memory_of_children(arguments, outputs[side], self.environment)
        for side in [side for side in sides if side != BASELINE]:
            expected = ["--points", case["points"], "--cells", case["cells"]]
            arguments = self.script("same_body.py", outputs[side], outputs[BASELINE], *expected)
            found = subprocess.run(arguments, capture_output=True, text=True)
            if found.returncode != 0:
                raise CommandFailedError(f"{side} and {BASELINE} differ: {found.stderr.strip()}")
            comparisons[side] = json.loads(found.stdout)
        for output in outputs.values():
            output.unlink()
        return family, comparisons

    def measure(self, command: Command, case: Case, fsync: bool = False) -> tuple[Usage, int]:
        """One run, its output removed afterwards; what it took and the size of the output."""
        arguments, output = command(case)
        usage = run_measured(arguments, output, self.environment, fsync)
        size = output.stat().st_size
        output.unlink()
        return usage, size

    def compare(
        self, whole: Case, one_cell: Case, sides: dict[str, Command], few: Case | None = None
    ) -> dict:
        """Verify and measure the sides, interleaved.

        ``few`` is a one-cell model with few copies, for a stricter start-up: taking off a run
        with all copies of one cell also takes off what each copy costs whatever its size.
        """
        family, comparisons = self.verify(whole, sides)
        for command in sides.values():
            self.measure(command, one_cell)
        runs: dict[str, dict[str, list[Usage]]] = {
            side: {"whole": [], "start": [], "synced": [], "few": []} for side in sides
        }
        sizes = {}
        for _ in range(self.options.runs):
            for side, command in sides.items():
                usage, sizes[side] = self.measure(command, whole)
                runs[side]["whole"].append(usage)
                runs[side]["start"].append(self.measure(command, one_cell)[0])
                if few is not None:
                    runs[side]["few"].append(self.measure(command, few)[0])
        for _ in range(self.options.fsync_runs):
            for side, command in sides.items():
                runs[side]["synced"].append(self.measure(command, whole, fsync=True)[0])

        measured = {
            side: Measured.from_runs(*by_kind.values(), family[side], sizes[side])
            for side, by_kind in runs.items()
        }
        largest = max(sizes.values())
        return {
            "points": whole["points"],
            "cells": whole["cells"],
            "sides": measured,
            "ratios": ratios(measured),
            "runs": runs,
            "comparisons": comparisons,
            "plain_write": plain_write(self.folder, largest, self.options.runs),
            "plain_write_bytes": largest,
        }

    def peaks(self, cases: dict[int, Case]) -> dict[int, float]:
        """Our peak memory in bytes by number of copies, interleaved medians."""
        family = {n: memory_of_children(*self.ours(case), self.environment)
                  for n, case in cases.items()}  # fmt: skip
        runs: dict[int, list[Usage]] = {n: [] for n in cases}
        for _ in range(self.options.runs):
            for n, case in cases.items():
                runs[n].append(self.measure(self.ours, case)[0])
        return {n: max(Usage.median(runs[n]).peak, family[n]) for n in cases}


def main() -> int:
    """Build the models, compare, print."""
    parser = argparse.ArgumentParser(
        description=__doc__, formatter_class=argparse.RawDescriptionHelpFormatter
    )
    parser.add_argument(
        "--command",
        type=shlex.split,
        default=[sys.executable, "-m", "expander.commandline"],
        help="the seamfold command; default: the one of this repository",
    )
    parser.add_argument("--sides", choices=("all", "baselines"), default="all")
    parser.add_argument("--only", choices=("ring", "half"), help="one comparison only")
    parser.add_argument("--runs", type=int, default=5, help="runs of each side; medians are shown")
    parser.add_argument("--fsync-runs", type=int, default=3, help="further runs with fsync")
    parser.add_argument("--quick", action="store_true", help="small models of the same make")
    parser.add_argument("--folder", type=Path, help="work folder; default: a temporary one")
    parser.add_argument("--json", type=Path, help="write all figures to this file")
    options = parser.parse_args()
    if options.runs < 1 or options.fsync_runs < 0:
        parser.error("--runs must be at least 1 and --fsync-runs at least 0")
    if options.folder is not None:
        options.folder.mkdir(parents=True, exist_ok=True)
    work = Path(tempfile.mkdtemp(prefix="expand_speed_", dir=options.folder)).resolve()
    try:
        results = run_all(Runner(work, options), options)
    except CommandFailedError as problem:
        print(problem, file=sys.stderr)
        return 1
    finally:
        shutil.rmtree(work, ignore_errors=True)
    if options.json is not None:
        text = json.dumps(results, default=asdict, indent=1)
        options.json.write_text(text + "\n", encoding="utf-8")
    return 0


def run_all(runner: Runner, options: argparse.Namespace) -> dict:
    """Every comparison that the options ask for, printed as soon as it is measured."""
    cores, load = os.cpu_count() or 1, os.getloadavg()[0]
    results: dict = {"cores": cores, "load": load, "runs": options.runs, "quick": options.quick}
    print(f"{cores} cores, load average {load:.1f} at the start, medians of {options.runs} runs")
    if load > 0.3 * cores:
        print("the machine is busy with something else: expect scatter")
    cases = runner.build_models()
    if options.only != "half":
        sides = runner.sides(
            "baseline_ring.py",
            ["--turn", "pyvista", "--merge", "append"],
            ["--turn", "numpy", "--merge", "append"],
        )
        result = runner.compare(
            cases["ring_96"], cases["ring_96_cell"], sides, few=cases["ring_4_cell"]
        )
        results["ring"] = result
        print_comparison("ring of 96 sectors", result, Goals(5.0, 0.25), options.quick)
        if options.sides == "all":
            peaks = runner.peaks({24: cases["ring_24"], 96: cases["ring_96"]})
            results["peaks"] = peaks
            print_peaks(peaks, 0.1, options.quick)
    if options.only != "ring":
        sides = runner.sides(
            "baseline_half.py",
            ["--reflect", "filter", "--merge", "append"],
            ["--reflect", "numpy", "--merge", "append", "--tolerance", 0],
        )
        result = runner.compare(cases["half"], cases["half_cell"], sides)
        results["half"] = result
        print_comparison("half model", result, Goals(2.0), options.quick)
    results["load_at_end"] = os.getloadavg()[0]
    print(f"\nload average {results['load_at_end']:.1f} at the end, this run's own included")
    return results


if __name__ == "__main__":
    sys.exit(main())
