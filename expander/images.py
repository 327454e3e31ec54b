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
from functools import lru_cache
from threading import Lock

import numpy as np

from expander.admission import integers_too_small
from expander.body import WholeBody
from expander.bodyarrays import Block, BodyArray
from expander.bodymesh import BodyMesh
from expander.cyclearrays import Cycle, peak_arrays
from expander.derived import Derived, derived_fields
from expander.fields import Field
from expander.frames import Cylindrical
from expander.loadcases import Result
from expander.numbering import Numbering
from expander.placements import Floats
from expander.quantities import Quantity
from expander.resolve import Numbers, acting, from_global, product, to_global


def arrays_of(body: WholeBody, result: Result, moment: float | None = None) -> Iterator[BodyArray]:
    """All arrays of one result of the whole body, mesh first.

    Parameters
    ----------
    moment : of the cycle, in degrees of omega t, at which complex fields are taken; their real and
        imaginary parts if None.
    """
    mesh = BodyMesh(body)
    points, cells = body.point_numbering, body.cell_numbering
    index = mesh.index
    coordinates = body.mesh.points

    def place(copy: int, rows: slice) -> Block:
        x = _kept(coordinates, points, copy, rows)
        if copy == 0:
            return x
        g = body.group.placements[copy]
        return (product(x.astype(float, copy=False), g.Q) + g.t).astype(
            coordinates.dtype, copy=False
        )

    yield BodyArray("Points", "coordinates", coordinates.dtype, ("x", "y", "z"), points.first,
                    points.total, place)  # fmt: skip
    yield BodyArray("connectivity", "connectivity", index, (), mesh.first, mesh.length,
                    mesh.connectivity, mesh.release)  # fmt: skip
    yield BodyArray("offsets", "offsets", index, (), cells.first, cells.total, mesh.offsets)
    yield BodyArray("types", "types", np.dtype(np.uint8), (), cells.first, cells.total,
                    mesh.types)  # fmt: skip
    for f in fields_in(body, result, moment):
        yield from _field_arrays(body, result, f, moment)
    yield _numbers_array("sector_point", "points", points)
    yield _numbers_array("sector_cell", "cells", cells)
    yield _copy_array(cells)


def _copy_array(cells: Numbering) -> BodyArray:
    kind = np.dtype(np.int32)

    def block(copy: int, rows: slice) -> Block:
        return np.full(rows.stop - rows.start, copy, dtype=kind)

    return BodyArray("copy", "cells", kind, (), cells.first, cells.total, block)


def fields_in(body: WholeBody, result: Result, moment: float | None = None) -> list[Field]:
    """The fields that this result holds: a sum, or a case times a factor, holds no invariants, and
    a moment of the cycle holds nothing that is not known as an amplitude."""
    plain = len(result.terms) == 1 and result.terms[0][1] == 1.0 and result.mean is None
    return [
        f for f in body.fields
        if f.constant
        or ((plain or f.summable) and (moment is None or is_complex(body, result, f)))
    ]  # fmt: skip


def is_complex(body: WholeBody, result: Result, f: Field) -> bool:
    """Whether a field is complex in a result."""
    return not f.constant and (f.complex_values or result.complex_factors(body.cases))


def left_out_of(body: WholeBody, result: Result, moment: float | None = None) -> list[str]:
    """Names of fields that do not add up and are left out of a sum, or of a moment."""
    there = fields_in(body, result, moment)
    return [f.name for f in body.fields if f not in there]


def _kept(values: Block, numbering: Numbering, copy: int, rows: slice) -> Block:
    """Rows of the sector's `values` among those that `copy` writes."""
    kept = numbering.kept(copy)
    return values[rows] if kept is None else np.take(values, kept[rows], axis=0)


def _numbers_array(name: str, section: str, numbering: Numbering) -> BodyArray:
    kind = np.dtype(np.int32 if numbering.count < 2**31 else np.int64)
    everything = np.arange(numbering.count, dtype=kind)
    return BodyArray(name, section, kind, (), numbering.first, numbering.total,
                     lambda g, rows: _kept(everything, numbering, g, rows))  # fmt: skip


_MOST_PATTERNS = 4  # kept at once: waves of several numbers of diameters differ on every copy


class _Signed:
    """A field's values summed over the terms of a result, for each pattern of chi."""

    def __init__(self, body: WholeBody, result: Result, f: Field) -> None:
        self.body, self.result, self.field = body, result, f
        self._known: dict[tuple[complex, ...], Block] = {}
        self._lock = Lock()
        kinds = [f.stored_type(body.cases[k].model) for k, _ in result.terms]
        self.plain = f.constant or (len(kinds) == 1 and result.terms[0][1] == 1.0)
        self.complex = is_complex(body, result, f)
        if self.plain or all(np.issubdtype(k, np.integer) for k in kinds):
            self.dtype = np.result_type(*kinds[: 1 if self.plain else None])
        else:  # a float of the widest kind
            floats = [k if np.issubdtype(k, np.floating) else np.float64 for k in kinds]
            self.dtype = np.result_type(*floats)
        if self.complex and not np.issubdtype(self.dtype, np.floating):
            self.dtype = np.dtype(np.float64)
        self.held = np.result_type(self.dtype, 1j) if self.complex else self.dtype

    def pattern(self, copy: int) -> tuple[complex, ...]:
        """chi relative to that of the first term, whose own goes into the matrix."""
        chi = [self.body.cases[k].chi[copy].item() for k, _ in self.result.terms]
        return tuple(c * chi[0].conjugate() for c in chi)

    def lead(self, copy: int) -> complex:
        found: complex = self.body.cases[self.result.terms[0][0]].chi[copy].item()
        return found

    def values(self, copy: int) -> Block:
        """(n, k) on the sector, seams resolved, in the field's number type, or complex."""
        key = self.pattern(copy)
        with self._lock:
            if key not in self._known:
                while len(self._known) >= _MOST_PATTERNS:
                    del self._known[next(iter(self._known))]
                self._known[key] = self._make(key)
            return self._known[key]

    def _make(self, signs: tuple[complex, ...]) -> Block:
        f, terms = self.field, self.result.terms
        items = (self.body.nodes if f.on == "points" else self.body.cells).items
        first = f.values(self.body.cases[terms[0][0]].model)
        if self.plain:
            terms = ((terms[0][0], 1.0),)
            total = first
        else:
            wide = np.complex128 if self.complex else np.float64
            added: Numbers = np.zeros(first.shape, dtype=wide)
            for (k, a), sign in zip(terms, signs, strict=True):
                added += (a * sign) * f.values(self.body.cases[k].model).astype(wide, copy=False)
            total = added
        patch = np.zeros((len(items), first.shape[1]), dtype=np.result_type(total, float))
        for (k, a), sign in zip(terms, signs, strict=False):
            resolved = self.body.resolved.get((f.name, k))
            if resolved is None or resolved.patch is None:
                return _as(total, self.held, f)
            patch += (a * sign) * resolved.patch
        total = np.array(total)
        total[items] = _as(patch, total.dtype, f)
        return _as(total, self.held, f)

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
            raise integers_too_small(f.name, dtype)
        return np.asarray(whole.astype(dtype))
    return np.asarray(values.astype(dtype))


def _field_arrays(
    body: WholeBody, result: Result, f: Field, moment: float | None
) -> Iterator[BodyArray]:
    numbering = body.point_numbering if f.on == "points" else body.cell_numbering
    signed = _Signed(body, result, f)
    dtype = signed.dtype
    image = _local_image if isinstance(f.frame, Cylindrical) else _global_image

    def real_block(copy: int, rows: slice) -> Block:
        values = _kept(signed.values(copy), numbering, copy, rows)
        lead = signed.lead(copy).real
        return _as(image(body, f, numbering, values, copy, rows, lead), dtype, f)

    mean = None
    if moment is not None and result.mean is not None:
        mean = _Signed(body, Result(result.name, ((result.mean, 1.0),)), f)

    def part_block(weight: complex) -> Callable[[int, slice], Block]:
        """``Re(weight chi rho f)``: a part of the amplitude, or the field at a moment."""

        def block(copy: int, rows: slice) -> Block:
            values = _kept(signed.values(copy), numbering, copy, rows)
            s = weight * signed.lead(copy)
            real = values.real * s.real - values.imag * s.imag
            out = image(body, f, numbering, real, copy, rows, 1.0)
            if mean is not None:
                still = _kept(mean.values(copy).real, numbering, copy, rows)
                out = np.add(out, image(body, f, numbering, still, copy, rows,
                                        mean.lead(copy).real))  # fmt: skip
            return _as(out, dtype, f)

        return block

    parts: list[tuple[str, Callable[[int, slice], Block]]] = [("", real_block)]
    if signed.complex:
        parts = [(suffix, part_block(w)) for suffix, w in result.parts(moment)]
    for suffix, block in parts:
        yield BodyArray(f.name + suffix, f.on, dtype, component_names(f), numbering.first,
                        numbering.total, block, signed.release)  # fmt: skip
    there = [g.name for g in fields_in(body, result)]
    for extra in derived_fields(f, body.case.output.derived):
        if extra.name in there:
            continue  # the model has its own; said in the notes
        if not signed.complex:
            yield _derived_array(body, signed, f, extra, numbering)
        elif moment is not None or result.real:
            ((_, weight),) = result.parts(moment)
            at_moment = _AtMoment(signed, mean, weight, f, extra)
            yield BodyArray(extra.name, f.on, dtype, extra.components, numbering.first,
                            numbering.total, at_moment.block(numbering))  # fmt: skip
    if signed.complex and moment is None and not result.real:
        still = None if result.mean is None else _Signed(
            body, Result(result.name, ((result.mean, 1.0),)), f
        )  # fmt: skip
        cycle = Cycle(signed.values, signed.pattern, signed.lead,
                      None if still is None else still.values,
                      None if still is None else still.lead,
                      result.wave == "standing", result.turned_back)  # fmt: skip
        yield from peak_arrays(f, body.case.output.peaks, cycle, numbering, dtype,
                               lambda v, copy, rows: _kept(v, numbering, copy, rows))  # fmt: skip


class _AtMoment:
    """Von Mises and the like at one moment of the cycle: of components before they are carried,
    since they do not change on the way."""

    def __init__(
        self, signed: _Signed, mean: _Signed | None, weight: complex, f: Field, extra: Derived
    ) -> None:
        self.signed, self.mean, self.weight = signed, mean, weight
        self.field, self.extra = f, extra

    def block(self, numbering: Numbering) -> Callable[[int, slice], Block]:
        def block(copy: int, rows: slice) -> Block:
            values = _kept(self.signed.values(copy), numbering, copy, rows)
            s = self.weight * self.signed.lead(copy)
            real = values.real * s.real - values.imag * s.imag
            if self.mean is not None:
                still = _kept(self.mean.values(copy).real, numbering, copy, rows)
                real = np.add(real, np.multiply(self.mean.lead(copy).real, still))
            found = self.extra.values(self.field.quantity, np.asarray(real, dtype=float))
            return found.astype(self.signed.dtype, copy=False)

        return block


def component_names(f: Field) -> tuple[str, ...]:
    """Names of the components as written to the file, none for a single number."""
    if f.quantity.size == 1:
        return ()
    if isinstance(f.frame, Cylindrical) and f.quantity.kind.rank:
        letters = dict(zip("xyz", ("r", "t", "z"), strict=True))
        return tuple("".join(letters[c] for c in name) for name in f.quantity.components)
    return f.quantity.components


@lru_cache(maxsize=64)
def _action(q: Quantity, Q: bytes, chi: float, follows: str) -> Floats:
    """``chi(g) * rho(Q)``, kept while the pieces of a copy are computed."""
    return acting(q, np.frombuffer(Q).reshape(3, 3), chi, follows)


def image_values(q: Quantity, Q: Floats, chi: float, follows: str, values: Block) -> Block:
    """The one line: ``chi(g) * rho(Q) * f(x)`` on rows of stored components, (n, k)."""
    A = _action(q, Q.tobytes(), chi, follows)
    signs = np.diag(A)
    if np.array_equal(A, np.diag(signs)):
        if (signs == 1.0).all():
            return values
        if (np.abs(signs) == 1.0).all() and np.issubdtype(values.dtype, np.floating):
            return values * signs.astype(values.dtype)
    return product(values.astype(float, copy=False), A)


def _global_image(
    body: WholeBody,
    f: Field,
    numbering: Numbering,
    values: Block,
    copy: int,
    rows: slice,
    chi: float,
) -> Block:
    return image_values(f.quantity, body.group.placements[copy].Q, chi, f.follows, values)


def _local_image(
    body: WholeBody,
    f: Field,
    numbering: Numbering,
    values: Block,
    copy: int,
    rows: slice,
    chi: float,
) -> Block:
    """In a cylindrical frame: one sign matrix off the axis if the placement keeps the axis,
    otherwise to global at the point, on to the copy, and back at the image point."""
    frame, placement = f.frame, body.group.placements[copy]
    assert isinstance(frame, Cylindrical)
    if copy == 0:
        return values
    where = body.mesh.points if f.on == "points" else body.centres
    here = _kept(where, numbering, copy, rows).astype(float)
    local = frame.local_action(placement)
    if local is None:
        out, general = np.empty(values.shape), np.arange(len(here))
    else:
        image = image_values(f.quantity, local, chi, f.follows, values)
        out, general = image.astype(float), np.flatnonzero(frame.radius(here) <= body.on_axis)
    if len(general):
        turned = to_global(f, values[general], here[general], body.on_axis)
        moved = product(turned, acting(f.quantity.complete, placement.Q, chi, f.follows))
        out[general] = from_global(f, moved, placement.apply(here[general]), body.on_axis)
    return out


def _derived_array(
    body: WholeBody, signed: _Signed, f: Field, extra: Derived, numbering: Numbering
) -> BodyArray:
    """Von Mises, principal values and magnitudes: the same on all copies with one chi pattern."""
    known: dict[tuple[float, tuple[complex, ...]], Block] = {}
    lock = Lock()

    def block(copy: int, rows: slice) -> Block:
        chi = signed.lead(copy).real if f.follows == "load" else 1.0
        key = (chi, signed.pattern(copy))
        with lock:
            if key not in known:
                known[key] = extra.values(f.quantity, chi * signed.values(copy).astype(float))
        return _kept(known[key], numbering, copy, rows).astype(dtype, copy=False)

    def release() -> None:
        known.clear()
        signed.release()

    dtype = signed.dtype
    if not np.issubdtype(dtype, np.floating):
        dtype = np.dtype(np.float64)
    return BodyArray(extra.name, f.on, dtype, extra.components, numbering.first, numbering.total,
                     block, release)  # fmt: skip
