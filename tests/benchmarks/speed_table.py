"""What the speed comparison measured, its ratios, and how it is printed."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

from whole_process import Usage

OURS, BASELINE, TUNED = "seamfold", "baseline", "tuned"


@dataclass(frozen=True)
class Goals:
    """What one comparison is judged by, against the baseline."""

    net_ratio: float
    memory_share: float | None = None


@dataclass(frozen=True)
class Measured:
    """One side of a comparison; figures are medians, seconds and bytes.

    Attributes
    ----------
    whole : the run on the model; its peak memory includes child processes.
    fastest, slowest : the extremes of the whole process's seconds.
    start_up : the same command on a model of one cell.
    net : whole less start-up.
    net_synced : the same with the ``fsync`` of the finished file added, if measured.
    net_of_few : whole less the start-up with few copies of one cell, if measured; what grows
        with the number of copies then counts as work.
    output_bytes : size of the file written.
    """

    whole: Usage
    fastest: float
    slowest: float
    start_up: Usage
    net: float
    net_synced: float | None
    net_of_few: float | None
    output_bytes: int

    @classmethod
    def from_runs(
        cls,
        whole: Sequence[Usage],
        start_up: Sequence[Usage],
        synced: Sequence[Usage],
        few: Sequence[Usage],
        family_peak: float,
        output_bytes: int,
    ) -> Measured:
        """Medians of all runs; ``family_peak`` is the memory with all child processes."""
        took, start = Usage.median(whole), Usage.median(start_up)
        took = Usage(took.seconds, took.cpu, max(took.peak, family_peak))
        seconds = [run.seconds for run in whole]
        net_synced = None
        if synced:
            last = Usage.median(synced)
            net_synced = last.seconds + last.fsync - start.seconds
        return cls(
            whole=took,
            fastest=min(seconds),
            slowest=max(seconds),
            start_up=start,
            net=took.seconds - start.seconds,
            net_synced=net_synced,
            net_of_few=took.seconds - Usage.median(few).seconds if few else None,
            output_bytes=output_bytes,
        )


def quotient(a: float, b: float) -> float | None:
    """``a / b``; None where the model is too small for either to stand out of the scatter."""
    return a / b if a > 0.0 and b > 0.0 else None


def ratios(sides: dict[str, Measured]) -> dict[str, dict[str, float | None]]:
    """Each other side's figures over ours; for memory ours over theirs."""
    ours = sides.get(OURS)
    if ours is None:
        return {}
    found = {}
    for side, other in sides.items():
        if side == OURS:
            continue
        found[side] = {
            "net": quotient(other.net, ours.net),
            "whole": quotient(other.whole.seconds, ours.whole.seconds),
            "memory_share": quotient(ours.whole.peak, other.whole.peak),
        }
        for name in ("net_synced", "net_of_few"):
            theirs, own = getattr(other, name), getattr(ours, name)
            if theirs is not None and own is not None:
                found[side][name] = quotient(theirs, own)
    return found


def shown(ratio: float | None) -> str:
    """A ratio as printed."""
    return f"{'-' if ratio is None else f'{ratio:.2f}':>6}"


def judged(value: float | None, goal: float, at_least: bool, quick: bool) -> str:
    """The goal beside a figure, and whether it is met."""
    sign = ">=" if at_least else "<="
    if quick or value is None:
        return f"(goal {sign} {goal:g}, not for small models)"
    met = value >= goal if at_least else value <= goal
    return f"(goal {sign} {goal:g}: {'met' if met else 'MISSED'})"


def print_comparison(title: str, result: dict, goals: Goals, quick: bool) -> None:
    """One comparison as a table, and our ratios to both baselines."""
    print(f"\n{title}: {result['cells']:,} cells, {result['points']:,} points")
    heads = ("whole s", "min - max", "start-up s", "net s", "net+fsync s")
    heads += ("CPU s", "peak MB", "file MB")
    print(" " * 9 + "".join(f"{head:>12}" for head in heads))
    for side, took in result["sides"].items():
        synced = "-" if took.net_synced is None else f"{took.net_synced:.2f}"
        row = [f"{took.whole.seconds:.2f}", f"{took.fastest:.2f} - {took.slowest:.2f}"]
        row += [f"{took.start_up.seconds:.2f}", f"{took.net:.2f}", synced]
        row += [f"{took.whole.cpu:.2f}", f"{took.whole.peak / 1e6:.0f}"]
        row.append(f"{took.output_bytes / 1e6:.0f}")
        print(f"{side:<9}" + "".join(f"{value:>12}" for value in row))
    plain, size = result["plain_write"], result["plain_write_bytes"] / 1e6
    seconds = f"{plain['plain']:.2f} s, with fsync {plain['fsync']:.2f} s"
    print(f"plain write of {size:.0f} MB: {seconds}")
    for side, comparison in result["comparisons"].items():
        worst = max(comparison["differences"].values())
        print(f"{side} and {BASELINE}: same body, largest relative difference {worst:.1e}")

    for side, found in result["ratios"].items():
        official = side == BASELINE
        beside_net = beside_share = ""
        if official:
            beside_net = " " + judged(found["net"], goals.net_ratio, True, quick)
        if official and goals.memory_share is not None:
            beside_share = " " + judged(found["memory_share"], goals.memory_share, False, quick)
        print(f"{side} / {OURS}")
        print(f"  net time            {shown(found['net'])}{beside_net}")
        if "net_of_few" in found:
            print(f"  same, 4-copy start  {shown(found['net_of_few'])}")
        print(f"  whole process       {shown(found['whole'])}")
        if "net_synced" in found:
            print(f"  net time with fsync {shown(found['net_synced'])}")
        print(f"  our peak / theirs   {shown(found['memory_share'])}{beside_share}")


def print_peaks(peaks: dict[int, float], goal: float, quick: bool) -> None:
    """Our peak memory for several numbers of copies, and how far the extremes are apart."""
    each = ", ".join(f"{copies} copies {peak / 1e6:.0f} MB" for copies, peak in peaks.items())
    ratio = max(peaks.values()) / min(peaks.values())
    print(f"{OURS} peak memory: {each}")
    print(f"  larger / smaller    {ratio:6.3f} {judged(ratio, 1.0 + goal, False, quick)}")
