"""Admission: what models must satisfy before a body is planned from them."""

from __future__ import annotations

from pathlib import Path

import numpy as np
from numpy.typing import NDArray

from expander.casefile import CaseFile, CaseTable
from expander.cells import require_known
from expander.errors import InputError
from expander.fields import Field
from expander.frames import Cylindrical
from expander.groups import Group
from expander.loadcases import LoadCase, Result
from expander.model import Model
from expander.readers import read_model
from expander.resolve import acting


def read_models(case: CaseFile, tables: list[CaseTable], allow_nan: bool) -> list[Model]:
    """The model of each case; one that several cases share is read once."""
    known: dict[tuple[str, ...], Model] = {}
    models = []
    for table in tables:
        file = table.file or case.model.file
        if file is None:
            where = f"case {table.name!r}" if case.case else "[model]"
            raise InputError(f"{where} names no file.", 'Add file = "result.vtu" under [model].')
        results = table.results if table.results is not None else case.model.results
        key = (file, *results)
        if key not in known:
            model = read_model(_within(case.folder, file))
            for result in results:
                from expander.readers.tables import add_table

                model = add_table(model, _within(case.folder, result), allow_missing=allow_nan)
            known[key] = model
        models.append(known[key])
    return models


def _within(folder: Path, file: str) -> Path:
    return Path(file) if Path(file).is_absolute() else folder / file


def check_mesh(model: Model) -> None:
    mesh = model.mesh
    require_known(mesh.types, str(model.source))
    if not _all_finite(mesh.points):
        bad = ~np.isfinite(mesh.points).all(axis=1)
        raise InputError(
            f"{model.source}: {int(bad.sum())} nodes have no finite coordinates; the first is "
            f"node {int(np.argmax(bad))}.",
            "Expected numbers; write the model again.",
        )


def _all_finite(values: NDArray[np.generic]) -> bool:
    """Whether all numbers are finite; a finite sum is the quick proof."""
    with np.errstate(over="ignore", invalid="ignore"):
        wide = np.complex128 if np.iscomplexobj(values) else np.float64
        quick = bool(np.isfinite(values.sum(dtype=wide)))
    return quick or bool(np.isfinite(values).all())


def check_same_mesh(first: Model, other: Model, name: str) -> None:
    a, b = first.mesh, other.mesh
    if a is b:
        return
    same = (
        a.points.shape == b.points.shape
        and np.array_equal(a.types, b.types)
        and np.array_equal(a.connectivity, b.connectivity)
        and np.array_equal(a.offsets, b.offsets)
    )
    if same and float(np.abs(a.points - b.points).max()) <= 1e-6 * a.size:
        return
    counts = (a.point_count, a.cell_count) == (b.point_count, b.cell_count)
    what = (
        "as many nodes and cells, but in another order"
        if counts and not same
        else f"{b.point_count} nodes and {b.cell_count} cells against {a.point_count} and "
        f"{a.cell_count}" if not same else "the same cells, but nodes in other places"
    )  # fmt: skip
    raise InputError(
        f"{other.source} (case {name!r}) has another mesh than {first.source}: {what}.",
        "All cases of one body use one mesh, with nodes and cells in the same order.",
    )


def check_same_arrays(
    first: Model, other: Model, name: str, skip: bool, known: set[str]
) -> list[str]:
    """Refuse arrays that a later case holds alone, or holds in another order of components.

    Parameters
    ----------
    known : keys of complex fields, under which a case may hold one real array instead.
    """
    notes = []
    for on, mine, theirs in (
        ("points", first.point_data, other.point_data),
        ("cells", first.cell_data, other.cell_data),
    ):
        extra = [a for a in theirs if a not in mine and a not in known]
        if extra and not skip:
            raise InputError(
                f"{other.source} (case {name!r}) has arrays on {on} that {first.source} has not: "
                f"{', '.join(map(repr, extra))}.",
                "All cases of one body hold the same fields; leave the others out with "
                "--skip-undeclared.",
            )
        notes += [f"array {a!r} on {on} is in case {name!r} alone and was left out" for a in extra]
        for array in mine:
            key = (on, array)
            if array in theirs and first.component_names.get(key) != other.component_names.get(key):
                raise InputError(
                    f"{other.source} (case {name!r}): array {array!r} names other components than "
                    f"in {first.source}.",
                    "All cases of one body store their components in one order.",
                )
    return notes


def check_linear(case: CaseFile, cases: tuple[LoadCase, ...]) -> None:
    if case.model.linear:
        return
    why = ""
    for c in cases:
        if not c.plain:
            why = f"case {c.name!r} is antisymmetric or has nodal diameters ({c.behaviour.words()})"
        elif c.factor != 1.0:
            why = f"case {c.name!r} has factor = {c.factor:g}"
    if case.sum:
        why = f"sum {case.sum[0].name!r} adds results"
    if why:
        raise InputError(
            f"model.linear = false, but {why}.",
            "A nonlinear response cannot be scaled, added or taken as antisymmetric: use symmetric "
            "cases alone, or set linear = true if the analysis is linear.",
        )


def check_complex(fields: list[Field], case: LoadCase) -> None:
    """With ``0 < h < N/2`` a field that follows the load must be complex and linear."""
    if not case.complex_factors:
        return
    for f in fields:
        if f.follows == "body" or f.kind == "label":
            continue
        if not f.quantity.linear:
            raise InputError(
                f"Field {f.name!r} in case {case.name!r} ({case.behaviour.words()}): an "
                f"{f.kind} differs from copy to copy where a wave runs around the ring, so it "
                "cannot be copied.",
                "Leave the field out (--skip-undeclared), and compute it from the components.",
            )
        if not f.complex_values or not np.iscomplexobj(f.values(case.model)):
            raise InputError(
                f"Field {f.name!r} in case {case.name!r} ({case.behaviour.words()}) is real, but a "
                "wave has an amplitude and a phase at each node.",
                f'Under [fields.{f.name}] give real = ".." and imaginary = "..", or amplitude and '
                "phase_degrees; or leave the field out (--skip-undeclared).",
            )


def check_numbers(
    fields: list[Field], cases: tuple[LoadCase, ...], allow_nan: bool
) -> dict[str, int]:
    """Refuse NaN and infinity, or count them; check every field in every case."""
    counts: dict[str, int] = {}
    for c in cases:
        for f in fields:
            values = f.values(c.model)
            if not np.issubdtype(values.dtype, np.inexact):
                continue
            if _all_finite(values):
                continue
            bad = ~np.isfinite(values)
            row = int(np.argmax(bad.any(axis=1)))
            if not allow_nan:
                raise InputError(
                    f"{c.model.source}: field {f.name!r} holds {int(bad.sum())} values that are "
                    f"not finite numbers; the first is at {f.on[:-1]} {row}: "
                    f"{values[row].tolist()}.",
                    "Correct the results, or accept them with --allow-nan (they are counted and "
                    "stay as they are).",
                )
            counts[f.name] = counts.get(f.name, 0) + int(bad.sum())
    return counts


def check_constant(
    fields: list[Field], cases: tuple[LoadCase, ...], results: tuple[Result, ...]
) -> None:
    """Properties of the body must be the same in all cases that are added."""
    for result in results:
        first, *others = [cases[k] for k, _ in result.terms]
        for f in fields if others else []:
            if not f.constant:
                continue
            for other in others:
                if not np.array_equal(
                    f.values(first.model),
                    f.values(other.model),
                    equal_nan=np.issubdtype(f.values(first.model).dtype, np.inexact),
                ):
                    raise InputError(
                        f"Sum {result.name!r}: field {f.name!r} follows the body, but differs "
                        f"between cases {first.name!r} and {other.name!r}.",
                        "Cases of one body share its properties; if it is a result, declare "
                        'follows = "load".',
                    )


def check_storage(fields: list[Field], group: Group) -> None:
    """Refuse a field whose stored components cannot hold its value on every copy."""
    for f in fields:
        for g in group.placements:
            Q = g.Q
            if isinstance(f.frame, Cylindrical):
                local = f.frame.local_action(g)
                if local is None and f.quantity.reduction.shape[0] < f.quantity.kind.full_size:
                    raise InputError(
                        f"Field {f.name!r}: components = {' '.join(f.quantity.components)!r} in "
                        f"frame {f.frame.name!r} cannot hold its value on every copy, since the "
                        "copies do not keep the frame's axis in place.",
                        "Store all components, or in global directions.",
                    )
                Q = g.Q if local is None else local
            try:
                f.quantity.matrix(Q)
            except InputError as error:
                raise InputError(f"Field {f.name!r}: {error.found}", error.remedy) from None


def check_integers(fields: list[Field], cases: tuple[LoadCase, ...], group: Group) -> None:
    """Refuse integer fields whose number type cannot hold their values on every copy."""
    for f in fields:
        for c in cases:
            values = f.values(c.model)
            if not np.issubdtype(values.dtype, np.integer) or not len(values):
                continue
            low, high = values.min(axis=0).astype(float), values.max(axis=0).astype(float)
            limits = np.iinfo(values.dtype.name)
            for g, chi in zip(group.placements, c.chi.tolist(), strict=True):
                Q = f.frame.local_action(g) if isinstance(f.frame, Cylindrical) else g.Q
                A = acting(f.quantity, g.Q if Q is None else Q, chi, f.follows)
                ends = np.where(A > 0, A, 0.0), np.where(A < 0, A, 0.0)
                most = ends[0] @ high + ends[1] @ low
                least = ends[0] @ low + ends[1] @ high
                if (
                    np.abs(A - np.rint(A)).max() > 1e-9
                    or most.max() > limits.max
                    or least.min() < limits.min
                ):
                    raise integers_too_small(f.name, values.dtype)


def integers_too_small(name: str, dtype: np.dtype[np.generic]) -> InputError:
    """The refusal of an integer field that would lose something."""
    return InputError(
        f"Field {name!r} is stored as {dtype}, which cannot hold its values on every copy "
        "(fractions, negative or too large numbers).",
        'Store it as a floating-point array, or declare kind = "label" if it is a number of '
        "something.",
    )
