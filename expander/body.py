"""The whole body as a plan: group, fields, load cases, results, seams and numbering.

`prepare` reads the models of a case file, checks everything that can be checked before the first
byte is written, and leaves a `WholeBody` that the writers stream from.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass, field
from functools import cached_property
from pathlib import Path

import numpy as np
from numpy.typing import NDArray

from expander.behaviours import Behaviour, factors
from expander.casefile import CaseFile, CaseTable, Direction, plane_names
from expander.cells import require_known
from expander.closing import Opening, check_closing
from expander.errors import InputError
from expander.fields import Field, check_load_odd, check_shear, fields_of, frames_of
from expander.groups import CutPlane, CyclicAxis, Group, make_group
from expander.model import Mesh, Model
from expander.numbering import Numbering, shared_cells
from expander.placements import Floats, unit
from expander.readers import read_model
from expander.resolve import Resolved, resolve
from expander.seams import Classes, Seams, find_seams
from expander.surroundings import not_averaged
from expander.tiling import check_sides, check_touch, check_turns
from expander.topology import cell_centres, cells_at_nodes


@dataclass(frozen=True, eq=False)
class LoadCase:
    """One result set on the sector and its load behaviour."""

    name: str
    model: Model
    behaviour: Behaviour
    chi: Floats
    factor: float


@dataclass(frozen=True)
class Result:
    """A case, or a sum of cases: (number of the case, factor) for each term."""

    name: str
    terms: tuple[tuple[int, float], ...]


@dataclass(frozen=True, eq=False)
class WholeBody:
    """Everything that is known before writing.

    Attributes
    ----------
    nodes, cells : classes of nodes and cells that copies share (none if not merged).
    resolved : values at shared nodes (cells) by field name and case number.
    openings : seam nodes kept apart on request, with their jumps.
    notes : what was assumed or left out, each a sentence.
    """

    case: CaseFile
    group: Group
    mesh: Mesh
    fields: tuple[Field, ...]
    cases: tuple[LoadCase, ...]
    results: tuple[Result, ...]
    copies: tuple[int, ...]
    seams: Seams
    nodes: Classes
    cells: Classes
    resolved: dict[tuple[str, int], Resolved]
    openings: tuple[Opening, ...]
    notes: tuple[str, ...]
    invalid_numbers: dict[str, int] = field(default_factory=dict)

    @cached_property
    def point_numbering(self) -> Numbering:
        return Numbering(self.group, self.mesh.point_count, self.nodes, self.copies)

    @cached_property
    def cell_numbering(self) -> Numbering:
        return Numbering(self.group, self.mesh.cell_count, self.cells, self.copies)

    @cached_property
    def centres(self) -> Floats:
        """Mean position of the nodes of each cell, (m, 3)."""
        return cell_centres(self.mesh)

    @cached_property
    def on_axis(self) -> float:
        """Distance from the axis of a cylindrical frame that counts as on it."""
        return _on_axis(self.mesh)


def _on_axis(mesh: Mesh) -> float:
    return 1e-9 * mesh.size + 8.0 * mesh.spacing


Step = Callable[[str], None]


def prepare(
    case: CaseFile,
    skip_undeclared: bool = False,
    allow_nan: bool = False,
    step: Step = lambda words: None,
) -> WholeBody:
    """Read, check and plan the expansion of a case.

    Parameters
    ----------
    step : called with a few words before each slow part, for a progress display.

    Raises
    ------
    InputError
        For anything wrong with the case or its models (exit status 2).
    CheckFailed
        If a primary field does not close along a seam (exit status 1).
    """
    group = _group(case)
    tables = case.case or [CaseTable(name="result")]
    behaviours = [_behaviour(case, t) for t in tables]
    signs = [factors(group, b) for b in behaviours]
    step("reading")
    models = _models(case, tables, allow_nan)
    mesh = models[0].mesh
    _check_mesh(models[0])
    for name, model in zip([t.name for t in tables][1:], models[1:], strict=True):
        _check_same_mesh(models[0], model, name)
    cases = tuple(
        LoadCase(t.name, m, b, chi, t.factor)
        for t, m, b, chi in zip(tables, models, behaviours, signs, strict=True)
    )
    results = _results(case, cases)
    _check_linear(case, cases)
    odd = any(c.chi.min() < 0 for c in cases)
    notes = [note for m in dict.fromkeys(models) for note in m.notes]
    frames = frames_of(case, {n: _direction(t.axis, f"frames.{n}.axis")
                              for n, t in case.frames.items()})  # fmt: skip
    fields, left_out = fields_of(models[0], case, frames, skip_undeclared, odd)
    notes += left_out
    check_shear(fields, group.placements)
    for c in cases:
        if c.chi.min() < 0:
            check_load_odd(fields, c.name)
    for f in fields:
        for p in group.placements:
            _matrix_checked(f, p.Q)
    _check_constant(fields, cases, results)
    invalid = _check_numbers(fields, cases, allow_nan)
    step("checking the copies")
    tolerance = case.seam.tolerance
    check_sides(mesh, group, tolerance)
    step("finding seams")
    seams = find_seams(mesh, group, tolerance)
    notes += check_touch(mesh, group, seams, tolerance)
    notes += check_turns(mesh, group, seams, tolerance)
    step("resolving seams")
    nodes = seams.nodes
    kept_apart, words = not_averaged(mesh, models[0], fields, nodes, group)
    notes += words
    resolved = _resolved(mesh, fields, cases, nodes, group, "points")
    openings = check_closing(mesh, group, fields, cases, nodes, resolved, case.seam.limit,
                             keep_apart=case.seam.open == "keep apart")  # fmt: skip
    opened = sorted({n for o in openings for n in o.nodes})
    kept_apart = np.union1d(kept_apart, opened).astype(np.int64)
    if openings:
        notes.append(
            f"the seam is open at {len(opened)} nodes, which were kept apart "
            '(seam.open = "keep apart"); their values are the sector\'s own'
        )
    if not case.output.merge:
        nodes = Classes.none()
        notes.append("the copies are not merged (output.merge = false); values are the sector's")
    elif len(kept_apart):
        nodes = nodes.without(kept_apart)
    if len(nodes.item) != len(seams.nodes.item):
        resolved = _resolved(mesh, fields, cases, nodes, group, "points")
    cells = shared_cells(mesh, nodes, group)
    if len(cells.item):
        resolved |= _resolved(mesh, fields, cases, cells, group, "cells")
        notes.append(_double_cells(cells))
    notes += _frame_notes(fields, mesh)
    return WholeBody(case, group, mesh, tuple(fields), cases, results, _copies(case, group),
                     seams, nodes, cells, resolved, tuple(openings), tuple(notes),
                     invalid)  # fmt: skip


def _direction(word: Direction, key: str) -> Floats:
    vector = np.eye(3)["xyz".index(word)] if isinstance(word, str) else np.array(word, dtype=float)
    if not vector.any():
        raise InputError(f"{key} = [0, 0, 0] has no direction.", 'Expected "x", "y", "z" or three '
                         "numbers that are not all zero.")  # fmt: skip
    return unit(vector)


def _group(case: CaseFile) -> Group:
    planes = [
        CutPlane(n, _direction(m.normal, f"mirror {n!r}: normal"), np.array(m.point, dtype=float))
        for n, m in zip(plane_names(case), case.mirror, strict=True)
    ]
    axis = None
    if case.cyclic is not None:
        axis = CyclicAxis(case.cyclic.sectors, _direction(case.cyclic.axis, "cyclic.axis"),
                          np.array(case.cyclic.point, dtype=float))  # fmt: skip
    return make_group(planes, axis)


def _models(case: CaseFile, tables: list[CaseTable], allow_nan: bool) -> list[Model]:
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


def _check_mesh(model: Model) -> None:
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
        quick = bool(np.isfinite(values.sum(dtype=float)))
    return quick or bool(np.isfinite(values).all())


def _check_same_mesh(first: Model, other: Model, name: str) -> None:
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
    what = (
        f"{b.point_count} nodes and {b.cell_count} cells against {a.point_count} and "
        f"{a.cell_count}" if not same else "the same cells, but nodes in other places"
    )  # fmt: skip
    raise InputError(
        f"{other.source} (case {name!r}) has another mesh than {first.source}: {what}.",
        "All cases of one body use one mesh, with nodes and cells in the same order.",
    )


def _behaviour(case: CaseFile, table: CaseTable) -> Behaviour:
    words: dict[str, str] = {}
    for name, mirror in zip(plane_names(case), case.mirror, strict=True):
        given = table.load if isinstance(table.load, str) else table.load.get(name)
        words[name] = given or mirror.load
    h = 0
    if case.cyclic is not None:
        own = table.nodal_diameters
        h = case.cyclic.nodal_diameters if own is None else own
    return Behaviour(words, h)


def _results(case: CaseFile, cases: tuple[LoadCase, ...]) -> tuple[Result, ...]:
    single = [Result(c.name, ((k, c.factor),)) for k, c in enumerate(cases)]
    number = {c.name: k for k, c in enumerate(cases)}
    sums = [
        Result(s.name, tuple((number[n], f * cases[number[n]].factor)
                             for n, f in s.terms.items()))
        for s in case.sum
    ]  # fmt: skip
    if case.output.results is not None:
        by_name = {r.name: r for r in single + sums}
        return tuple(by_name[n] for n in case.output.results)
    return tuple(sums or single)


def _check_linear(case: CaseFile, cases: tuple[LoadCase, ...]) -> None:
    if case.model.linear:
        return
    why = ""
    for c in cases:
        if c.chi.min() < 0:
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


def _matrix_checked(f: Field, Q: Floats) -> None:
    try:
        f.quantity.matrix(Q)
    except InputError as error:
        raise InputError(f"Field {f.name!r}: {error.found}", error.remedy) from None


def _check_numbers(
    fields: list[Field], cases: tuple[LoadCase, ...], allow_nan: bool
) -> dict[str, int]:
    """Refuse NaN and infinity, or count them; check every field in every case."""
    counts: dict[str, int] = {}
    for c in cases:
        for f in fields:
            values = f.values(c.model)
            if not np.issubdtype(values.dtype, np.floating):
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


def _check_constant(
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


def _resolved(
    mesh: Mesh,
    fields: list[Field],
    cases: tuple[LoadCase, ...],
    classes: Classes,
    group: Group,
    on: str,
) -> dict[tuple[str, int], Resolved]:
    items = classes.items
    places = mesh.points[items] if on == "points" else cell_centres(mesh)[items]
    weights = cells_at_nodes(mesh, items) if on == "points" and len(items) else None
    on_axis = _on_axis(mesh)
    found = {}
    for k, c in enumerate(cases):
        for f in fields:
            # A cell's values are its own: only extensive ones add up where two coincide.
            if f.on == on and (on == "points" or f.seam == "sum"):
                values = f.values(c.model)[items]
                found[f.name, k] = resolve(f, values, places, classes, group, c.chi, weights,
                                           on_axis)  # fmt: skip
    return found


def _double_cells(cells: Classes) -> str:
    shown = ", ".join(str(c) for c in cells.items[:8].tolist())
    more = ", .." if len(cells.items) > 8 else ""
    return (
        f"{len(cells.items)} cells lie in a cut plane or on the axis and coincide with their "
        f"images ({shown}{more}): each is kept once. Its thickness, mass and resultants are that "
        'of the modelled part; fields with seam = "sum" were added. A web of half thickness is '
        "right for membrane action under a symmetric load only; an antisymmetric load needs half "
        "the bending stiffness instead"
    )


def _frame_notes(fields: list[Field], mesh: Mesh) -> list[str]:
    from expander.frames import Cylindrical

    notes = []
    for frame in {f.frame for f in fields if isinstance(f.frame, Cylindrical)}:
        near = frame.radius(mesh.points.astype(float))
        if near.min() <= 1e-9 * near.max():
            notes.append(
                f"frame {frame.name!r}: on its axis the radial direction is taken as "
                f"({', '.join(f'{c:.4g}' for c in frame.reference)})"
            )
    return notes


def _copies(case: CaseFile, group: Group) -> tuple[int, ...]:
    wanted = case.output.copies
    if wanted is None:
        return tuple(range(len(group)))
    bad = [c for c in wanted if not 0 <= c < len(group)]
    if bad or not wanted:
        raise InputError(
            f"output.copies = {wanted} names copies that are not there.",
            f"Expected numbers from 0 (the modelled part) to {len(group) - 1}.",
        )
    return tuple(sorted(set(wanted)))
