"""The arrays of an XML file of VTK, where they are and how many values they hold.

Values may be text, or bytes; bytes may be in base64 and may be compressed in blocks. Only
what is asked for is read, and no place or size in the file is believed before it is checked.
"""

from __future__ import annotations

import base64
import binascii
import re
from dataclasses import dataclass, field
from typing import BinaryIO

import numpy as np

from expander.readers.text_numbers import count_words
from expander.readers.vtk_declared import Bad

# bytes of one value, by the name of the type in the file
BYTES = {f"{kind}{8 * n}": n for kind in ("Int", "UInt") for n in (1, 2, 4, 8)}
BYTES |= {"Float32": 4, "Float64": 8}
# compressor (the name of its VTK class) -> how much smaller its blocks can be at best
_COMPRESSORS = {
    "vtkZLibDataCompressor": 1100,
    "vtkLZ4DataCompressor": 260,
    "vtkLZMADataCompressor": 20000,
}


@dataclass
class Array:
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
        return self.attributes.get("format", "ascii")

    def __str__(self) -> str:
        return f"array '{self.name}' of {self.section}"


@dataclass
class Header:
    """The declarations in the XML part."""

    kind: str
    root: dict[str, str] = field(default_factory=dict)
    dataset: dict[str, str] = field(default_factory=dict)
    pieces: list[dict[str, str]] = field(default_factory=list)
    arrays: list[Array] = field(default_factory=list)
    appended_encoding: str = ""
    appended_start: int = 0


def whole_number(attributes: dict[str, str], key: str, default: int | None = None) -> int:
    """A count among attributes: a whole number that is not negative."""
    text = attributes.get(key)
    if text is None and default is not None:
        return default
    if text is None or not re.fullmatch(r"\s*[0-9]{1,15}\s*", text):
        raise Bad(f"{key} is '{text}', not a count")
    return int(text)


class Store:
    """Access to the values of arrays in every encoding."""

    def __init__(self, file: BinaryIO, header: Header) -> None:
        self.file = file
        self.size = file.seek(0, 2)
        order = header.root.get("byte_order", "LittleEndian")
        if order not in ("LittleEndian", "BigEndian"):
            raise Bad(f"byte_order is '{order}', not LittleEndian or BigEndian")
        self.endian = "<" if order == "LittleEndian" else ">"
        kinds = {"UInt32": "u4", "UInt64": "u8"}
        kind = header.root.get("header_type", "UInt32")
        if kind not in kinds:
            raise Bad(f"header_type is '{kind}', not UInt32 or UInt64")
        self.word = np.dtype(self.endian + kinds[kind])
        self.compressor = header.root.get("compressor", "")
        if self.compressor and self.compressor not in _COMPRESSORS:
            raise Bad(f"the compressor '{self.compressor}' is unknown")
        self.encoding = header.appended_encoding
        self.appended = self._first_appended(header) if self.encoding else -1

    def _first_appended(self, header: Header) -> int:
        if self.encoding not in ("raw", "base64"):
            raise Bad(f"the appended data have encoding '{self.encoding}'")
        self.file.seek(header.appended_start)
        found = re.match(rb"<[^>]*>\s*_", self.file.read(4096))
        if not found:
            raise Bad("the appended data do not begin with an underscore")
        return header.appended_start + found.end()

    def _place(self, array: Array) -> tuple[int, int, bool]:
        """Where the array's bytes begin, where they end at the latest, and if in base64."""
        if array.format == "appended":
            start = self.appended + whole_number(array.attributes, "offset")
            if self.appended < 0 or start > self.size:
                raise Bad(f"{array} begins beyond the end of the file")
            return start, self.size, self.encoding == "base64"
        self.file.seek(array.start)
        tag = re.match(rb"""<(?:[^>"']|"[^"]*"|'[^']*')*>\s*""", self.file.read(65536))
        if not tag:
            raise Bad(f"{array} has too long a declaration")
        return array.start + tag.end(), array.stop, array.format == "binary"

    def _bytes(self, array: Array, skip: int, begin: int, end: int) -> bytes:
        """Decoded bytes begin..end of the stream that starts ``skip`` bytes into the array."""
        start, stop, coded = self._place(array)
        start += skip
        first, last = (begin // 3 * 4, -(-end // 3) * 4) if coded else (begin, end)
        if end < begin or start + last > stop:
            raise Bad(f"{array} goes beyond the end of its data: the file is cut short")
        self.file.seek(start + first)
        data = self.file.read(last - first)
        if not coded:
            return data
        try:
            data = base64.b64decode(data, validate=True)
        except binascii.Error:
            raise Bad(f"{array} is not in base64") from None
        return data[begin - begin // 3 * 3 :][: end - begin]

    def _words(self, array: Array, count: int) -> list[int]:
        data = self._bytes(array, 0, 0, count * self.word.itemsize)
        if len(data) < count * self.word.itemsize:
            raise Bad(f"{array} goes beyond the end of its data: the file is cut short")
        return [int(word) for word in np.frombuffer(data, self.word)]

    def _blocks(self, array: Array) -> tuple[int, list[tuple[int, int, int]]]:
        """Bytes before the first block; of each block its begin, end and unpacked size."""
        if not self.compressor:
            (size,) = self._words(array, 1)
            word = self.word.itemsize
            self._bytes(array, 0, word + size - min(size, 1), word + size)
            return 0, [(word, word + size, size)]
        number, full, part = self._words(array, 3) if self._words(array, 1)[0] else (0, 0, 0)
        if number > self.size // self.word.itemsize or (number and not part <= full < 1 << 40):
            raise Bad(f"{array} has {number} compressed blocks of {full} bytes")
        if number and full == 0:
            raise Bad(f"{array} has compressed blocks of no size")
        packed = self._words(array, 3 + number)[3:]
        head = (3 + number) * self.word.itemsize
        _, _, coded = self._place(array)
        skip = -(-head // 3) * 4 if coded else head
        blocks, begin = [], 0
        for index, size in enumerate(packed):
            unpacked = part if part and index == number - 1 else full
            if unpacked > _COMPRESSORS[self.compressor] * size + 1024:
                raise Bad(f"{array} has a compressed block of impossible size")
            blocks.append((begin, begin + size, unpacked))
            begin += size
        self._bytes(array, skip, begin - min(begin, 1), begin)
        return skip, blocks

    def count(self, array: Array) -> int:
        """How many values the array holds; bytes, if it is one of bits or texts."""
        if array.format == "ascii":
            start, stop, _ = self._place(array)
            return count_words(self.file, start, stop)
        _, blocks = self._blocks(array)
        size, width = sum(unpacked for _, _, unpacked in blocks), BYTES.get(array.type, 1)
        if size % width:
            raise Bad(f"{array} ends within a value")
        return size // width

    def _unpacked(self, array: Array, skip: int, block: tuple[int, int, int]) -> bytes:
        data = self._bytes(array, skip, block[0], block[1])
        return data if not self.compressor else _unpack(self.compressor, data, block[2])

    def whole(self, array: Array) -> bytes:
        """All bytes of a small array."""
        if array.format != "ascii":
            skip, blocks = self._blocks(array)
            return b"".join(self._unpacked(array, skip, block) for block in blocks)
        start, stop, _ = self._place(array)
        self.file.seek(start)
        words = self.file.read(stop - start).split()
        return bytes(min(int(w), 255) if w.isdigit() else 255 for w in words)

    def last(self, array: Array) -> int:
        """The last value of an array of whole numbers that is not empty."""
        if array.format == "ascii":
            start, stop, _ = self._place(array)
            begin = max(start, stop - 4096)
            self.file.seek(begin)
            words = self.file.read(stop - begin).split()
            return int(words[-1]) if words and words[-1].isdigit() else -1
        if array.type not in BYTES or array.type.startswith("Float"):
            raise Bad(f"{array} has number type '{array.type}'")
        skip, blocks = self._blocks(array)
        width = BYTES[array.type]
        if self.compressor:
            data = self._unpacked(array, skip, blocks[-1])[-width:]
        else:
            data = self._bytes(array, 0, blocks[0][1] - width, blocks[0][1])
        if len(data) < width:
            raise Bad(f"{array} cannot be unpacked")
        return int.from_bytes(
            data, "little" if self.endian == "<" else "big", signed=array.type[0] == "I"
        )


def _unpack(compressor: str, data: bytes, size: int) -> bytes:
    """One block unpacked by VTK's own class, which VTK loads for reading anyway."""
    from vtkmodules import vtkIOCore

    unpacked = np.zeros(size, np.uint8)
    done = getattr(vtkIOCore, compressor)().Uncompress(data, len(data), unpacked, size)
    if done != size:
        raise Bad("a compressed block cannot be unpacked")
    return unpacked.tobytes()
