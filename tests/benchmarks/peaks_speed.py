"""Speed and memory of peaks over the cycle beside numpy scans over 360 phases.

Both sides in one process, interleaved, medians of several runs; CPU seconds too, which scatter less
on a busy machine. The sides:

``ours``
    `expander.waves.peaks`, right to round-off.
``scan``
    what is written first: the field at each of 360 phases, its measure, the largest kept. Right to
    (pi / 360)^2 / 2, 4e-5 of the value, as shown.
``refined``
    the scan, then Newton's iteration on the phase from the best one: right to round-off except
    at the few nodes where two maxima lie close together. This is the side of equal accuracy.
``tuned``
    the scan by the five coefficients of the measure's square and one table of cosines: the fastest
    that numpy gives to a 360-phase scan, with the accuracy of the scan.

Principal stresses are compared with a scan by `numpy.linalg.eigvalsh`, on fewer nodes; their errors
are relative to the norm of the tensor, ours being the tolerance.

Usage::

    python peaks_speed.py              # a million nodes, ten minutes or more, 3 GB of memory
    python peaks_speed.py --quick      # to see that everything runs
"""

from __future__ import annotations

import argparse
import json
import os
import sys
import time
import tracemalloc
from collections.abc import Callable
from pathlib import Path
from statistics import median

import numpy as np

sys.path.insert(0, str(Path(__file__).resolve().parents[2]))

from expander.waves.peaks import (
    instant,
    largest_magnitude,
    largest_principal,
    largest_quadratic,
    largest_von_mises,
    von_mises_form,
)

PHASES = 360
GOAL = 20.0
PIECE = 4096


def square(now: np.ndarray) -> np.ndarray:
    """Square of the magnitude, or of the von Mises stress, as one writes it in numpy."""
    if now.shape[1] == 3:
        return (now * now).sum(axis=1)
    xx, yy, zz, xy, yz, zx = now.T
    normal = (xx - yy) ** 2 + (yy - zz) ** 2 + (zz - xx) ** 2
    return 0.5 * normal + 3.0 * (xy**2 + yz**2 + zx**2)


def scan(f, mean) -> tuple[np.ndarray, np.ndarray]:
    """Square of the measure and phase in radians, over 360 phases; whole arrays at a time."""
    best, phase = np.full(len(f), -1.0), np.zeros(len(f))
    a, b = np.ascontiguousarray(f.real), np.ascontiguousarray(f.imag)
    for angle in 2.0 * np.pi * np.arange(PHASES) / PHASES:
        now = a * np.cos(angle) - b * np.sin(angle)
        if mean is not None:
            now += mean
        value = square(now)
        higher = value > best
        best[higher] = value[higher]
        phase[higher] = angle
    return best, phase


def coefficients(f, mean) -> tuple[np.ndarray, ...]:
    """Level and coefficients of cos 2 phi, sin 2 phi, cos phi, sin phi of the square."""
    form = np.eye(3) if f.shape[1] == 3 else von_mises_form()
    a, b = np.ascontiguousarray(f.real), np.ascontiguousarray(f.imag)
    fa, fb = a @ form, b @ form
    aa, bb, ab = (fa * a).sum(1), (fb * b).sum(1), (fa * b).sum(1)
    level, second = 0.5 * (aa + bb), (0.5 * (aa - bb), -ab)
    if mean is None:
        return (level, *second)
    return (level + ((mean @ form) * mean).sum(1), *second,
            2.0 * (fa * mean).sum(1), -2.0 * (fb * mean).sum(1))  # fmt: skip


def newton(f, mean, phase, steps: int = 4) -> np.ndarray:
    """Square of the measure at the stationary point near a phase."""
    _level, D, E, *first = coefficients(f, mean)
    P, Q = first if first else (0.0, 0.0)
    for _ in range(steps):
        c, s, c2, s2 = np.cos(phase), np.sin(phase), np.cos(2 * phase), np.sin(2 * phase)
        slope = 2.0 * (E * c2 - D * s2) + Q * c - P * s
        bend = -4.0 * (D * c2 + E * s2) - P * c - Q * s
        phase = phase - np.where(bend < 0.0, slope / np.where(bend < 0.0, bend, 1.0), 0.0)
    now = f.real * np.cos(phase)[:, None] - f.imag * np.sin(phase)[:, None]
    return square(now if mean is None else now + mean)


def tuned(f, mean) -> np.ndarray:
    """Square of the measure over 360 phases, from its coefficients."""
    angle = 2.0 * np.pi * np.arange(PHASES) / PHASES
    rows = (np.cos(2 * angle), np.sin(2 * angle), np.cos(angle), np.sin(angle))
    level, *swing = coefficients(f, mean)
    table, swing = np.array(rows[: len(swing)]), np.array(swing)
    best = np.empty(len(f))
    for start in range(0, len(f), PIECE):
        part = slice(start, start + PIECE)
        best[part] = (table.T @ swing[:, part]).max(axis=0)
    return level + best


def eigenvalue_scan(f, mean) -> np.ndarray:
    """Largest principal value over 360 phases."""
    best = np.full(len(f), -np.inf)
    for k in range(PHASES):
        now = instant(f, 360.0 * k / PHASES, mean)
        best = np.maximum(best, np.linalg.eigvalsh(now[:, [[0, 3, 5], [3, 1, 4], [5, 4, 2]]])[:, 2])
    return best


def timed(call: Callable[[], object]) -> tuple[float, float, object]:
    """Seconds, CPU seconds, and what was found."""
    wall, cpu = time.perf_counter(), time.process_time()
    found = call()
    return time.perf_counter() - wall, time.process_time() - cpu, found


def extra_memory(call: Callable[[], object]) -> float:
    """Largest memory of arrays made by the call, MB."""
    tracemalloc.start()
    call()
    used = tracemalloc.get_traced_memory()[1]
    tracemalloc.stop()
    return used / 1e6


def measures(n: int, c: int, steady: bool, runs: int) -> dict:
    """Time every side on n nodes, interleaved."""
    rng = np.random.default_rng(c)
    f = rng.normal(size=(n, c)) + 1j * rng.normal(size=(n, c))
    mean = rng.normal(size=(n, c)) if steady else None
    ours = largest_magnitude if c == 3 else largest_von_mises
    times: dict[str, list[tuple[float, float]]] = {}
    for _ in range(runs):
        *taken, peak = timed(lambda: ours(f, mean))
        times.setdefault("ours", []).append(tuple(taken))
        *taken, (best, phase) = timed(lambda: scan(f, mean))
        times.setdefault("scan", []).append(tuple(taken))
        *more, better = timed(lambda phase=phase: newton(f, mean, phase))
        both = tuple(x + y for x, y in zip(taken, more, strict=True))
        times.setdefault("refined", []).append(both)
        *taken, quick = timed(lambda: tuned(f, mean))
        times.setdefault("tuned", []).append(tuple(taken))
    errors = {
        side: float(np.abs(np.sqrt(value) / peak.value - 1.0).max())
        for side, value in (("scan", best), ("refined", better), ("tuned", quick))
    }
    back = np.sqrt(square(np.concatenate([
        instant(f[i : i + PIECE], peak.phase[i : i + PIECE], None if mean is None
                else mean[i : i + PIECE]) for i in range(0, n, PIECE)])))  # fmt: skip
    errors["ours"] = float(np.abs(back / peak.value - 1.0).max())
    return {
        "name": ("magnitude" if c == 3 else "von mises") + (", with mean" if steady else ""),
        "nodes": n,
        "seconds": {side: median(t[0] for t in taken) for side, taken in times.items()},
        "cpu": {side: median(t[1] for t in taken) for side, taken in times.items()},
        "errors": errors,
        "memory": extra_memory(lambda: ours(f, mean)),
        "given": (f.nbytes + (0 if mean is None else mean.nbytes)) / 1e6,
    }


def principal(n: int, steady: bool, runs: int) -> dict:
    """Time the search for the largest principal stress beside a scan, interleaved."""
    rng = np.random.default_rng(1)
    f = rng.normal(size=(n, 6)) + 1j * rng.normal(size=(n, 6))
    mean = rng.normal(size=(n, 6)) if steady else None
    times: dict[str, list[tuple[float, float]]] = {}
    for _ in range(runs):
        *taken, peak = timed(lambda: largest_principal(f, mean))
        times.setdefault("ours", []).append(tuple(taken))
        *taken, best = timed(lambda: eigenvalue_scan(f, mean))
        times.setdefault("scan", []).append(tuple(taken))
    norm = largest_quadratic(f, mean, np.diag([1.0, 1.0, 1.0, 2.0, 2.0, 2.0])).value
    return {
        "name": "principal" + (", with mean" if steady else ""),
        "nodes": n,
        "seconds": {side: median(t[0] for t in taken) for side, taken in times.items()},
        "cpu": {side: median(t[1] for t in taken) for side, taken in times.items()},
        "errors": {"ours": 1e-6, "scan": float((np.abs(best - peak.value) / norm).max())},
        "memory": extra_memory(lambda: largest_principal(f, mean)),
        "given": (f.nbytes + (0 if mean is None else mean.nbytes)) / 1e6,
    }


def show(result: dict) -> None:
    """One comparison as lines of text."""
    print(f"\n{result['name']}, {result['nodes']:,} nodes")
    for side, seconds in result["seconds"].items():
        times = result["seconds"][side] / result["seconds"]["ours"]
        print(
            f"  {side:8} {seconds:9.3f} s  {result['cpu'][side]:9.3f} s CPU  error "
            f"{result['errors'][side]:.1e}" + (f"  {times:6.1f} times ours" if times != 1 else "")
        )
    print(f"  memory of ours {result['memory']:.0f} MB, beside {result['given']:.0f} MB given")
    if "refined" in result["seconds"]:
        ratio = result["seconds"]["refined"] / result["seconds"]["ours"]
        verdict = "met" if ratio >= GOAL else "MISSED"
        print(f"  goal, {GOAL:.0f} times as fast as the scan of equal accuracy: {verdict}")


def main() -> int:
    """Measure and print."""
    parser = argparse.ArgumentParser(
        description=__doc__, formatter_class=argparse.RawDescriptionHelpFormatter
    )
    parser.add_argument("--quick", action="store_true", help="few nodes")
    parser.add_argument("--nodes", type=int, default=1_000_000)
    parser.add_argument("--runs", type=int, default=3, help="runs of each side; medians are shown")
    parser.add_argument("--json", type=Path, help="write all figures to this file")
    options = parser.parse_args()
    n = 20_000 if options.quick else options.nodes
    print(f"{os.cpu_count()} cores, load average {os.getloadavg()[0]:.1f} at the start, medians of "
          f"{options.runs} runs")  # fmt: skip
    results = []
    for c in (6, 3):
        for steady in (False, True):
            results.append(measures(n, c, steady, options.runs))
            show(results[-1])
    for steady in (False, True):
        results.append(principal(max(n // 50, 1000), steady, options.runs))
        show(results[-1])
    print(f"\nload average {os.getloadavg()[0]:.1f} at the end, this run's own included")
    if options.json is not None:
        options.json.write_text(json.dumps(results, indent=1) + "\n", encoding="utf-8")
    return 0


if __name__ == "__main__":
    sys.exit(main())
