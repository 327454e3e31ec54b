"""A VTK unstructured-grid file (.vtu), raw appended, written as a stream.

All sizes are known before the first byte, so every array has its place in the file; each copy's
block is computed and written there, by any thread in any order. Memory is a few blocks, the bytes
do not depend on the order, and the file appears under its name only when it is whole.
Format: docs.vtk.org, VTK XML file formats.
"""

from __future__ import annotations

import os
import sys
from collections.abc import Callable, Iterable, Iterator, Mapping
from concurrent.futures import FIRST_COMPLETED, Future, ThreadPoolExecutor, wait
from pathlib import Path
from xml.sax.saxutils import quoteattr

import numpy as np

from expander.bodyarrays import BodyArray
from expander.writers.newfiles import NewFiles

# Text, or numbers of shape (rows, components).
FieldData = Mapping[str, "list[str] | np.ndarray"]
Advance = Callable[[int], None]

_VTK_TYPES = {
    "int8": "Int8", "uint8": "UInt8", "int16": "Int16", "uint16": "UInt16", "int32": "Int32",
    "uint32": "UInt32", "int64": "Int64", "uint64": "UInt64", "float32": "Float32",
    "float64": "Float64",
}  # fmt: skip
_MOST_WORKERS = 4
_PIECE = 1 << 20  # bytes computed and written at a time; small enough for the cache
_END = b"\n  </AppendedData>\n</VTKFile>\n"


def write_vtu(
    files: NewFiles,
    path: Path,
    arrays: Iterable[BodyArray],
    field_data: FieldData,
    advance: Advance = lambda done: None,
    workers: int | None = None,
) -> int:
    """Write one result of the whole body; returns the size of the file in bytes.

    Parameters
    ----------
    files : the file appears under `path` when these do.
    arrays : as from `images.arrays_of`; the mesh's own first.
    advance : called with the number of bytes written since the last call.
    workers : threads; one for each processor, at most four, if None.
    """
    listed = list(arrays)
    header, starts, size = _layout(listed, field_data)
    descriptor = files.open(path, size).fileno()
    _write_at(descriptor, header, 0)
    for array, start in zip(listed, starts, strict=True):
        _write_at(descriptor, np.uint64(array.nbytes).tobytes(), start)
    _write_at(descriptor, _END, size - len(_END))
    _stream(descriptor, listed, starts, advance, workers)
    return size


def _stream(
    descriptor: int,
    arrays: list[BodyArray],
    starts: list[int],
    advance: Advance,
    workers: int | None,
) -> None:
    """Compute and write all blocks, array after array, with a bounded number in flight."""

    def task(array: BodyArray, pieces: list[tuple[int, int, slice]], at: int) -> int:
        blocks = [np.asarray(array.block(copy, rows)) for copy, _, rows in pieces]
        joined = blocks[0] if len(blocks) == 1 else np.concatenate(blocks)
        data = np.ascontiguousarray(joined, dtype=array.dtype).reshape(-1).view(np.uint8)
        _write_at(descriptor, data.data, at)
        return data.nbytes

    count = workers or min(_MOST_WORKERS, os.cpu_count() or 1)
    with ThreadPoolExecutor(count) as pool:
        running: set[Future[int]] = set()
        try:
            for array, start in zip(arrays, starts, strict=True):
                width = array.width * array.dtype.itemsize
                for batch in _batches(array):
                    if len(running) >= 2 * count:
                        done, running = wait(running, return_when=FIRST_COMPLETED)
                        for future in done:
                            advance(future.result())
                    at = start + 8 + batch[0][1] * width
                    running.add(pool.submit(task, array, batch, at))
                done, running = wait(running)
                for future in done:
                    advance(future.result())
                array.release()
        finally:
            for future in running:
                future.cancel()


def _batches(array: BodyArray) -> Iterator[list[tuple[int, int, slice]]]:
    """Pieces that lie one after the other in the file, small ones together."""
    batch: list[tuple[int, int, slice]] = []
    rows = 0
    for piece in array.pieces(_PIECE):
        batch.append(piece)
        rows += piece[2].stop - piece[2].start
        if rows * array.width * array.dtype.itemsize >= _PIECE // 2:
            yield batch
            batch, rows = [], 0
    if batch:
        yield batch


def _write_at(descriptor: int, data: bytes | memoryview, at: int) -> None:
    view = memoryview(data)
    while len(view):
        written = os.pwrite(descriptor, view, at)
        view, at = view[written:], at + written


def _layout(arrays: list[BodyArray], field_data: FieldData) -> tuple[bytes, list[int], int]:
    """Header, place of each array's length word, and size of the file."""
    offsets, total = [], 0
    for array in arrays:
        offsets.append(total)
        total += 8 + array.nbytes
    byte_order = "LittleEndian" if sys.byteorder == "little" else "BigEndian"
    points = next(a for a in arrays if a.section == "coordinates").rows
    cells = next(a for a in arrays if a.section == "types").rows
    lines = [
        '<?xml version="1.0"?>',
        f'<VTKFile type="UnstructuredGrid" version="1.0" byte_order="{byte_order}" '
        'header_type="UInt64">',
        "  <UnstructuredGrid>",
        "    <FieldData>",
        *_field_data(field_data),
        "    </FieldData>",
        f'    <Piece NumberOfPoints="{points}" NumberOfCells="{cells}">',
    ]
    sections = (
        ("PointData", ("points",)),
        ("CellData", ("cells",)),
        ("Points", ("coordinates",)),
        ("Cells", ("connectivity", "offsets", "types")),
    )
    for tag, members in sections:
        lines.append(f"      <{tag}>")
        for array, offset in zip(arrays, offsets, strict=True):
            if array.section in members:
                lines.append(_array_line(array, offset))
        lines.append(f"      </{tag}>")
    lines += ["    </Piece>", "  </UnstructuredGrid>", '  <AppendedData encoding="raw">']
    header = _bytes("\n".join(lines) + "\n   _")
    starts = [len(header) + offset for offset in offsets]
    return header, starts, len(header) + total + len(_END)


def _array_line(array: BodyArray, offset: int) -> str:
    names = "".join(f" ComponentName{k}={_quoted(name)}" for k, name in enumerate(array.components))
    width = f' NumberOfComponents="{array.width}"'
    return (
        f'        <DataArray type="{_VTK_TYPES[array.dtype.name]}" Name={_quoted(array.name)}'
        f'{width}{names} format="appended" offset="{offset}"/>'
    )


def _bytes(text: str) -> bytes:
    """UTF-8; a file name that is not Unicode keeps a question mark for what cannot be said."""
    return text.encode("utf-8", "replace")


def _quoted(text: str) -> str:
    return quoteattr(text, {"\n": "&#10;", "\t": "&#9;", "\r": "&#13;"})


def _field_data(field_data: FieldData) -> Iterator[str]:
    """Field data in ASCII; text as the codes of its UTF-8 bytes, each entry ended by a zero."""
    for name, value in field_data.items():
        if isinstance(value, np.ndarray):
            table = value.reshape(len(value), -1)
            words = [repr(v) for v in table.ravel().tolist()]
            kind = f'type="{_VTK_TYPES[value.dtype.name]}" NumberOfComponents="{table.shape[1]}"'
            tuples = len(table)
        else:
            words = [str(code) for text in value for code in (*_bytes(text), 0)]
            kind, tuples = 'type="String"', len(value)
        yield (
            f'      <DataArray {kind} Name={_quoted(name)} NumberOfTuples="{tuples}" '
            'format="ascii">'
        )
        for k in range(0, len(words), 24):
            yield "        " + " ".join(words[k : k + 24])
        yield "      </DataArray>"
