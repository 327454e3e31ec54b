"""What an XML file of VTK promises, compared with what it holds, before VTK reads it.

VTK believes the counts in such a file: a wrong one makes it allocate without limit, end
the program, or quietly return part of an array. Only the XML header and the few bytes
that precede each array are read here, except that text (ascii) numbers have to be counted.
"""

from __future__ import annotations

import base64
import binascii
import math
import re
from collections.abc import Iterator
from dataclasses import dataclass, field
from pathlib import Path
from typing import Any, BinaryIO
from xml.parsers import expat

import numpy as np

from expander.errors import InputError, NotYetError
from expander.readers.assemble import AGAIN
from expander.readers.text_numbers import count_words

# bytes of one value, by the name of the type in the file
_BYTES = {f"{kind}{8 * n}": n for kind in ("Int", "UInt") for n in (1, 2, 4, 8)}
_BYTES |= {"Float32": 4, "Float64": 8}
_OTHER_TYPES = ("String", "Bit")
# compressor -> VTK class, and how much smaller its blocks can be at the very best
_COMPRESSORS = {
    "vtkZLibDataCompressor": 1100,
    "vtkLZ4DataCompressor": 260,
    "vtkLZMADataCompressor": 20000,
}
# Number of tuples of each section's arrays: the attributes of the piece that add up to it.
_POLY = ("NumberOfVerts", "NumberOfLines", "NumberOfPolys", "NumberOfStrips")
_TUPLES = {
    "UnstructuredGrid": {
        "PointData": ("NumberOfPoints",),
        "Points": ("NumberOfPoints",),
        "CellData": ("NumberOfCells",),
        "Cells": ("NumberOfCells",),
    },
    "PolyData": {
        "PointData": ("NumberOfPoints",),
        "Points": ("NumberOfPoints",),
        "CellData": _POLY,
        **{name.removeprefix("NumberOf"): (name,) for name in _POLY},
    },
}
_TOPOLOGY = ("Cells", "Verts", "Lines", "Polys", "Strips")
_CHUNK = 1 << 20


@dataclass
class _Array:
    """One array as declared, and where its values are.

    ``start`` is a place in the file, or for appended values relative to the first of them;
    ``stop`` is where they must end at the latest.
    """

    section: str
    piece: dict[str, str]
    attributes: dict[str, str]
    start: int
    stop: int = 0

    @property
    def name(self) -> str:
        return self.attributes.get("Name", "")

    @property
    def type(self) -> str:
        return self.attributes.get("type", "")

    @property
    def format(self) -> str:
        return self.attributes.get("format", "ascii").lower()

    def __str__(self) -> str:
        return f"array '{self.name}' of {self.section}"


@dataclass
class Header:
    """The declarations of an XML file of VTK.

    Attributes
    ----------
    names : for "PointData" and "CellData" the names of numeric arrays, in order.
    texts : for "PointData" and "CellData" the names of arrays that hold text.
    """

    kind: str
    names: dict[str, list[str]] = field(default_factory=dict)
    texts: dict[str, list[str]] = field(default_factory=dict)
    root: dict[str, str] = field(default_factory=dict)
    dataset: dict[str, str] = field(default_factory=dict)
    pieces: list[dict[str, str]] = field(default_factory=list)
    arrays: list[_Array] = field(default_factory=list)
    appended_encoding: str = ""
    appended_start: int = 0


class _AppendedReached(Exception):  # noqa: N818 - not an error: the XML part has been read
    pass


def check(path: Path, kind: str) -> Header:
    """Declarations of the file, after all that can be checked about them has been.

    Parameters
    ----------
    path : the file.
    kind : the data set it must hold, "UnstructuredGrid" or "PolyData".

    Raises
    ------
    InputError
        If the file is not such a file, or promises what it does not hold.
    """
    with path.open("rb") as file:
        header = _parse(path, file, kind)
        try:
            _check_pieces(header)
            store = _Store(file, header)
            for array in header.arrays:
                _check_array(store, header, array)
            _name_arrays(header)
        except _Bad as bad:
            raise InputError(f"{path}: {bad}", AGAIN) from None
        except NotYetError as later:
            raise NotYetError(f"{path}: {later.found}", later.remedy) from None
    return header


class _Bad(Exception):  # noqa: N818 - becomes an InputError that names the file
    pass


def _parse(path: Path, file: BinaryIO, kind: str) -> Header:
    """Read the XML part; stops where appended binary data begin."""
    header = Header(kind)
    parser = expat.ParserCreate()
    elements: list[str] = []
    reading: list[_Array] = []  # the array whose text is being passed, if any

    def end_of_text() -> None:
        while reading:
            reading.pop().stop = parser.CurrentByteIndex

    def begin(name: str, attributes: dict[str, str]) -> None:
        end_of_text()
        elements.append(name)
        if len(elements) == 1:
            if name != "VTKFile" or attributes.get("type") != kind:
                raise InputError(
                    f"{path}: the file holds {attributes.get('type', name)}, not {kind}",
                    "The extension .vtu is for UnstructuredGrid, .vtp for PolyData.",
                )
            header.root = attributes
        elif name == "AppendedData":
            header.appended_encoding = attributes.get("encoding", "base64")
            header.appended_start = parser.CurrentByteIndex
            raise _AppendedReached
        elif name == "Piece":
            header.pieces.append(attributes)
        elif len(elements) == 2:
            header.dataset = attributes
        elif name in ("DataArray", "Array"):
            piece = header.pieces[-1] if "Piece" in elements else {}
            array = _Array(elements[-2], piece, attributes, parser.CurrentByteIndex)
            header.arrays.append(array)
            reading.append(array)

    def end(name: str) -> None:
        end_of_text()
        elements.pop()

    def refuse(*_: Any) -> None:
        raise InputError(f"{path}: the file defines XML entities", "Write it without a DOCTYPE.")

    parser.StartElementHandler, parser.EndElementHandler = begin, end
    parser.StartDoctypeDeclHandler = refuse
    try:
        while chunk := file.read(_CHUNK):
            parser.Parse(chunk, False)
        parser.Parse(b"", True)
    except _AppendedReached:
        pass
    except (expat.ExpatError, ValueError, LookupError) as problem:
        raise InputError(
            f"{path} is no complete XML file of VTK: {problem}",
            "Check that the extension fits the contents; if it does, write the file again.",
        ) from None
    return header


def _whole(attributes: dict[str, str], key: str, default: int | None = None) -> int:
    """A count among attributes: a whole number that is not negative."""
    text = attributes.get(key)
    if text is None and default is not None:
        return default
    if text is None or not re.fullmatch(r"\s*\d{1,15}\s*", text):
        raise _Bad(f"{key} is '{text}', not a count")
    return int(text)


def _check_pieces(header: Header) -> None:
    if len(header.dataset.get("TimeValues", "").split()) > 1:
        raise NotYetError(
            f"the file holds {len(header.dataset['TimeValues'].split())} steps",
            "The steps of a series come later; write one step per file.",
        )
    declared: dict[str, set[tuple[str, str, str]]] = {}
    for piece in header.pieces:
        for section in ("PointData", "CellData"):
            if sum(_whole(piece, key, 0) for key in _TUPLES[header.kind][section]) == 0:
                continue
            arrays = {
                (a.name, a.type, a.attributes.get("NumberOfComponents", "1"))
                for a in header.arrays
                if a.piece is piece and a.section == section
            }
            differ = declared.setdefault(section, arrays) ^ arrays
            if differ:
                raise _Bad(f"array '{min(differ)[0]}' is not in every piece in the same form")


def _name_arrays(header: Header) -> None:
    """Fill in the names, each once; a name that is there twice is refused."""
    for section in ("PointData", "CellData"):
        header.names[section], header.texts[section] = [], []
        for piece in header.pieces[:1]:
            arrays = [a for a in header.arrays if a.section == section and a.piece is piece]
            for array in arrays:
                known = header.names[section] + header.texts[section]
                if array.name and array.name in known:
                    raise _Bad(f"two arrays of {section} are called '{array.name}'")
                if array.type == "String":
                    header.texts[section].append(array.name)
                else:
                    header.names[section].append(array.name)


def _check_array(store: _Store, header: Header, array: _Array) -> None:
    if array.format not in ("ascii", "binary", "appended"):
        raise _Bad(f"{array} has format '{array.format}'")
    if array.type not in _BYTES and array.type not in _OTHER_TYPES:
        raise _Bad(f"{array} has number type '{array.type}'")
    if array.section in _TOPOLOGY and array.name == "connectivity":
        return  # with its offsets
    components = _whole(array.attributes, "NumberOfComponents", 3 if array.section == "Points" else 1)
    if array.section == "Points" and components != 3:
        raise _Bad(f"the points have {components} coordinates")

    if array.section == "FieldData":
        tuples = _whole(array.attributes, "NumberOfTuples", 0)
    elif array.section in _TUPLES[header.kind]:
        keys = _TUPLES[header.kind][array.section]
        optional = None if header.kind == "UnstructuredGrid" else 0
        tuples = sum(_whole(array.piece, key, optional) for key in keys)
    else:
        raise _Bad(f"{array} has no place in {header.kind}")
    if array.section in _TOPOLOGY and array.name not in ("offsets", "types"):
        if store.count(array):
            raise NotYetError("the mesh has polyhedra", "Cells given by faces come later.")
        return

    values = tuples * max(components, 1)
    if array.type == "String":
        if array.section == "FieldData" and store.whole(array).count(0) != values:
            raise _Bad(f"{array} does not hold {values} texts")
        return
    found = store.count(array)
    expected = math.ceil(values / 8) if array.type == "Bit" and array.format != "ascii" else values
    if found != expected:
        raise _Bad(f"{array} holds {found} values, not {expected}")
    if array.section in _TOPOLOGY and array.name == "offsets":
        _check_connectivity(store, header, array, values)


def _check_connectivity(store: _Store, header: Header, offsets: _Array, cells: int) -> None:
    """The last offset is the number of node numbers: VTK makes room for that many."""
    promised = store.last(offsets) if cells else 0
    for array in header.arrays:
        same = array.piece is offsets.piece and array.section == offsets.section
        if same and array.name == "connectivity" and store.count(array) != promised:
            raise _Bad(
                f"the cells have {store.count(array)} node numbers, "
                f"but their offsets end at {promised}"
            )


class _Store:
    """Access to the values of arrays in every encoding."""

    def __init__(self, file: BinaryIO, header: Header) -> None:
        self.file = file
        self.size = file.seek(0, 2)
        endian = "<" if header.root.get("byte_order", "LittleEndian") == "LittleEndian" else ">"
        self.endian = endian
        kinds = {"UInt32": "u4", "UInt64": "u8"}
        kind = header.root.get("header_type", "UInt32")
        if kind not in kinds:
            raise _Bad(f"header_type is '{kind}', not UInt32 or UInt64")
        self.word = np.dtype(endian + kinds[kind])
        self.compressor = header.root.get("compressor", "")
        if self.compressor and self.compressor not in _COMPRESSORS:
            raise _Bad(f"the compressor '{self.compressor}' is unknown")
        self.encoding = header.appended_encoding
        self.appended = self._first_appended(header) if self.encoding else -1

    def _first_appended(self, header: Header) -> int:
        if self.encoding not in ("raw", "base64"):
            raise _Bad(f"the appended data have encoding '{self.encoding}'")
        self.file.seek(header.appended_start)
        found = re.match(rb"<[^>]*>\s*_", self.file.read(4096))
        if not found:
            raise _Bad("the appended data do not begin with an underscore")
        return header.appended_start + found.end()

    def _place(self, array: _Array) -> tuple[int, int, bool]:
        """Where the array's bytes begin, where they end at the latest, and if in base64."""
        if array.format == "appended":
            start = self.appended + _whole(array.attributes, "offset")
            if self.appended < 0 or start > self.size:
                raise _Bad(f"{array} begins beyond the end of the file")
            return start, self.size, self.encoding == "base64"
        self.file.seek(array.start)
        tag = re.match(rb"""<(?:[^>"']|"[^"]*"|'[^']*')*>\s*""", self.file.read(65536))
        if not tag:
            raise _Bad(f"{array} has too long a declaration")
        return array.start + tag.end(), array.stop, array.format == "binary"

    def _bytes(self, array: _Array, skip: int, begin: int, end: int) -> bytes:
        """Decoded bytes begin..end of the stream that starts ``skip`` bytes into the array."""
        start, stop, coded = self._place(array)
        start += skip
        first, last = (begin // 3 * 4, -(-end // 3) * 4) if coded else (begin, end)
        if end < begin or start + last > stop:
            raise _Bad(f"{array} goes beyond the end of its data: the file is cut short")
        self.file.seek(start + first)
        data = self.file.read(last - first)
        if not coded:
            return data
        try:
            data = base64.b64decode(data, validate=True)
        except binascii.Error:
            raise _Bad(f"{array} is not in base64") from None
        return data[begin - begin // 3 * 3 :][: end - begin]

    def _words(self, array: _Array, count: int) -> list[int]:
        data = self._bytes(array, 0, 0, count * self.word.itemsize)
        if len(data) < count * self.word.itemsize:
            raise _Bad(f"{array} goes beyond the end of its data: the file is cut short")
        return [int(word) for word in np.frombuffer(data, self.word)]

    def _blocks(self, array: _Array) -> tuple[int, list[tuple[int, int, int]]]:
        """Bytes before the first block; of each block its begin, end and unpacked size."""
        if not self.compressor:
            (size,) = self._words(array, 1)
            word = self.word.itemsize
            self._bytes(array, 0, word + size - min(size, 1), word + size)
            return 0, [(word, word + size, size)]
        number, full, part = self._words(array, 3) if self._words(array, 1)[0] else (0, 0, 0)
        if number > self.size // self.word.itemsize:
            raise _Bad(f"{array} has {number} compressed blocks")
        packed = self._words(array, 3 + number)[3:]
        head = (3 + number) * self.word.itemsize
        _, _, coded = self._place(array)
        skip = -(-head // 3) * 4 if coded else head
        blocks, begin = [], 0
        for index, size in enumerate(packed):
            unpacked = part if part and index == number - 1 else full
            if unpacked > _COMPRESSORS[self.compressor] * size + 1024:
                raise _Bad(f"{array} has a compressed block of impossible size")
            blocks.append((begin, begin + size, unpacked))
            begin += size
        self._bytes(array, skip, begin - min(begin, 1), begin)
        return skip, blocks

    def count(self, array: _Array) -> int:
        """How many values the array holds; bytes, if it is one of bits or texts."""
        if array.format == "ascii":
            start, stop, _ = self._place(array)
            return count_words(self.file, start, stop)
        _, blocks = self._blocks(array)
        size, width = sum(unpacked for _, _, unpacked in blocks), _BYTES.get(array.type, 1)
        if size % width:
            raise _Bad(f"{array} ends within a value")
        return size // width

    def _unpacked(self, array: _Array, skip: int, block: tuple[int, int, int]) -> bytes:
        data = self._bytes(array, skip, block[0], block[1])
        return data if not self.compressor else _unpack(self.compressor, data, block[2])

    def _parts(self, array: _Array) -> Iterator[bytes]:
        skip, blocks = self._blocks(array)
        for block in blocks:
            yield self._unpacked(array, skip, block)

    def whole(self, array: _Array) -> bytes:
        """All bytes of a small array."""
        if array.format != "ascii":
            return b"".join(self._parts(array))
        start, stop, _ = self._place(array)
        self.file.seek(start)
        words = self.file.read(stop - start).split()
        return bytes(min(int(w), 255) if w.isdigit() else 255 for w in words)

    def last(self, array: _Array) -> int:
        """The last value of an array of whole numbers that is not empty."""
        if array.format == "ascii":
            start, stop, _ = self._place(array)
            begin = max(start, stop - 4096)
            self.file.seek(begin)
            words = self.file.read(stop - begin).split()
            return int(words[-1]) if words and words[-1].isdigit() else -1
        if array.type not in _BYTES or array.type.startswith("Float"):
            raise _Bad(f"{array} has number type '{array.type}'")
        skip, blocks = self._blocks(array)
        width = _BYTES[array.type]
        if self.compressor:
            data = self._unpacked(array, skip, blocks[-1])[-width:]
        else:
            data = self._bytes(array, 0, blocks[0][1] - width, blocks[0][1])
        if len(data) < width:
            raise _Bad(f"{array} cannot be unpacked")
        return int.from_bytes(
            data, "little" if self.endian == "<" else "big", signed=array.type[0] == "I"
        )


def _unpack(compressor: str, data: bytes, size: int) -> bytes:
    """One block unpacked by VTK's own class, which VTK loads for reading anyway."""
    from vtkmodules import vtkIOCore

    unpacked = np.zeros(size, np.uint8)
    done = getattr(vtkIOCore, compressor)().Uncompress(data, len(data), unpacked, size)
    if done != size:
        raise _Bad("a compressed block cannot be unpacked")
    return unpacked.tobytes()
