"""The two kinds of result table as files: .csv and .npz."""

from __future__ import annotations

import csv
import math
import warnings
import zipfile
import zlib
from collections.abc import Callable, Iterator, Mapping
from dataclasses import dataclass
from pathlib import Path

import numpy as np
from numpy.lib import format as npy
from numpy.typing import NDArray

from expander.errors import InputError

Array = NDArray[np.generic]
_KEYS = ("node", "cell")
_KEY_REMEDY = "Call the first column 'node' or 'cell' and separate columns by commas."
_EXACT = 2**53  # whole numbers beyond it are not all floating-point numbers


@dataclass(frozen=True)
class Table:
    """A result table as its file has it.

    Attributes
    ----------
    path : the file.
    key : "node" or "cell": what the numbers belong to.
    numbers : (r,) the number in each row.
    arrays : values by name, (r,) or (r, k).
    row_name : how a row is called in a message, from its index.
    """

    path: Path
    key: str
    numbers: NDArray[np.int64]
    arrays: Mapping[str, Array]
    row_name: Callable[[int], str]

    def where(self, row: int) -> str:
        """The file and the row, for a message."""
        return f"{self.path}, {self.row_name(row)}"


def read_csv(path: Path) -> Table:
    """A table of text: names in the first line, then one row of numbers per node or cell."""
    try:
        with path.open(encoding="utf-8-sig", newline="") as file:
            names = [name.strip() for name in next(csv.reader(file), [])]
        _check_names(path, names)
        values = _numbers(path, names)
    except UnicodeDecodeError as problem:
        raise InputError(
            f"{path} is no UTF-8 text: {problem.reason}", "Save it as UTF-8."
        ) from None
    except csv.Error as problem:
        raise InputError(f"{path} is no table of text: {problem}", _KEY_REMEDY) from None
    keys = values[:, 0]
    wrong = ~(np.abs(keys) < _EXACT) | (keys != np.floor(keys))
    if wrong.any():
        row = int(np.argmax(wrong))
        raise InputError(
            f"{path}, {_line_name(path, row)}: {names[0]} number {keys[row]} is no whole number",
            "Number nodes and cells by whole numbers.",
        )
    columns = {name: values[:, i].copy() for i, name in enumerate(names) if i}
    return Table(
        path, names[0].lower(), keys.astype(np.int64), columns, lambda row: _line_name(path, row)
    )


def _check_names(path: Path, names: list[str]) -> None:
    if not names or names[0].lower() not in _KEYS:
        raise InputError(
            f"{path}: the first column is called '{names[0][:60] if names else ''}'", _KEY_REMEDY
        )
    if len(names) == 1:
        raise InputError(f"{path} has no column beside '{names[0]}'", "Add columns of values.")
    for index, name in enumerate(names[1:], start=1):
        if not name:
            raise InputError(f"{path}: column {index + 1} has no name", "Name it in line 1.")
        if name in names[:index]:
            raise InputError(f"{path}: two columns are called '{name}'", "Rename one of them.")
        if name.lower() in _KEYS:
            raise InputError(
                f"{path} has a column '{names[0]}' and a column '{name}'",
                "Write one table for nodes and another for cells.",
            )


def _numbers(path: Path, names: list[str]) -> NDArray[np.float64]:
    """All rows, (r, columns); a row that is not all numbers is refused by its line."""
    try:
        with warnings.catch_warnings():
            warnings.simplefilter("ignore")  # that there are no rows is said below
            values = np.loadtxt(
                path, delimiter=",", skiprows=1, comments=None, quotechar='"', ndmin=2,
                encoding="utf-8-sig",
            )  # fmt: skip
    except ValueError as problem:
        if isinstance(problem, UnicodeDecodeError):
            raise
        _name_bad_line(path, names)
        raise InputError(f"{path}: {problem}", "Write one number per column.") from None
    if values.size == 0:
        raise InputError(f"{path} has no rows below its first line", "Write the table again.")
    if values.shape[1] != len(names):
        _name_bad_line(path, names)
    return values


def _rows(path: Path) -> Iterator[tuple[int, list[str]]]:
    """Line number and cells of each row of numbers."""
    with path.open(encoding="utf-8-sig", newline="") as file:
        reader = csv.reader(file)
        next(reader, None)
        for row in reader:
            if row:
                yield reader.line_num, row


def _line_name(path: Path, row: int) -> str:
    for index, (line, _) in enumerate(_rows(path)):
        if index == row:
            return f"line {line}"
    return f"row {row + 1}"


def _name_bad_line(path: Path, names: list[str]) -> None:
    """Refuse the first row that has another number of columns or something else than numbers."""
    for line, row in _rows(path):
        if len(row) != len(names):
            raise InputError(
                f"{path}, line {line}: {len(row)} columns, but line 1 names {len(names)}",
                "Give every row one number per column.",
            )
        for name, text in zip(names, row, strict=True):
            try:
                float(text)
            except ValueError:
                raise InputError(
                    f"{path}, line {line}, column '{name}': '{text[:60]}' is no number",
                    "Write a number with a decimal point; 'nan' where there is none.",
                ) from None


def read_npz(path: Path) -> Table:
    """Arrays stored by ``numpy.savez``: ``node`` or ``cell`` and values along it."""
    try:
        with zipfile.ZipFile(path) as archive:
            arrays = dict(_stored(path, archive))
    except (zipfile.BadZipFile, zlib.error, EOFError, OSError, RuntimeError) as problem:
        raise InputError(
            f"{path} is no complete .npz file: {problem}", "Write it with numpy.savez."
        ) from None
    keys = [name for name in arrays if name.lower() in _KEYS]
    if len(keys) != 1:
        raise InputError(
            f"{path} has {'both' if keys else 'neither'} 'node' {'and' if keys else 'nor'} 'cell'",
            "Store one integer array, 'node' or 'cell', with the numbers.",
        )
    numbers = arrays.pop(keys[0])
    if numbers.ndim != 1 or numbers.dtype.kind not in "iu" or len(numbers) == 0:
        raise InputError(
            f"{path}: '{keys[0]}' has number type {numbers.dtype} and shape {numbers.shape}",
            "Store whole numbers in one dimension.",
        )
    if not arrays:
        raise InputError(f"{path} has no array beside '{keys[0]}'", "Store arrays of values.")
    for name, values in arrays.items():
        if values.ndim not in (1, 2) or len(values) != len(numbers):
            raise InputError(
                f"{path}: array '{name}' has shape {values.shape} for {len(numbers)} numbers",
                f"Store it as ({len(numbers)},) or ({len(numbers)}, k).",
            )
        if values.ndim == 2 and values.shape[1] == 1:
            arrays[name] = values[:, 0]
        if values.ndim == 2 and values.shape[1] == 0:
            raise InputError(f"{path}: array '{name}' has no components", "Leave it out.")
    return Table(
        path, keys[0].lower(), numbers.astype(np.int64), arrays, lambda row: f"row {row + 1}"
    )


def _stored(path: Path, archive: zipfile.ZipFile) -> Iterator[tuple[str, Array]]:
    """Names and values in the archive; sizes are compared before anything is allocated."""
    for member in archive.infolist():
        name = member.filename.removesuffix(".npy")
        with archive.open(member) as file:
            try:
                version = npy.read_magic(file)
                head = npy.read_array_header_1_0 if version == (1, 0) else npy.read_array_header_2_0
                shape, column_order, kind = head(file)
            except Exception:  # numpy's parser of the header fails in many ways
                raise InputError(
                    f"{path}: '{name}' is no array of numpy", "Write the table with numpy.savez."
                ) from None
            if kind.kind not in "biuf":
                raise InputError(
                    f"{path}: array '{name}' has type {kind}, which is no real number",
                    "Store numbers; a complex array as two, 'X_real' and 'X_imag'.",
                )
            size = math.prod(shape) * kind.itemsize
            # deflated data are at best about a thousand times smaller
            if (
                min(shape, default=1) < 0
                or size > member.file_size
                or member.file_size > 1100 * member.compress_size + 1024
            ):
                raise InputError(
                    f"{path}: array '{name}' of shape {shape} is not all there", "Write it again."
                )
            data = file.read(size)
            if len(data) != size:
                raise InputError(f"{path}: array '{name}' is cut short", "Write it again.")
        values: Array = np.frombuffer(data, kind).reshape(shape, order="F" if column_order else "C")
        yield name, values.astype(_kept(kind), order="C")


def _kept(kind: np.dtype[np.generic]) -> np.dtype[np.generic]:
    """The number type to keep: that of the file, in this machine's byte order."""
    if kind.kind == "b":
        return np.dtype(np.uint8)
    if kind.kind == "f" and kind.itemsize not in (4, 8):
        return np.dtype(np.float32 if kind.itemsize < 4 else np.float64)
    return kind.newbyteorder("=")
