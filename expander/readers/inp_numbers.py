"""Numbers and sets of an .inp file, and what in such a file meshio would get wrong."""

from __future__ import annotations

from collections.abc import Iterator, Sequence
from dataclasses import dataclass, field
from itertools import chain
from pathlib import Path

import numpy as np
from numpy.typing import NDArray

from expander.errors import InputError

# Keywords by which nodes or cells come into being or move that meshio passes over.
_GENERATE = ("NGEN", "NFILL", "NCOPY", "NMAP", "ELGEN", "ELCOPY", "SYSTEM", "INCLUDE")


@dataclass
class Found:
    """What an .inp file says beside meshio's mesh.

    Attributes
    ----------
    nodes : (n,) node numbers in the order of the file.
    cells : (m,) cell numbers in the order of the file; None if they cannot be told.
    cell_sets : sets named where cells are listed; members of each block.
    unclear_sets : names of sets that meshio may have wrong.
    notes : what the user should know.
    """

    nodes: NDArray[np.int64]
    cells: NDArray[np.int64] | None
    cell_sets: dict[str, list[NDArray[np.generic]]] = field(default_factory=dict)
    unclear_sets: list[str] = field(default_factory=list)
    notes: list[str] = field(default_factory=list)


def _sections(path: Path) -> Iterator[tuple[str, dict[str, str], list[str]]]:
    """Keyword, parameters and data lines of each section."""
    keyword, parameters, lines = "", dict[str, str](), list[str]()
    with path.open(errors="replace") as file:
        for line in file:
            if line.startswith("**"):
                continue
            if not line.startswith("*"):
                if line.strip():
                    lines.append(line)
                continue
            yield keyword, parameters, lines
            words = line[1:].split(",")
            pairs = [word.partition("=") for word in words[1:]]
            keyword = words[0].strip().upper()
            parameters = {key.strip().upper(): value.strip() for key, _, value in pairs}
            lines = []
    yield keyword, parameters, lines


def refuse(path: Path) -> None:
    """Refuse a file with more than one list of nodes, or with generated or moved nodes."""
    nodes = instances = 0
    for keyword, parameters, lines in _sections(path):
        nodes += keyword == "NODE"
        instances += keyword == "INSTANCE"
        wanted = "Write one flat list of nodes, in global coordinates, and one of each cell type."
        if keyword in _GENERATE or (keyword == "NODE" and parameters.get("SYSTEM", "R") != "R"):
            raise InputError(f"{path}: *{keyword} with these words cannot be read yet", wanted)
        if keyword == "INSTANCE" and lines:
            raise InputError(f"{path}: an *INSTANCE is moved from its part's place", wanted)
        if nodes > 1 or instances > 1:
            raise InputError(f"{path}: the file has several lists of nodes", wanted)


def numbers(path: Path, widths: Sequence[int]) -> Found:
    """Node and cell numbers of a file that was not refused.

    Parameters
    ----------
    path : the file.
    widths : nodes of a cell in each block of cells, in the order of the file.
    """
    nodes = np.zeros(0, np.int64)
    blocks: list[NDArray[np.int64]] = []
    named: list[str] = []
    sets: list[tuple[str, str]] = []
    for keyword, parameters, lines in _sections(path):
        if keyword == "NODE":
            nodes = np.array([int(line.split(",", 1)[0]) for line in lines], np.int64)
        elif keyword == "ELEMENT":
            words = chain.from_iterable(line.split(",") for line in lines)
            values = np.array([int(word) for word in words if word.strip()], np.int64)
            width = widths[len(blocks)] + 1 if len(blocks) < len(widths) else 1
            blocks.append(values.reshape(-1, width)[:, 0] if len(values) % width == 0 else values)
            named.append(parameters.get("ELSET", ""))
        elif keyword in ("ELSET", "NSET"):
            sets.append((keyword, parameters.get(keyword, "")))
            if not all(word.strip().isdigit() for line in lines for word in line.split(",")[:1]):
                sets.append(sets[-1])  # a set of sets
    found = Found(nodes, np.concatenate(blocks) if len(blocks) == len(widths) and blocks else None)
    found.unclear_sets = sorted(
        {
            name
            for of, name in sets
            if sets.count((of, name)) > 1 or (of == "ELSET" and name in named)
        }
    )
    found.notes = [
        f"The set '{name}' was left out: it is put together from several lists."
        for name in found.unclear_sets
    ]
    for name in dict.fromkeys(named):
        if name and name not in found.unclear_sets:
            found.cell_sets[name] = [
                np.arange(len(block) if of == name else 0)
                for block, of in zip(blocks, named, strict=True)
            ]
    return found
