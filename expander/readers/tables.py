"""Result tables: values by node or cell number, from .csv or .npz, added to a model."""

from __future__ import annotations

from collections.abc import Callable, Mapping
from dataclasses import dataclass, replace
from pathlib import Path

import numpy as np
from numpy.typing import NDArray

from expander.errors import InputError
from expander.model import Model
from expander.readers import table_files
from expander.readers.paths import require_file
from expander.readers.table_files import Table

Array = NDArray[np.generic]

# Names, in lower case, of arrays of the model that hold the numbers of its points and cells.
_NUMBERS = {
    "node": ("node", "node_number", "node_id", "nodeid", "globalnodeids", "globalnodeid",
             "global_ids"),
    "cell": ("cell", "cell_number", "element", "element_number", "element_id",
             "globalelementids", "globalcellids"),
}  # fmt: skip

_FORMATS: Mapping[str, Callable[[Path], Table]] = {
    ".csv": table_files.read_csv,
    ".npz": table_files.read_npz,
}


def add_table(model: Model, path: Path, allow_missing: bool = False) -> Model:
    """The model with the arrays of a result table added.

    Parameters
    ----------
    model : the model; its arrays are kept as they are.
    path : a .csv whose first column is ``node`` or ``cell`` and whose others are numbers,
        or a .npz with an integer array ``node`` or ``cell`` (n,) and arrays (n,) or (n, k).
    allow_missing : rows may be missing; their values become NaN.

    Raises
    ------
    InputError
        If the table is damaged, does not fit the model, or has a name that the model has.
    """
    path = Path(path)
    require_file(path)
    reader = _FORMATS.get(path.suffix.lower())
    if reader is None:
        raise InputError(
            f"{path}: tables of kind '{path.suffix}' cannot be read",
            f"A result table is one of {', '.join(_FORMATS)}.",
        )
    table = reader(path)
    on_points = table.key == "node"
    present = model.point_data if on_points else model.cell_data
    count = model.mesh.point_count if on_points else model.mesh.cell_count
    for name in table.arrays:
        if name in present:
            raise InputError(
                f"{path}: the model {model.source} already has a {table.key} array '{name}'",
                "Rename it in the table.",
            )
    numbering = _numbering(table, present, count)
    place = _places(table, numbering, count)
    note = f"{numbering.note[0].upper()}{numbering.note[1:]} in {path.name}."
    added, notes = _spread(table, place, numbering, count, allow_missing)
    merged = {**present, **added}
    notes = (*model.notes, note, *notes)
    if on_points:
        return replace(model, point_data=merged, notes=notes)
    return replace(model, cell_data=merged, notes=notes)


@dataclass(frozen=True)
class _Numbering:
    """What a number in the table means.

    Attributes
    ----------
    numbers : (n,) the number of each point or cell of the model, in the model's order.
    note : what was assumed, the beginning of a sentence.
    """

    numbers: NDArray[np.int64]
    note: str


def _numbering(table: Table, present: Mapping[str, Array], count: int) -> _Numbering:
    """The model's own numbers if it has any, otherwise counting from 0 or from 1."""
    lower = {name.lower(): name for name in reversed(list(present))}
    for candidate in _NUMBERS[table.key]:
        name = lower.get(candidate, "")
        values = present.get(name)
        if values is None or values.ndim != 1 or values.dtype.kind not in "iu":
            continue
        numbers = values.astype(np.int64)
        if np.diff(np.sort(numbers)).all():  # each number once
            return _Numbering(
                numbers, f"{table.key} numbers are those of the model's array '{name}'"
            )
    first = _first_number(table, count)
    return _Numbering(
        np.arange(first, first + count),
        f"{table.key} numbers are taken as the model's order, counted from {first},",
    )


def _first_number(table: Table, count: int) -> int:
    """0 or 1: what counting starts from, if the numbers can tell."""
    if (table.numbers == 0).any():
        return 0
    if len(table.numbers) >= count or (table.numbers >= count).any():
        return 1
    raise InputError(
        f"{table.path}: {count - len(table.numbers)} of {count} {table.key}s are missing, and "
        f"without the numbers 0 and {count} it cannot be told if counting starts from 0 or 1; "
        f"the first missing one is {_first_missing(table, np.arange(1, count + 1))}",
        f"Give every {table.key} a row, or give the model an array '{table.key}' with the numbers.",
    )


def _first_missing(table: Table, numbers: NDArray[np.int64]) -> int:
    return int(numbers[np.argmin(np.isin(numbers, table.numbers))])


def _places(table: Table, numbering: _Numbering, count: int) -> NDArray[np.int64]:
    """For each row of the table, which point or cell of the model it belongs to."""
    order = np.argsort(numbering.numbers, kind="stable")
    ranked = numbering.numbers[order]
    rank = np.minimum(np.searchsorted(ranked, table.numbers), count - 1)
    stray = ranked[rank] != table.numbers
    if stray.any():
        row = int(np.argmax(stray))
        raise InputError(
            f"{table.where(row)}: {table.key} {table.numbers[row]} is not in the model",
            f"The model's {table.key} numbers are {ranked[0]} to {ranked[-1]}; "
            f"{numbering.note.rstrip(',')}.",
        )
    place: NDArray[np.int64] = order[rank]
    by_place = np.argsort(place, kind="stable")
    twice = np.flatnonzero(np.diff(place[by_place]) == 0)
    if len(twice):
        row, again = (int(by_place[twice[0] + k]) for k in (0, 1))
        raise InputError(
            f"{table.where(again)}: {table.key} {table.numbers[row]} is there twice, "
            f"also in {table.row_name(row)}",
            "Leave one row for each number.",
        )
    return place


def _spread(
    table: Table, place: NDArray[np.int64], numbering: _Numbering, count: int, allow_missing: bool
) -> tuple[dict[str, Array], tuple[str, ...]]:
    """The table's arrays in the model's order, (count,) or (count, k), and notes."""
    missing = count - len(place)
    notes: tuple[str, ...] = ()
    if missing:
        first = _first_missing(table, numbering.numbers)
        told = f"{missing} of {count} {table.key}s have no row in {table.path.name}, first {first}"
        whole = [name for name, values in table.arrays.items() if values.dtype.kind != "f"]
        if not allow_missing:
            raise InputError(
                f"{table.path}: {missing} of {count} {table.key}s have no row; "
                f"the first missing number is {first}",
                "Give every number a row, or allow missing values.",
            )
        if whole:
            raise InputError(
                f"{table.path}: {missing} of {count} {table.key}s have no row, and array "
                f"'{whole[0]}' of whole numbers cannot hold 'no value'",
                "Give every number a row, or store the array as floating-point numbers.",
            )
        notes = (f"{told}; their values are NaN.",)
    arrays: dict[str, Array] = {}
    for name, values in table.arrays.items():
        shape = (count, *values.shape[1:])
        filled = np.full(shape, np.nan, values.dtype) if missing else np.empty(shape, values.dtype)
        filled[place] = values
        arrays[name] = filled
    return arrays, notes
