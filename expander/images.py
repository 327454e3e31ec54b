"""Images: every array of the whole body, one block per copy, computed when it is asked for.

On the copy made by the placement ``g`` (``x -> Q x + t``)::

    f(g x) = chi(g) * rho(Q) * f(x)

and for a sum of load cases, each with its factor ``a`` and behaviour ``chi``::

    f(g x) = rho(Q) * sum over cases of  a * chi(g) * f_case(x)

The sum in the second line depends on the copy only through the signs of chi, so it is built once
for each pattern of signs; the first line is then one small matrix for each copy. Nothing here is
larger than the sector.
"""

from __future__ import annotations

from collections.abc import Callable, Iterator
from dataclasses import dataclass, field
from threading import Lock

import numpy as np
from numpy.typing import NDArray

from expander.body import Result, WholeBody
from expander.cells import CELL_TYPES, POLYGON
from expander.derived import Derived, derived_fields
from expander.errors import InputError
from expander.fields import Field
from expander.frames import Cylindrical
from expander.numbering import Numbering
from expander.placements import Floats
from expander.quantities import Quantity
from expander.resolve import acting, from_global, to_global
from expander.topology import Ints, blocks

Block = NDArray[np.generic]


@dataclass(eq=False)
class BodyArray:
    """One array of the whole body.

    Attributes
    ----------
    section : "points", "cells", or the mesh's own "coordinates", "connectivity", "offsets",
        "types".
    components : names of the components; empty for a single number.
    first : row of the whole array at which each copy's block starts.
    rows : rows of the whole array.
    block : computes the rows of one copy, in the sector's order.
    release : forgets what was kept between copies.
    """

    name: str
    section: str
    dtype: np.dtype[np.generic]
    components: tuple[str, ...]
    first: dict[int, int]
    rows: int
    block: Callable[[int], Block]
    release: Callable[[], None] = field(default=lambda: None)

    @property
    def width(self) -> int:
        return max(1, len(self.components))

    @property
    def nbytes(self) -> int:
        return self.rows * self.width * self.dtype.itemsize


class Topology:
    """Connectivity, offsets and types of the copies."""

    def __init__(self, body: WholeBody) -> None:
        self.body = body
        self.points = body.point_numbering
        self.cells = body.cell_numbering
        self._known: dict[tuple[bool, int], tuple[Ints, Ints, NDArray[np.uint8]]] = {}
        self._lock = Lock()
        lengths = {g: len(self.sector(g)[0]) for g in body.copies}
        self.first: dict[int, int] = {}
        self.length = 0
        for g in body.copies:
            self.first[g] = self.length
            self.length += lengths[g]
        fits = max(self.points.total, self.length) < 2**31
        self.index = np.dtype(np.int32 if fits else np.int64)

    def sector(self, copy: int) -> tuple[Ints, Ints, NDArray[np.uint8]]:
        """Connectivity in sector numbers, sizes and types of the cells that `copy` writes."""
        mirrored = self.body.group.placements[copy].mirrored
        kept = self.cells.kept(copy)
        key = (mirrored, -1 if kept is None else id(kept))
        with self._lock:
            if key not in self._known:
                self._known[key] = self._make(mirrored, kept)
            return self._known[key]

    def _make(self, mirrored: bool, kept: Ints | None) -> tuple[Ints, Ints, NDArray[np.uint8]]:
        mesh = self.body.mesh
        connectivity = mirrored_connectivity(self.body) if mirrored else mesh.connectivity
        sizes = np.diff(mesh.offsets)
        if kept is None:
            return connectivity, sizes, mesh.types
        mask = np.zeros(mesh.cell_count, dtype=bool)
        mask[kept] = True
        return connectivity[np.repeat(mask, sizes)], sizes[kept], mesh.types[kept]

    def connectivity(self, copy: int) -> Block:
        numbers = self.points.numbers(copy).astype(self.index)
        return np.take(numbers, self.sector(copy)[0])

    def offsets(self, copy: int) -> Block:
        ends = np.cumsum(self.sector(copy)[1]) + self.first[copy]
        return ends.astype(self.index)

    def types(self, copy: int) -> Block:
        return self.sector(copy)[2]


def mirrored_connectivity(body: WholeBody) -> Ints:
    """The sector's connectivity with every cell in the node order of its mirror image."""
    mesh = body.mesh
    out = np.empty_like(mesh.connectivity)
    for vtk_id, cells, nodes in blocks(mesh):
        if vtk_id in CELL_TYPES:
            order = np.array(CELL_TYPES[vtk_id].mirrored)
        else:
            order = mirrored_polygon(vtk_id, nodes.shape[1])
        if len(cells) == mesh.cell_count:
            return np.ascontiguousarray(nodes[:, order]).ravel()
        out[mesh.offsets[cells][:, None] + np.arange(nodes.shape[1])] = nodes[:, order]
    return out


def mirrored_polygon(vtk_id: int, size: int) -> Ints:
    """Node order of a mirrored polygon; a quadratic one lists its corners, then mid-side nodes.

    >>> mirrored_polygon(7, 5).tolist(), mirrored_polygon(36, 6).tolist()
    ([0, 4, 3, 2, 1], [0, 2, 1, 5, 4, 3])
    """
    if vtk_id == POLYGON:
        return (-np.arange(size)) % size
    corners = size // 2
    # mid-side node i lies between corners i and i + 1
    return np.concatenate([(-np.arange(corners)) % corners, np.arange(size - 1, corners - 1, -1)])


def arrays_of(body: WholeBody, result: Result) -> Iterator[BodyArray]:
    """All arrays of one result of the whole body, mesh first."""
    topology = Topology(body)
    points, cells = body.point_numbering, body.cell_numbering
    index = topology.index
    coordinates = body.mesh.points

    def place(copy: int) -> Block:
        x = _kept(coordinates, points, copy)
        if copy == 0:
            return x
        return body.group.placements[copy].apply(x).astype(coordinates.dtype, copy=False)

    yield BodyArray("Points", "coordinates", coordinates.dtype, ("x", "y", "z"), points.first,
                    points.total, place)  # fmt: skip
    yield BodyArray("connectivity", "connectivity", index, (), topology.first, topology.length,
                    topology.connectivity)  # fmt: skip
    yield BodyArray("offsets", "offsets", index, (), cells.first, cells.total, topology.offsets)
    yield BodyArray("types", "types", np.dtype(np.uint8), (), cells.first, cells.total,
                    topology.types)  # fmt: skip
    for f in fields_in(body, result):
        yield from _field_arrays(body, result, f)
    yield _numbers_array("sector_point", "points", points)
    yield _numbers_array("sector_cell", "cells", cells)
    copy_type = np.dtype(np.int32)
    yield BodyArray("copy", "cells", copy_type, (), cells.first, cells.total,
                    lambda g: np.full(cells.written(g), g, dtype=copy_type))  # fmt: skip


def fields_in(body: WholeBody, result: Result) -> list[Field]:
    """The fields that this result holds: a sum, or a case times a factor, holds no invariants."""
    plain = len(result.terms) == 1 and result.terms[0][1] == 1.0
    return [f for f in body.fields if plain or f.constant or f.summable]


def left_out_of(body: WholeBody, result: Result) -> list[str]:
    """Names of fields that do not add up and are left out of a sum."""
    there = fields_in(body, result)
    return [f.name for f in body.fields if f not in there]


def _kept(values: Block, numbering: Numbering, copy: int) -> Block:
    kept = numbering.kept(copy)
    return values if kept is None else np.take(values, kept, axis=0)


def _numbers_array(name: str, section: str, numbering: Numbering) -> BodyArray:
    kind = np.dtype(np.int32 if numbering.count < 2**31 else np.int64)
    everything = np.arange(numbering.count, dtype=kind)
    return BodyArray(name, section, kind, (), numbering.first, numbering.total,
                     lambda g: _kept(everything, numbering, g))  # fmt: skip


class _Signed:
    """A field's values summed over the terms of a result, for each pattern of chi."""

    def __init__(self, body: WholeBody, result: Result, f: Field) -> None:
        self.body, self.result, self.field = body, result, f
        self._known: dict[tuple[float, ...], Block] = {}
        self._lock = Lock()

    def pattern(self, copy: int) -> tuple[float, ...]:
        """Signs of chi relative to the first term, whose own sign goes into the matrix."""
        signs = [float(self.body.cases[k].chi[copy]) for k, _ in self.result.terms]
        return tuple(s * signs[0] for s in signs)

    def lead(self, copy: int) -> float:
        return float(self.body.cases[self.result.terms[0][0]].chi[copy])

    def values(self, copy: int) -> Block:
        """(n, k) on the sector, seams resolved, in the field's number type."""
        key = self.pattern(copy)
        with self._lock:
            if key not in self._known:
                self._known[key] = self._make(key)
            return self._known[key]

    def _make(self, signs: tuple[float, ...]) -> Block:
        f, terms = self.field, self.result.terms
        items = (self.body.nodes if f.on == "points" else self.body.cells).items
        first = f.values(self.body.cases[terms[0][0]].model)
        if f.constant or (len(terms) == 1 and terms[0][1] == 1.0):
            terms = ((terms[0][0], 1.0),)
            total = first
        else:
            total = np.zeros(first.shape)
            for (k, a), sign in zip(terms, signs, strict=True):
                total += (a * sign) * f.values(self.body.cases[k].model).astype(float, copy=False)
        patch = np.zeros((len(items), first.shape[1]))
        for (k, a), sign in zip(terms, signs, strict=False):
            resolved = self.body.resolved.get((f.name, k))
            if resolved is None or resolved.patch is None:
                return _as(total, first.dtype, f)
            patch += (a * sign) * resolved.patch
        total = np.array(total)
        total[items] = _as(patch, total.dtype, f)
        return _as(total, first.dtype, f)

    def release(self) -> None:
        self._known.clear()


def _as(values: Block, dtype: np.dtype[np.generic], f: Field) -> Block:
    """Back to the number type of the file; integers only if nothing is lost."""
    if values.dtype == dtype:
        return values
    if np.issubdtype(dtype, np.integer):
        whole = np.rint(values.astype(float))
        limits = np.iinfo(dtype.name)
        if np.abs(whole - values).max(initial=0.0) > 1e-9 or (
            whole.size and (whole.min() < limits.min or whole.max() > limits.max)
        ):
            raise InputError(
                f"Field {f.name!r} is stored as {dtype}, which cannot hold its values on every "
                "copy (fractions or negative numbers).",
                'Store it as a floating-point array, or declare kind = "label" if it is a number '
                "of something.",
            )
        return np.asarray(whole.astype(dtype))
    return np.asarray(values.astype(dtype))


def _field_arrays(body: WholeBody, result: Result, f: Field) -> Iterator[BodyArray]:
    numbering = body.point_numbering if f.on == "points" else body.cell_numbering
    signed = _Signed(body, result, f)
    dtype = f.values(body.cases[result.terms[0][0]].model).dtype
    image = _local_image if isinstance(f.frame, Cylindrical) else _global_image

    def block(copy: int) -> Block:
        chi = signed.lead(copy)
        return _as(image(body, f, numbering, signed.values(copy), copy, chi), dtype, f)

    yield BodyArray(f.name, f.on, dtype, component_names(f), numbering.first, numbering.total,
                    block, signed.release)  # fmt: skip
    for extra in derived_fields(f, body.case.output.derived):
        yield _derived_array(body, signed, f, extra, numbering)


def component_names(f: Field) -> tuple[str, ...]:
    """Names of the components as written to the file, none for a single number."""
    if f.quantity.size == 1:
        return ()
    if isinstance(f.frame, Cylindrical) and f.quantity.kind.rank:
        letters = dict(zip("xyz", ("r", "t", "z"), strict=True))
        return tuple("".join(letters[c] for c in name) for name in f.quantity.components)
    return f.quantity.components


def image_values(q: Quantity, Q: Floats, chi: float, follows: str, values: Block) -> Block:
    """The one line: ``chi(g) * rho(Q) * f(x)`` on rows of stored components, (n, k)."""
    A = acting(q, Q, chi, follows)
    signs = np.diag(A)
    if np.array_equal(A, np.diag(signs)):
        if (signs == 1.0).all():
            return values
        if (np.abs(signs) == 1.0).all() and not np.issubdtype(values.dtype, np.unsignedinteger):
            return values * signs.astype(values.dtype)
    return np.asarray(values.astype(float, copy=False) @ A.T)


def _global_image(
    body: WholeBody, f: Field, numbering: Numbering, values: Block, copy: int, chi: float
) -> Block:
    Q = body.group.placements[copy].Q
    return image_values(f.quantity, Q, chi, f.follows, _kept(values, numbering, copy))


def _local_image(
    body: WholeBody, f: Field, numbering: Numbering, values: Block, copy: int, chi: float
) -> Block:
    """In a cylindrical frame: one sign matrix off the axis if the placement keeps the axis,
    otherwise to global at the point, on to the copy, and back at the image point."""
    frame, placement = f.frame, body.group.placements[copy]
    assert isinstance(frame, Cylindrical)
    where = body.mesh.points.astype(float) if f.on == "points" else body.centres
    kept = numbering.kept(copy)
    here = where if kept is None else where[kept]
    mine = _kept(values, numbering, copy)
    local = frame.local_action(placement)
    everything = np.arange(len(here))
    general = everything if local is None else np.flatnonzero(frame.radius(here) <= body.on_axis)
    out = np.asarray(mine, dtype=float)
    if local is not None:
        out = np.asarray(image_values(f.quantity, local, chi, f.follows, mine), dtype=float)
    if len(general) and copy != 0:
        there = placement.apply(here[general])
        turned = to_global(f, mine[general], here[general], body.on_axis)
        moved = turned @ acting(f.quantity, placement.Q, chi, f.follows).T
        out = np.array(out)
        out[general] = from_global(f, moved, there, body.on_axis)
    return out


def _derived_array(
    body: WholeBody, signed: _Signed, f: Field, extra: Derived, numbering: Numbering
) -> BodyArray:
    """Von Mises, principal values and magnitudes: the same on all copies with one chi pattern."""
    known: dict[tuple[float, tuple[float, ...]], Block] = {}
    lock = Lock()

    def block(copy: int) -> Block:
        chi = signed.lead(copy) if f.follows == "load" else 1.0
        key = (chi, signed.pattern(copy))
        with lock:
            if key not in known:
                known[key] = extra.values(f.quantity, chi * signed.values(copy).astype(float))
        return _kept(known[key].astype(dtype, copy=False), numbering, copy)

    def release() -> None:
        known.clear()
        signed.release()

    dtype = f.values(body.cases[signed.result.terms[0][0]].model).dtype
    if not np.issubdtype(dtype, np.floating):
        dtype = np.dtype(np.float64)
    return BodyArray(extra.name, f.on, dtype, extra.components, numbering.first, numbering.total,
                     block, release)  # fmt: skip
