"""Node and cell numbers of a .msh file, and which numbers its values belong to.

meshio takes values in the order of the file, whatever numbers stand beside them.
"""

from __future__ import annotations

import re
from collections.abc import Sequence
from dataclasses import dataclass, field
from pathlib import Path

import numpy as np
from numpy.typing import NDArray

Numbers = NDArray[np.int64]


@dataclass
class Found:
    """Numbers in the order of the file; None where they cannot be told.

    Attributes
    ----------
    nodes, cells : numbers of all nodes and all cells.
    node_data, cell_data : for each array of values, the numbers they belong to.
    repeated : the name of an array that is there more than once.
    """

    nodes: Numbers | None = None
    cells: Numbers | None = None
    node_data: dict[str, Numbers] = field(default_factory=dict)
    cell_data: dict[str, Numbers] = field(default_factory=dict)
    repeated: str = ""


def numbers(path: Path, widths: Sequence[int]) -> Found:
    """The numbers of a file that meshio could read.

    Parameters
    ----------
    path : the file.
    widths : nodes of a cell in each block of cells, in the order of the file.
    """
    data = path.read_bytes()
    found = Found()
    head = re.match(rb"\s*\$MeshFormat\s+(\S+)\s+(\d)\s+(\d)", data)
    if not head:
        return found
    version, binary = head[1].decode(), head[2] == b"1"
    try:
        found.nodes = _nodes(_section(data, b"Nodes"), version, binary)
        found.cells = _cells(_section(data, b"Elements"), version, binary, widths)
    except (ValueError, IndexError):
        pass  # the variant is not known here: the numbers cannot be told
    for kind, listed in ((b"NodeData", found.node_data), (b"ElementData", found.cell_data)):
        for match in re.finditer(rb"\$" + kind + rb"\s*\n", data):
            name, keys = _values(data[match.end() :], binary)
            if name in listed:
                found.repeated = name
            listed[name] = keys
    return found


def _section(data: bytes, name: bytes) -> bytes:
    begin = data.index(b"$" + name) + len(name) + 1
    begin = data.index(b"\n", begin) + 1
    return data[begin : data.rindex(b"$End" + name)]


def _nodes(section: bytes, version: str, binary: bool) -> Numbers | None:
    if version.startswith("2"):
        if binary:
            count, _, rest = section.partition(b"\n")
            kind = np.dtype([("number", "i4"), ("place", "f8", 3)])
            return np.frombuffer(rest, kind, int(count))["number"].astype(np.int64)
        words = np.array(section.split(), dtype=np.float64)
        return words[1:].reshape(-1, 4)[:, 0].astype(np.int64)
    if version != "4.1":
        return None
    stream = _Stream(section, binary)
    found = []
    for _ in range(stream.sizes(4)[0]):
        stream.integers(3)
        count = stream.sizes(1)[0]
        found.append(stream.sizes(count))
        stream.skip_reals(3 * count)
    return np.concatenate(found)


def _cells(section: bytes, version: str, binary: bool, widths: Sequence[int]) -> Numbers | None:
    if version.startswith("2"):
        if binary:
            return None
        lines = section.strip().splitlines()[1:]
        return np.array([int(line.split(None, 1)[0]) for line in lines], np.int64)
    if version != "4.1":
        return None
    stream = _Stream(section, binary)
    found = []
    for _, width in zip(range(stream.sizes(4)[0]), widths, strict=True):
        stream.integers(3)
        count = stream.sizes(1)[0]
        found.append(stream.sizes(count * (width + 1)).reshape(count, width + 1)[:, 0])
    return np.concatenate(found)


class _Stream:
    """Numbers of a section of version 4.1, as text or bytes."""

    def __init__(self, section: bytes, binary: bool) -> None:
        self.words = np.zeros(0) if binary else np.array(section.split(), np.float64)
        self.data = section if binary else b""
        self.binary = binary
        self.place = 0

    def _take(self, count: int, kind: str) -> NDArray[np.generic]:
        if not self.binary:
            taken = self.words[self.place : self.place + count]
            self.place += count
        else:
            taken = np.frombuffer(self.data, kind, count, self.place)
            self.place += taken.nbytes
        if len(taken) != count:
            raise ValueError("the section is cut short")
        return taken

    def sizes(self, count: int) -> Numbers:
        return self._take(int(count), "u8").astype(np.int64)

    def integers(self, count: int) -> Numbers:
        return self._take(count, "i4").astype(np.int64)

    def skip_reals(self, count: int) -> None:
        self._take(int(count), "f8")


def _values(data: bytes, binary: bool) -> tuple[str, Numbers]:
    """Name of an array of values, and the numbers that its values belong to."""
    lines = data[:4096].split(b"\n")
    texts = int(lines[0])
    name = lines[1].decode(errors="replace").strip().replace('"', "")
    reals = int(lines[1 + texts])
    whole = 2 + texts + reals
    components, count = (int(lines[whole + k]) for k in (2, 3))
    begin = sum(len(line) + 1 for line in lines[: whole + 1 + int(lines[whole])])
    if binary:
        kind = np.dtype([("number", "i4"), ("value", "f8", components)])
        return name, np.frombuffer(data, kind, count, begin)["number"].astype(np.int64)
    words = data[begin : data.index(b"$End", begin)].split()
    values = np.array(words, dtype=np.float64).reshape(count, components + 1)
    return name, values[:, 0].astype(np.int64)
