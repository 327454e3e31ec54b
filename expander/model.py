"""The modelled sector as arrays: a mesh and the values on its points and cells."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field
from functools import cached_property
from pathlib import Path

import numpy as np
from numpy.typing import NDArray


@dataclass(frozen=True, eq=False)
class Mesh:
    """An unstructured mesh in VTK's cell types and node orders.

    Attributes
    ----------
    points : (n, 3) float32 or float64, in the model's length unit.
    connectivity : (L,) int64, node numbers of all cells, one cell after the other.
    offsets : (m + 1,) int64; cell ``c`` has nodes ``connectivity[offsets[c]:offsets[c + 1]]``.
    types : (m,) uint8, VTK cell types.
    """

    points: NDArray[np.floating]
    connectivity: NDArray[np.int64]
    offsets: NDArray[np.int64]
    types: NDArray[np.uint8]

    @property
    def point_count(self) -> int:
        return len(self.points)

    @property
    def cell_count(self) -> int:
        return len(self.types)

    @cached_property
    def uniform(self) -> tuple[int, int] | None:
        """Type and number of nodes of every cell, if they all have the same."""
        if not len(self.types):
            return None
        size = int(self.offsets[1] - self.offsets[0])
        if not (self.types == self.types[0]).all() or not (np.diff(self.offsets) == size).all():
            return None
        return int(self.types[0]), size

    @cached_property
    def bounds(self) -> NDArray[np.float64]:
        """Lowest and highest coordinates, (2, 3)."""
        columns = self.points.T  # column by column: numpy reduces rows of three slowly
        return np.array([[c.min() for c in columns], [c.max() for c in columns]], dtype=float)

    @property
    def size(self) -> float:
        """Longest side of the box around the model."""
        return float((self.bounds[1] - self.bounds[0]).max())

    @property
    def spacing(self) -> float:
        """Distance of neighbouring numbers of the coordinates' type, at the largest coordinate."""
        return float(np.spacing(self.points.dtype.type(np.abs(self.bounds).max())))


@dataclass(frozen=True, eq=False)
class Model:
    """A sector as read from a file, before anything is said about what its arrays mean.

    Attributes
    ----------
    mesh : the sector's mesh.
    point_data, cell_data : arrays by name, first axis over points or cells, at most one
        further axis (components); the number type is that of the file.
    source : the file it came from.
    notes : what the reader assumed or left out, each a sentence for the user.
    component_names : by ("points" or "cells", array), where the file names its components.
    """

    mesh: Mesh
    point_data: Mapping[str, NDArray[np.generic]]
    cell_data: Mapping[str, NDArray[np.generic]]
    source: Path
    notes: tuple[str, ...] = field(default=())
    component_names: Mapping[tuple[str, str], tuple[str, ...]] = field(default_factory=dict)
