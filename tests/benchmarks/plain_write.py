"""How long this machine takes to write as many bytes as a given file holds, and nothing else.

Writes from one buffer of 8 MB, with and without ``fsync``, and prints the median seconds::

    python plain_write.py EXISTING_FILE [--runs 5]

It is the floor under any program that writes the file.
"""

from __future__ import annotations

import argparse
import os
import statistics
import time
from pathlib import Path

BUFFER_BYTES = 8 * 2**20


def seconds_to_write(path: Path, size: int, sync: bool) -> float:
    """Write ``size`` bytes to a new file, remove it, and return the seconds of the writing."""
    buffer = memoryview(os.urandom(BUFFER_BYTES))
    start = time.perf_counter()
    with open(path, "wb", buffering=0) as stream:
        left = size
        while left:
            left -= stream.write(buffer[: min(left, BUFFER_BYTES)])
        if sync:
            os.fsync(stream.fileno())
    seconds = time.perf_counter() - start
    path.unlink()
    return seconds


def plain_write(folder: Path, size: int, runs: int) -> dict[str, float]:
    """Median seconds without and with ``fsync``, the two interleaved."""
    target = folder / "plain_write.bin"
    times: dict[str, list[float]] = {"plain": [], "fsync": []}
    for _ in range(runs):
        for how, measured in times.items():
            os.sync()  # nothing of an earlier run is left to be written
            measured.append(seconds_to_write(target, size, sync=how == "fsync"))
    return {how: statistics.median(measured) for how, measured in times.items()}


def main() -> None:
    """Measure and print."""
    parser = argparse.ArgumentParser(description="Plain write of as many bytes as a file holds.")
    parser.add_argument("file", type=Path, help="an existing file; its size is what counts")
    parser.add_argument("--folder", type=Path, help="where to write; default beside the file")
    parser.add_argument("--runs", type=int, default=5)
    options = parser.parse_args()
    size = options.file.stat().st_size
    seconds = plain_write(options.folder or options.file.resolve().parent, size, options.runs)
    print(f"{size / 1e6:.1f} MB: {seconds['plain']:.3f} s, with fsync {seconds['fsync']:.3f} s")


if __name__ == "__main__":
    main()
