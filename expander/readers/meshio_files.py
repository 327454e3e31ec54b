"""Every format that VTK's readers do not take, through meshio.

meshio prints, warns and ends the process on a read error; all of that is caught here. What
it says about a file becomes a note or the reason of an error. What it leaves out or mixes up
in some formats is in ``meshio_formats``, the node orders of its cells in ``meshio_cells``.
"""

from __future__ import annotations

import io
import re
import warnings
from collections.abc import Callable, Sequence
from contextlib import redirect_stderr, redirect_stdout
from pathlib import Path
from typing import Any

import numpy as np
from numpy.typing import NDArray

from expander.errors import InputError, SeamfoldError
from expander.model import Model
from expander.readers import assemble, meshio_formats
from expander.readers.meshio_cells import Block, vtk_cells
from expander.readers.meshio_formats import Extra
from expander.readers.meshio_open import impatient

Array = NDArray[np.generic]
# Text that does not say how much of it there is.
_UNCOUNTED = (".inp", ".obj", ".dato", ".post")


def _registry() -> tuple[dict[str, list[str]], dict[str, Any]]:
    """meshio's formats by extension, and its readers by format."""
    with warnings.catch_warnings():
        warnings.simplefilter("ignore")
        from meshio import _helpers
    return _helpers.extension_to_filetypes, _helpers.reader_map


def extensions() -> list[str]:
    """Extensions that meshio can read."""
    by_extension, readers = _registry()
    return sorted(e for e, formats in by_extension.items() if any(f in readers for f in formats))


def reads(path: Path) -> bool:
    """Whether meshio knows the extension, which may have two parts, as in ``.vol.gz``."""
    return bool(_formats(path))


def _formats(path: Path) -> list[str]:
    by_extension, readers = _registry()
    suffixes = [suffix.lower() for suffix in path.suffixes[-2:]]
    for extension in ("".join(suffixes), *suffixes[-1:]):
        formats = [f for f in by_extension.get(extension, []) if f in readers]
        if formats:
            return formats
    return []


def read(path: Path) -> Model:
    """The model in a file of one of meshio's formats."""
    formats = _formats(path)
    out, err = io.StringIO(), io.StringIO()
    try:
        with redirect_stdout(out), redirect_stderr(err), warnings.catch_warnings():
            warnings.simplefilter("ignore")
            meshio_formats.refuse_early(path, formats)
            with impatient():
                mesh = meshio_formats.read(path, formats)
            printed = out.getvalue() + err.getvalue()
            return _model(path, mesh, meshio_formats.extra(path, formats, mesh, printed), printed)
    except SeamfoldError:
        raise
    except ModuleNotFoundError as missing:
        raise InputError(
            f"{path}: reading this format needs the Python package '{missing.name}', "
            "which is not installed",
            f"Install it (pip install {missing.name}), or write the results in another format.",
        ) from None
    except (Exception, SystemExit) as problem:
        raise InputError(
            f"{path} cannot be read as {' or '.join(formats)}: {_reason(problem, out, err)}",
            "Check that the extension fits the contents; if it does, write the file again.",
        ) from None


def _model(path: Path, mesh: Any, extra: Extra, printed: str) -> Model:
    """The model of a mesh that meshio has read."""
    notes = [*extra.notes, *_warnings(printed)]
    if path.suffix.lower() in _UNCOUNTED and not path.read_bytes()[-1:].isspace():
        notes.append("The file ends without a line end: if it was cut short, something is missing.")
    points = _points(path, mesh.points, notes)
    cells = vtk_cells(path, points, [Block(b.type, b.data) for b in mesh.cells], notes)
    checked = assemble.checked_mesh(path, points, *cells)
    sizes = [len(block) for block in mesh.cells]

    point_arrays = _numbers(path, "point", mesh.point_data, extra.left_out, notes)
    joined = {
        name: _joined(path, name, parts, sizes)
        for name, parts in mesh.cell_data.items()
        if name not in extra.left_out
    }
    cell_arrays = _numbers(path, "cell", joined, (), notes)
    point_arrays |= extra.point_arrays
    cell_arrays |= extra.cell_arrays
    for name, members in mesh.point_sets.items():
        if name not in extra.left_out:
            _add_set(point_arrays, "point", name, [members], [checked.point_count], notes)
    for name, parts in {**mesh.cell_sets, **extra.cell_sets}.items():
        if name not in extra.left_out:
            _add_set(cell_arrays, "cell", name, parts, sizes, notes)
    return assemble.model(path, checked, point_arrays.items(), cell_arrays.items(), notes)


def _reason(problem: BaseException, out: io.StringIO, err: io.StringIO) -> str:
    """What meshio said before it gave up, in one line."""
    said = "" if isinstance(problem, SystemExit) else str(problem)
    said = said or " ".join(out.getvalue().split()) or " ".join(err.getvalue().split())
    line = said.strip().splitlines()[0] if said.strip() else "it does not say why"
    known = isinstance(problem, SystemExit) or type(problem).__name__ in ("ReadError", "OSError")
    return line[:200] if known else f"{line[:200]} ({type(problem).__name__})"


def _warnings(printed: str) -> list[str]:
    """The sentences that meshio printed."""
    text = " ".join(printed.split())
    found = re.split(r"(?:Warning|Error|Info):", text)[1:]
    return [sentence.strip() for sentence in found if sentence.strip()]


def _points(path: Path, values: Any, notes: list[str]) -> NDArray[Any]:
    """Coordinates (n, 3), with z = 0 for a plane mesh."""
    points = np.asarray(values)
    if points.dtype.kind not in "fiu":
        raise InputError(f"{path}: the points are not numbers", assemble.AGAIN)
    if points.ndim == 2 and points.shape[1] == 2:
        notes.append("The points have two coordinates; the third was taken as 0.")
        points = np.column_stack([points, np.zeros(len(points), points.dtype)])
    if points.dtype.kind != "f" or points.dtype.itemsize not in (4, 8):
        points = points.astype(np.float64)
    return np.ascontiguousarray(points, points.dtype.newbyteorder("="))


def _joined(path: Path, name: str, parts: Sequence[Any], sizes: Sequence[int]) -> Array:
    """A cell array of all blocks, one after the other."""
    arrays = [None if part is None else np.ma.asanyarray(part) for part in parts]
    whole = len(arrays) == len(sizes) and all(
        a is not None and a.ndim > 0 and len(a) == size
        for a, size in zip(arrays, sizes, strict=False)
    )
    if not whole or len({a.shape[1:] for a in arrays if a is not None and len(a)}) > 1:
        raise InputError(
            f"{path}: cell array '{name}' is not there for every kind of cell in the same form",
            "Write it for all cells, or leave it out.",
        )
    filled = [a for a in arrays if a is not None and len(a)]
    concatenate: Callable[[Sequence[Any]], Array] = np.ma.concatenate  # numpy has no types for it
    return concatenate(filled) if filled else np.zeros(0)


def _numbers(
    path: Path, place: str, arrays: Any, left_out: Sequence[str], notes: list[str]
) -> dict[str, Array]:
    """The numeric arrays, in this machine's byte order; notes on the others."""
    found: dict[str, Array] = {}
    for name, values in arrays.items():
        masked = np.ma.asanyarray(values)
        if name in left_out:
            continue
        if masked.dtype.kind == "b":
            masked = masked.astype(np.uint8)
        if masked.dtype.kind not in "fiu":
            notes.append(f"The {place} array '{name}' does not hold real numbers and was left out.")
            continue
        if np.ma.is_masked(masked):
            if masked.dtype.kind != "f":
                raise InputError(
                    f"{path}: {place} array '{name}' has missing whole numbers",
                    "Write a number everywhere, or leave the array out.",
                )
            notes.append(f"Missing values of the {place} array '{name}' are NaN.")
            masked = masked.filled(np.nan)
        if masked.dtype.kind == "f" and masked.dtype.itemsize not in (4, 8):
            masked = masked.astype(np.float64)
        plain = np.ascontiguousarray(np.ma.getdata(masked))
        found[str(name)] = plain.astype(plain.dtype.newbyteorder("="), copy=False)
    return found


def _add_set(
    arrays: dict[str, Array],
    place: str,
    name: str,
    parts: Sequence[Any],
    sizes: Sequence[int],
    notes: list[str],
) -> None:
    """A named set as an array of labels: 1 for a member, 0 for the others."""
    labels = [np.zeros(size, np.int8) for size in sizes]
    if len(parts) > len(sizes):
        notes.append(f"The {place} set '{name}' was left out: its members are not clear.")
        return
    for part, label in zip(parts, labels, strict=False):
        members = np.zeros(0, int) if part is None else _members(part)
        if members is None or (
            len(members) and not 0 <= members.min() <= members.max() < len(label)
        ):
            notes.append(f"The {place} set '{name}' was left out: its members are not clear.")
            return
        label[members] = 1
    if name in arrays:
        notes.append(f"The {place} set '{name}' became the array '{name} (set)'.")
        name = f"{name} (set)"
    arrays[name] = np.concatenate(labels)


def _members(part: Any) -> NDArray[np.int64] | None:
    try:
        members = np.asarray(part)
        if members.size == 0:
            return np.zeros(0, np.int64)
        return (
            members.astype(np.int64) if members.ndim == 1 and members.dtype.kind in "iu" else None
        )
    except ValueError:  # ragged
        return None
