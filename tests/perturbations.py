"""Random fields that close at every seam, then opened by a known amount: is each opening found?

Sectors and fields come from `closing_fields`, perturbations from `openings`. One node, one cell or
a whole face is perturbed, in one component or in all. A jump of ten limits or more must be found
open at its seam, field and node; a tenth of the limit or less must never be called open. Run from
anywhere:

    python tests/perturbations.py                 # 600; exit status 1 on a miss or false alarm
    python tests/perturbations.py --count 50 --seed 7 --log found.csv
    python tests/perturbations.py --only traction # value, traction or kink
"""

from __future__ import annotations

import argparse
import csv
import sys
import tempfile
import time
from collections import Counter
from collections.abc import Iterator
from dataclasses import asdict, dataclass, fields, replace
from pathlib import Path
from typing import Any

import numpy as np
from closing_fields import Array, Probe, Setting, probes, setting
from meshes import case_of
from openings import MAKERS, Base, Opened

from expander.checking.report import CheckUp
from expander.checking.verdicts import OPEN, Verdict
from expander.checkup import check

EACH = 8  # perturbations of one sector
MEASURES = {"value": 0.5, "traction": 0.3, "kink": 0.2}
TRIES = 40
GOOD = ("found", "quiet")


@dataclass(frozen=True)
class Outcome:
    """One perturbation, and a line of the log.

    Attributes
    ----------
    size : the largest jump over its limit; 0 for the field as it closes.
    verdict, node : of the seam where the jump is largest.
    expected : nodes that may be named first, or any.
    outcome : "found", "quiet", "MISS", "WRONG NODE" or "FALSE ALARM".
    """

    sector: int
    setting: str
    kind: str
    field: str
    measure: str
    where: str
    component: str
    size: float
    seam: str
    verdict: str
    node: int
    expected: str
    outcome: str
    words: str = ""


# --- the check, and what it should say ------------------------------------------------------------


def checked(folder: Path, s: Setting, every: list[Probe], frames: Any, whole: bool) -> CheckUp:
    """The check of these fields; of the whole body too if asked."""
    arrays: dict[str, dict[str, Array]] = {"points": {}, "cells": {}}
    for p in every:
        arrays[p.on] |= p.arrays(s.waves)
    tables = {**s.tables, "fields": {p.name: p.table(s.waves) for p in every}}
    if frames:
        tables["frames"] = frames
    case = case_of(folder, s.sector, tables, arrays["points"], arrays["cells"])
    return check(case, seams_only=not whole)


def opened(check: CheckUp) -> list[Verdict]:
    return [v for v in check.continuity.verdicts if v.result == OPEN]


def told(check: CheckUp) -> str:
    """What is open, in a few words, and what failed."""
    words = [f"{v.field} {v.measure} at {v.seam!r}" for v in opened(check)]
    words += [f.words for f in check.findings if f.weight == "fails" and not words]
    return "; ".join(words)


def judged(number: int, base: Base, change: Opened, size: float, found: CheckUp) -> Outcome:
    """What the check of a perturbed field said beside what it should say."""
    seams = found.continuity.seams
    jumps = [float(change.jumps[base.copies_at(seam)].max(initial=0.0)) * size
             for seam in base.check.continuity.seams]  # fmt: skip
    verdicts = {v.seam: v for v in found.continuity.verdicts
                if v.field == change.probe.name and v.measure == change.measure}  # fmt: skip
    most = seams[int(np.argmax(jumps))].name
    shown = verdicts.get(most)
    named = {v.seam for v in verdicts.values() if v.result == OPEN}
    expected = {seam.name for seam, jump in zip(seams, jumps, strict=True) if jump >= 0.999 * size}
    allowed = {seam.name for seam, jump in zip(seams, jumps, strict=True) if jump > 0.5}
    others = [v for v in opened(found) if v.field != change.probe.name]
    if size < 1.0:
        loud = bool(opened(found)) or found.verdict == "failed"
        outcome = "FALSE ALARM" if loud else "quiet"
    elif not expected <= named or found.verdict != "failed":
        outcome = "MISS"
    elif others or not named <= allowed:
        outcome = "FALSE ALARM"
    elif change.nodes and any(verdicts[n].node not in change.nodes for n in expected):
        outcome = "WRONG NODE"
    else:
        outcome = "found"
    times = f"times {shown.times:.3g}" if shown and shown.times is not None else ""
    return Outcome(
        number, base.setting.name, change.probe.kind, change.probe.name, change.measure,
        change.where, change.component, size, most, shown.result if shown else "none",
        shown.node if shown else -1, " ".join(map(str, sorted(change.nodes))) or "any", outcome,
        times if outcome in GOOD else f"{times} {told(found)}".strip(),
    )  # fmt: skip


def as_it_closes(number: int, base: Base) -> Outcome:
    """The sector before anything is perturbed: nothing may be open."""
    loud = bool(opened(base.check)) or base.check.verdict == "failed"
    doubts = [f"{v.field} {v.measure}: {v.words}" for v in base.check.continuity.verdicts
              if v.result == "doubtful"]  # fmt: skip
    return Outcome(
        number, base.setting.name, "", "all", "all", "", "", 0.0, "", base.check.verdict, -1, "any",
        "FALSE ALARM" if loud else "quiet", told(base.check) if loud else "; ".join(doubts),
    )  # fmt: skip


def outcomes_of(
    seed: int, number: int, count: int, folder: Path, only: str | None = None
) -> Iterator[Outcome]:
    """One random sector: the check of its fields as they close, then `count` perturbations."""
    rng = np.random.default_rng([seed, number])
    s = setting(rng)
    every, frames = probes(rng, s)
    base = Base(s, every, frames, checked(folder, s, every, frames, number % 10 == 0))
    yield as_it_closes(number, base)
    for k in range(count):
        measure = only or str(rng.choice(list(MEASURES), p=list(MEASURES.values())))
        change = next(filter(None, (MAKERS[measure](rng, base) for _ in range(TRIES))), None)
        if change is None:  # every direction keeps to the symmetry here
            continue
        size = float(10.0 ** (rng.uniform(1.0, 2.0) if k % 2 == 0 else rng.uniform(-3.0, -1.0)))
        moved = [replace(p, values=p.values + size * change.delta) if p is change.probe else p
                 for p in every]  # fmt: skip
        yield judged(number, base, change, size, checked(folder, s, moved, frames, False))


def outcomes(count: int, seed: int, only: str | None = None) -> Iterator[Outcome]:
    """`count` perturbations, and the sectors that they start from."""
    number = made = 0
    with tempfile.TemporaryDirectory(prefix="seamfold-perturbed-") as name:
        while made < count:
            for found in outcomes_of(seed, number, min(EACH, count - made), Path(name), only):
                made += found.size > 0.0
                yield found
            number += 1


def summary(found: list[Outcome]) -> list[str]:
    """Counts by measure, place and size, a line each."""
    groups: dict[tuple[str, str, str], Counter[str]] = {}
    for o in found:
        size = "closing" if o.size == 0.0 else "10 limits or more" if o.size > 1 else "a tenth"
        groups.setdefault((o.measure, o.where.split(" ")[0], size), Counter())[o.outcome] += 1
    lines = [f"{measure:9} {where:6} {size:18} " + ", ".join(f"{n} {w}" for w, n in c.items())
             for (measure, where, size), c in sorted(groups.items())]  # fmt: skip
    doubted = sum(o.size == 0.0 and o.verdict == "doubtful" for o in found)
    return [*lines, f"{doubted} sectors doubtful as they close"]


def main() -> int:
    parser = argparse.ArgumentParser(description=(__doc__ or "").partition("\n")[0])
    parser.add_argument("--count", type=int, default=600, metavar="N", help="perturbations (600)")
    parser.add_argument("--seed", type=int, default=1)
    parser.add_argument("--only", choices=tuple(MEASURES), help="this measure only")
    parser.add_argument("--log", type=Path, metavar="FILE", help="write a CSV line for each")
    given = parser.parse_args()
    start = time.perf_counter()
    found = []
    for o in outcomes(given.count, given.seed, given.only):
        found.append(o)
        if o.outcome not in GOOD:
            print(f"{o.outcome}: sector {o.sector} ({o.setting}), {o.field} {o.measure} at "
                  f"{o.where}, component {o.component}, {o.size:.3g} limits at {o.seam!r}: "
                  f"{o.verdict}, node {o.node}, expected {o.expected}; {o.words}",
                  flush=True)  # fmt: skip
    if given.log is not None:
        with given.log.open("w", newline="", encoding="utf-8") as file:
            writer = csv.DictWriter(file, [f.name for f in fields(Outcome)])
            writer.writeheader()
            writer.writerows(asdict(o) for o in found)
    print("\n".join(summary(found)))
    bad = [o for o in found if o.outcome not in GOOD]
    made = sum(o.size > 0.0 for o in found)
    print(f"{made} perturbations of {len(found) - made} sectors: {len(bad)} wrong; "
          f"{time.perf_counter() - start:.0f} s")  # fmt: skip
    return 1 if bad else 0


if __name__ == "__main__":
    sys.exit(main())
