"""Measuring a command as a whole process, from outside: seconds, CPU seconds, peak memory."""

from __future__ import annotations

import os
import statistics
import subprocess
import tempfile
import time
from collections.abc import Mapping, Sequence
from dataclasses import dataclass, fields
from pathlib import Path
from typing import IO


class CommandFailedError(Exception):
    """A measured command ended with another exit status than 0."""


@dataclass(frozen=True)
class Usage:
    """What one run of a command took.

    Attributes
    ----------
    seconds : wall-clock time from before the start to after the end of the process.
    cpu : user and system time of all its threads and of the processes it waited for.
    peak : bytes, the largest resident memory of the process (or of one that it waited for).
    fsync : seconds that an ``fsync`` of its output took afterwards, if that was asked for.
    """

    seconds: float
    cpu: float
    peak: float
    fsync: float = 0.0

    @classmethod
    def median(cls, runs: Sequence[Usage]) -> Usage:
        """The median of each figure."""
        names = [field.name for field in fields(cls)]
        return cls(*(statistics.median(getattr(run, name) for run in runs) for name in names))


def run_measured(
    command: Sequence[str], output: Path, environment: Mapping[str, str], fsync: bool = False
) -> Usage:
    """Run the command once; the output is removed before, so that every run starts alike."""
    output.unlink(missing_ok=True)
    os.sync()  # nothing of an earlier run is left to be written
    with tempfile.TemporaryFile() as messages:
        start = time.perf_counter()
        process = subprocess.Popen(command, stdout=messages, stderr=messages, env=environment)
        _, status, used = os.wait4(process.pid, 0)
        seconds = time.perf_counter() - start
        process.returncode = os.waitstatus_to_exitcode(status)
        _require_success(command, process.returncode, messages, output)
    cpu = used.ru_utime + used.ru_stime
    synced = _seconds_to_sync(output) if fsync else 0.0
    return Usage(seconds, cpu, used.ru_maxrss * 1024.0, synced)


def memory_of_children(
    command: Sequence[str], output: Path, environment: Mapping[str, str]
) -> float:
    """Run the command untimed; the peak memory of it and its child processes together.

    0 if it has none: the operating system's own figure for one process is then the exact one.
    Memory that processes share counts once (proportional set size, Linux only).
    """
    output.unlink(missing_ok=True)
    peak = 0.0
    with tempfile.TemporaryFile() as messages:
        process = subprocess.Popen(command, stdout=messages, stderr=messages, env=environment)
        while process.poll() is None:
            family = _with_descendants(process.pid)
            if len(family) > 1:
                peak = max(peak, sum(_proportional_memory(member) for member in family))
            time.sleep(0.005)
        _require_success(command, process.returncode, messages, output)
    return peak


def _require_success(
    command: Sequence[str], status: int, messages: IO[bytes], output: Path
) -> None:
    if status == 0 and output.is_file():
        return
    messages.seek(0)
    said = messages.read().decode(errors="replace").strip()
    why = f"exit status {status}" if status else f"{output.name} was not written"
    raise CommandFailedError(f"{' '.join(command)}\n{why}\n{said}")


def _seconds_to_sync(path: Path) -> float:
    start = time.perf_counter()
    descriptor = os.open(path, os.O_RDWR)
    try:
        os.fsync(descriptor)
    finally:
        os.close(descriptor)
    return time.perf_counter() - start


def _with_descendants(pid: int) -> list[int]:
    family = [pid]
    for member in family:  # grows while it runs
        try:
            for task in Path(f"/proc/{member}/task").iterdir():
                family.extend(int(child) for child in (task / "children").read_text().split())
        except OSError:  # the process ended meanwhile
            continue
    return family


def _proportional_memory(pid: int) -> float:
    try:
        lines = Path(f"/proc/{pid}/smaps_rollup").read_text().splitlines()
    except OSError:  # the process ended meanwhile
        return 0.0
    return sum(float(line.split()[1]) * 1024.0 for line in lines if line.startswith("Pss:"))
