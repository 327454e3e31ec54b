"""Both sides of fields along a seam as a table of comma-separated values."""

from __future__ import annotations

import csv
import io
from collections.abc import Sequence
from pathlib import Path

import numpy as np
from numpy.typing import NDArray

from expander.checking.along import along, comparable, field_jump
from expander.checking.continuity import Continuity
from expander.checking.jumps import Jump
from expander.checking.seamlist import Seam
from expander.writers.newfiles import NewFiles


def write_csv(
    files: NewFiles,
    path: Path,
    continuity: Continuity,
    seam: Seam,
    fields: str | Sequence[str] | None = None,
    by: str = "auto",
) -> None:
    """A row for each node along the seam, in order; UTF-8, numbers with all their digits.

    Columns: ``row`` (from 0), ``position`` along the seam, ``piece`` (from 0; pieces are not
    joined), ``node`` (of the sector, from 0), its ``x``, ``y``, ``z``, ``copy`` (the number of the
    placement that brings the other side), then for each case and field
    ``CASE: FIELD: own_COMPONENT``, ``copy_COMPONENT`` and ``jump_COMPONENT`` in global directions;
    complex ones as ``..._real`` and ``..._imag``. A jump from or to a value that is not finite
    is ``nan``.

    Parameters
    ----------
    fields : names; all nodal fields that can be compared if None.
    by : the order, see `expander.checking.along.along`.

    Raises
    ------
    InputError
        For an unknown field or order, or a file that cannot be written.
    """
    sector = continuity.sector
    line = along(seam, sector.mesh, sector.group, by)
    shown = line.rows >= 0
    rows = line.rows[shown]
    nodes = seam.nodes[rows]
    columns: dict[str, list[object]] = {
        "row": list(range(len(rows))),
        "position": line.position[shown].tolist(),
        "piece": line.piece[shown].tolist(),
        "node": nodes.tolist(),
        **dict(zip("xyz", sector.mesh.points[nodes].T.tolist(), strict=True)),
        "copy": seam.via[rows].tolist(),
    }
    if isinstance(fields, str):
        fields = [fields]
    names = [f.name for f in comparable(continuity)] if fields is None else fields
    head, body = list(columns), list(columns.values())
    for case in continuity.cases:
        for name in names:
            jump = field_jump(continuity, seam, name, case.case.name)
            sides = {"own": jump.own, "copy": jump.other, "jump": known_difference(jump)}
            double = any(np.iscomplexobj(values) for values in sides.values())
            for word, values in sides.items():
                for k, component in enumerate(jump.components):
                    part = values[rows, k]
                    column = f"{case.case.name}: {name}: {word}_{component}"
                    both = {"_real": part.real, "_imag": part.imag} if double else {"": part}
                    head += [column + end for end in both]
                    body += [numbers.tolist() for numbers in both.values()]
    text = io.StringIO(newline="")
    table = csv.writer(text, lineterminator="\n")
    table.writerow(head)
    table.writerows(zip(*body, strict=True))
    data = text.getvalue().encode("utf-8", "replace")
    write_all(files, path, data)


def write_all(files: NewFiles, path: Path, data: bytes) -> None:
    """All bytes into a new file that appears under its name when it is whole."""
    file = files.open(path, len(data))
    rest = memoryview(data)
    while rest:  # an unbuffered file may take less than it is given
        rest = rest[file.write(rest) :]


def known_difference(jump: Jump) -> NDArray[np.inexact]:
    """(k, c) own minus other; not a number where one of them is not finite."""
    bad = ~(np.isfinite(jump.own) & np.isfinite(jump.other))
    found = jump.difference.astype(np.result_type(jump.difference, np.float32))
    found[bad] = np.nan
    return found
