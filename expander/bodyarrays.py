"""Arrays of the whole body: what is known of each before it is computed, and how to compute it."""

from __future__ import annotations

from collections.abc import Callable, Iterator
from dataclasses import dataclass, field

import numpy as np
from numpy.typing import NDArray

Block = NDArray[np.generic]


@dataclass(eq=False)
class BodyArray:
    """One array of the whole body.

    Attributes
    ----------
    section : "points", "cells", or the mesh's own "coordinates", "connectivity", "offsets",
        "types".
    components : names of the components; empty for a single number.
    first : row of the whole array at which each copy's part starts.
    rows : rows of the whole array.
    block : computes some of the rows of one copy, which are in the sector's order.
    release : forgets what was kept between copies.
    """

    name: str
    section: str
    dtype: np.dtype[np.generic]
    components: tuple[str, ...]
    first: dict[int, int]
    rows: int
    block: Callable[[int, slice], Block]
    release: Callable[[], None] = field(default=lambda: None)

    @property
    def width(self) -> int:
        return max(1, len(self.components))

    @property
    def nbytes(self) -> int:
        return self.rows * self.width * self.dtype.itemsize

    def pieces(self, most_bytes: int) -> Iterator[tuple[int, int, slice]]:
        """(copy, row of the whole array, rows of the copy) for pieces of at most so many bytes."""
        step = max(1, most_bytes // (self.width * self.dtype.itemsize))
        ends = [*list(self.first.values())[1:], self.rows]
        for (copy, begin), end in zip(self.first.items(), ends, strict=True):
            for row in range(0, end - begin, step):
                yield copy, begin + row, slice(row, min(row + step, end - begin))
