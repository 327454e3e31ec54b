"""Counting the words of a long text without splitting it: numbers written as text."""

from __future__ import annotations

from typing import BinaryIO

import numpy as np
from numpy.typing import NDArray

_CHUNK = 1 << 20
_BLANK = 32  # the blank; tabs and line ends have lower codes


def _word_starts(data: bytes, in_word: bool) -> NDArray[np.bool_]:
    """Where in ``data`` a word begins; ``in_word`` if one runs on from before."""
    filled = np.frombuffer(data, np.uint8) > _BLANK
    starts = filled.copy()
    starts[1:] &= ~filled[:-1]
    starts[0] &= not in_word
    return starts


def count_words(file: BinaryIO, start: int, stop: int) -> int:
    """Number of words between two places of a file."""
    file.seek(start)
    words, in_word = 0, False
    while start < stop and (data := file.read(min(_CHUNK, stop - start))):
        words += int(np.count_nonzero(_word_starts(data, in_word)))
        in_word = data[-1] > _BLANK
        start += len(data)
    return words


def skip_words(file: BinaryIO, start: int, count: int) -> int:
    """The place just behind the ``count``-th word from ``start``; -1 if there are fewer."""
    if count == 0:
        return start
    file.seek(start)
    in_word = False
    while data := file.read(_CHUNK):
        starts = _word_starts(data, in_word)
        words = int(np.count_nonzero(starts))
        if count <= words:
            return _end_of_word(file, start + int(np.flatnonzero(starts)[count - 1]))
        count -= words
        in_word = data[-1] > _BLANK
        start += len(data)
    return -1


def _end_of_word(file: BinaryIO, start: int) -> int:
    """The first blank, or the end of the file, from ``start``, which is in a word."""
    file.seek(start)
    while data := file.read(256):
        blank = np.frombuffer(data, np.uint8) <= _BLANK
        if blank.any():
            return start + int(np.argmax(blank))
        start += len(data)
    return start
