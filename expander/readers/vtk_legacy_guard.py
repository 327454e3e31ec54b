"""What a legacy file of VTK promises, compared with what it holds, before VTK reads it.

VTK's reader of these files goes on after an error: it drops the arrays it did not reach,
allocates whatever a count asks for, and follows cell sizes out of its buffers. The file
is therefore walked through once, from section to section, without reading the values
(text values have to be counted; cells of the older layout are followed).
"""

from __future__ import annotations

import re
from pathlib import Path
from typing import BinaryIO
from urllib.parse import unquote_to_bytes

import numpy as np
from numpy.typing import NDArray

from expander.errors import InputError
from expander.readers.assemble import AGAIN
from expander.readers.text_numbers import skip_words
from expander.readers.vtk_declared import Bad, Declared

# bytes of one value in a binary file; a bit is counted apart
_BYTES = {
    "char": 1, "signed_char": 1, "unsigned_char": 1, "short": 2, "unsigned_short": 2,
    "int": 4, "unsigned_int": 4, "vtkidtype": 4, "long": 8, "unsigned_long": 8,
    "vtktypeint64": 8, "vtktypeuint64": 8, "float": 4, "double": 8,
}  # fmt: skip
_TEXTS = ("string", "utf8_string")
# cell sections of the two kinds of data set
_CELLS = {
    "UNSTRUCTURED_GRID": ("CELLS",),
    "POLYDATA": ("VERTICES", "LINES", "POLYGONS", "TRIANGLE_STRIPS"),
}
# attribute arrays of fixed width: their components
_FIXED = {
    "VECTORS": 3, "NORMALS": 3, "TENSORS": 9, "TENSORS6": 6, "GLOBAL_IDS": 1,
    "PEDIGREE_IDS": 1, "EDGE_FLAGS": 1,
}  # fmt: skip

# how many words follow the first one of a section, on its line
_WORDS = {
    "DATASET": 1, "FIELD": 2, "POINTS": 2, "CELL_TYPES": 1, "POINT_DATA": 1, "CELL_DATA": 1,
    "LOOKUP_TABLE": 2, "SCALARS": 2, "COLOR_SCALARS": 2, "TEXTURE_COORDINATES": 3,
    **dict.fromkeys((*_FIXED, *_CELLS["UNSTRUCTURED_GRID"], *_CELLS["POLYDATA"]), 2),
}  # fmt: skip


def check(path: Path) -> Declared:
    """Walk through the file; what it declares, if it holds all of it.

    Raises
    ------
    InputError
        If the file is not of this format, is of another data set, or is cut short.
    """
    with path.open("rb") as file:
        walker = _Walker(path, file)
        try:
            walker.header()
            while walker.section():
                pass
        except Bad as bad:
            raise InputError(f"{path}: {bad}", AGAIN) from None
        except (ValueError, IndexError, OverflowError):
            raise InputError(
                f"{path}: the line '{walker.latest[:80]}' is not what belongs there", AGAIN
            ) from None
    return walker.declared


class _Walker:
    """A place in the file, moved from section to section."""

    def __init__(self, path: Path, file: BinaryIO) -> None:
        self.path, self.file = path, file
        self.size = file.seek(0, 2)
        self.place = 0
        self.binary = False
        self.offsets_apart = False  # cells as OFFSETS and CONNECTIVITY: from version 5 on
        self.latest = ""
        self.data = ""  # "point" or "cell", once POINT_DATA or CELL_DATA is reached
        self.tuples = 0
        self.components = 0  # of the latest array
        self.declared = Declared("")

    def line(self) -> str:
        """The rest of the line, without blanks around it."""
        self.file.seek(self.place)
        text = self.file.readline(65536)
        self.place = self.file.tell()
        return text.decode("latin-1").strip()

    def words(self, count: int) -> list[str]:
        """The next words, fewer at the end of the file; line ends are blanks like others."""
        found: list[str] = []
        while len(found) < count:
            self.file.seek(self.place)
            chunk = self.file.read(1024)
            word = re.match(rb"\s*(\S*)", chunk)
            if not word or not chunk:
                break
            self.place += word.end()
            if word[1]:
                found.append(word[1].decode("latin-1"))
        self.latest = " ".join(found)
        return found

    def header(self) -> None:
        first = self.line().lower()
        if not first.startswith("# vtk datafile version"):
            raise InputError(
                f"{self.path} is no legacy file of VTK: it does not begin with its first line",
                "Check that the extension fits the contents.",
            )
        version = first.split()[-1]
        self.offsets_apart = version[0].isdigit() and float(version) >= 5
        self.line()  # the title
        encoding = "".join(self.words(1)).upper()
        if encoding not in ("ASCII", "BINARY"):
            raise Bad(f"the third line is '{encoding[:40]}', not ASCII or BINARY")
        self.binary = encoding == "BINARY"

    def section(self) -> bool:
        """Pass one section; False at the end of the file."""
        first = self.words(1)
        if not first:
            self._check_end()
            return False
        key = first[0].upper()
        words = [*first, *self.words(_WORDS.get(key, 0))]
        self.latest = " ".join(words)
        if key == "DATASET":
            self._dataset(words[1].upper())
        elif key == "METADATA":
            self._metadata()
        elif key == "FIELD":
            self._field(_count(words[2]))
        elif not self.declared.kind:
            raise Bad(f"'{key[:40]}' stands before the data set")
        elif key == "POINTS":
            self.components = 3
            self._skip(3 * _count(words[1]), words[2])
        elif key in _CELLS[self.declared.kind]:
            self._cells(key, _count(words[1]), _count(words[2]))
        elif key == "CELL_TYPES":
            self._skip(_count(words[1]), "int")
        elif key in ("POINT_DATA", "CELL_DATA"):
            self.data, self.tuples = key.removesuffix("_DATA").lower(), _count(words[1])
        else:
            self._attribute(key, words)
        return True

    def _metadata(self) -> None:
        """Pass what is said about the latest array, up to a blank line."""
        self.line()
        while line := self.line():
            if line.upper() == "COMPONENT_NAMES":
                for _ in range(self.components):  # a name may be blank
                    self.line()

    def _check_end(self) -> None:
        if not self.declared.kind:
            raise Bad("there is no DATASET in it")
        self.file.seek(self.size - 1)
        if not self.binary and not self.file.read(1).isspace():
            self.declared.notes.append(
                "The file ends without a line end: if it was cut short, its last value is wrong."
            )

    def _dataset(self, kind: str) -> None:
        if kind not in _CELLS:
            raise InputError(
                f"{self.path}: the data set is {kind[:40]}",
                "Write an unstructured grid (UNSTRUCTURED_GRID) or polygonal data (POLYDATA).",
            )
        self.declared.kind = kind

    def _cells(self, key: str, number: int, length: int) -> None:
        if self.offsets_apart:
            for expected, values in (("OFFSETS", number), ("CONNECTIVITY", length)):
                words = self.words(2)
                if words[:1] != [expected]:
                    raise Bad(f"'{self.latest[:40]}' stands where {expected} belongs")
                self._skip(values, words[1])
            return
        start = self._skip(length, "int")
        self.file.seek(start)
        data = self.file.read(self.place - start)
        if self.binary:
            stream = np.frombuffer(data, ">i4").astype(np.int64)
        else:
            stream = np.array(data.split(), dtype=np.int64)
        if _cells_in(stream) != number:
            raise Bad(f"the {key} are not {number} cells in {length} numbers")

    def _attribute(self, key: str, words: list[str]) -> None:
        if not self.data:
            raise Bad(f"'{key[:40]}' stands before POINT_DATA or CELL_DATA")
        if key == "LOOKUP_TABLE":
            self._skip(4 * _count(words[2]), "unsigned_char")
            return
        if key == "SCALARS":
            rest = self.line()
            components, kind = _count(rest) if rest else 1, words[2]
            before = self.place
            if [word.upper() for word in self.words(2)][:1] != ["LOOKUP_TABLE"]:
                self.place = before
        elif key == "COLOR_SCALARS":
            components, kind = _count(words[2]), "unsigned_char"
        elif key == "TEXTURE_COORDINATES":
            components, kind = _count(words[2]), words[3]
        elif key in _FIXED:
            components, kind = _FIXED[key], words[2]
        else:
            raise Bad(f"'{key[:40]}' begins no section of such a file")
        self._declare(words[1], kind)
        self.components = components
        self._skip(components * self.tuples, kind)

    def _field(self, arrays: int) -> None:
        for _ in range(arrays):
            first = self.words(1)
            if first == ["METADATA"]:
                self._metadata()
                first = self.words(1)
            if first == ["NULL_ARRAY"]:
                continue
            name, components, tuples, kind = [*first, *self.words(3)]
            self.latest = f"{name} {components} {tuples} {kind}"
            if self.data:
                if _count(tuples) != self.tuples:
                    raise Bad(f"array '{name}' has {tuples} tuples for {self.tuples} {self.data}s")
                self._declare(name, kind)
            self.components = _count(components)
            start = self._skip(self.components * _count(tuples), kind)
            if not (self.binary or self.data or kind.lower() in _TEXTS):
                self._require_numbers(start, kind.lower())

    def _require_numbers(self, start: int, kind: str) -> None:
        """VTK crashes where a word among the numbers of the file's own field data is none."""
        self.file.seek(start)
        words = self.file.read(self.place - start).split()
        whole = np.uint64 if kind.startswith(("unsigned", "vtktypeu")) else np.int64
        np.array(words, np.float64 if kind in ("float", "double") else whole)

    def _declare(self, name: str, kind: str) -> None:
        plain = unquote_to_bytes(name.encode("latin-1")).decode("utf-8", "replace")
        self.declared.declare(self.data, plain, kind.lower() in _TEXTS)

    def _skip(self, values: int, kind: str) -> int:
        """Pass this many values of one number type; the place where they began."""
        kind = kind.lower()
        if self.binary or kind in _TEXTS:
            self.line()  # values begin on the next line
        if kind in _TEXTS:
            self._skip_texts(values)
            return self.place
        if kind not in _BYTES and kind != "bit":
            raise Bad(f"'{kind[:40]}' is no number type of such a file")
        if self.binary:
            length = -(-values // 8) if kind == "bit" else values * _BYTES[kind]
            end = self.place + length
        elif values > self.size:
            end = -1
        else:
            end = skip_words(self.file, self.place, values)
        if end < 0 or end > self.size:
            raise Bad(f"the values after '{self.latest[:60]}' are cut short")
        start, self.place = self.place, end
        return start

    def _skip_texts(self, number: int) -> None:
        if number > self.size:
            raise Bad(f"the texts after '{self.latest[:60]}' are cut short")
        for _ in range(number):
            if not self.binary:
                self.file.seek(self.place)
                length = len(self.file.readline())
            else:  # the two highest bits of the first byte say how long the length is
                self.file.seek(self.place)
                first = self.file.read(1)
                width = 1 << (3 - (first[0] >> 6))
                head = first + self.file.read(width - 1)
                length = width + (int.from_bytes(head, "big") & ((1 << (8 * width - 2)) - 1))
            self.place += length
            if self.place > self.size or length == 0:
                raise Bad(f"the texts after '{self.latest[:60]}' are cut short")


def _count(word: str) -> int:
    if not word.isdigit() or len(word) > 15:
        raise Bad(f"'{word[:40]}' is not a count")
    return int(word)


def _cells_in(stream: NDArray[np.int64]) -> int:
    """Number of cells in a stream of sizes, each followed by as many node numbers; -1 if broken.

    Runs of cells of one size are passed at a stride, in windows that grow.
    """
    place, cells, window = 0, 0, 8
    while place < len(stream):
        size = int(stream[place])
        if size < 0:
            return -1
        same = stream[place :: size + 1][:window] == size
        run = len(same) if same.all() else int(np.argmin(same))
        window = window * 4 if run == window else 8
        place += run * (size + 1)
        cells += run
    return cells if place == len(stream) else -1
