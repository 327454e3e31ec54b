"""Counting the words of a long text without splitting it: numbers written as text."""

from __future__ import annotations

from typing import BinaryIO

import numpy as np
from numpy.typing import NDArray

_CHUNK = 1 << 22
# bytes that separate words: blank, tab, line feed, vertical tab, form feed, return
_BLANK = np.zeros(256, bool)
_BLANK[[9, 10, 11, 12, 13, 32]] = True


def _word_starts(data: bytes, in_word: bool) -> NDArray[np.intp]:
    """Places in ``data`` where a word begins; ``in_word`` if one runs on from before."""
    filled = ~_BLANK[np.frombuffer(data, np.uint8)]
    before = np.concatenate([[in_word], filled[:-1]])
    return np.flatnonzero(filled & ~before)


def count_words(file: BinaryIO, start: int, stop: int) -> int:
    """Number of words between two places of a file."""
    file.seek(start)
    words, in_word = 0, False
    while start < stop and (data := file.read(min(_CHUNK, stop - start))):
        words += len(_word_starts(data, in_word))
        in_word = not data[-1:].isspace()
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
        if count > len(starts):
            count -= len(starts)
            in_word = not data[-1:].isspace()
            start += len(data)
            continue
        return _end_of_word(file, start + int(starts[count - 1]))
    return -1


def _end_of_word(file: BinaryIO, start: int) -> int:
    """The first blank, or the end of the file, from ``start``, which is in a word."""
    file.seek(start)
    while data := file.read(256):
        blank = _BLANK[np.frombuffer(data, np.uint8)]
        if blank.any():
            return start + int(np.argmax(blank))
        start += len(data)
    return start
