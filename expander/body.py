"""The whole body as a plan: group, fields, load cases, results, seams and numbering.

`prepare` reads the models of a case file, checks everything that can be checked before the first
byte is written, and leaves a `WholeBody` that the writers stream from.
"""

from __future__ import annotations

from dataclasses import dataclass, field
from functools import cached_property

import numpy as np

from expander.casefile import CaseFile
from expander.closing import Opening, averaged_notes, check_closing
from expander.derived import derived_notes
from expander.errors import InputError
from expander.fields import Field
from expander.groups import Group
from expander.loadcases import LoadCase, Result
from expander.model import Mesh
from expander.numbering import Numbering, shared_cells
from expander.phases import decided
from expander.placements import Floats
from expander.referencing import referenced
from expander.resolve import Resolved, resolve
from expander.seams import Classes, Seams
from expander.sector import Sector, Step, on_axis, read_sector
from expander.surroundings import not_averaged
from expander.topology import Ints, cell_centres, cells_at_nodes


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
        return on_axis(self.mesh)


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
    sector = decided(read_sector(case, skip_undeclared, allow_nan, step))
    return plan_body(referenced(sector), step)


def plan_body(sector: Sector, step: Step = lambda words: None) -> WholeBody:
    """Resolve the seams of a sector and number the whole body; raises as `prepare`."""
    case, group, mesh, cases = sector.case, sector.group, sector.mesh, sector.cases
    fields, notes, seams = list(sector.fields), list(sector.notes), sector.seams
    step("resolving seams")
    nodes = seams.nodes
    apart, words = not_averaged(mesh, sector.model, fields, nodes, group)
    notes += words
    resolved = _resolved(mesh, fields, cases, nodes, group, "points", apart)
    openings = check_closing(mesh, group, fields, cases, nodes, resolved, case.seam.limit,
                             keep_apart=case.seam.open == "keep apart")  # fmt: skip
    if seams.unmatched:
        from expander.checking.continuity import check_interpolated

        notes += check_interpolated(sector)
    notes += averaged_notes(fields, cases, nodes, resolved)
    for o in openings:
        notes.append(
            f"the seam is open at {len(o.nodes)} nodes for {o.field!r} in case {o.case!r} (worst "
            f"jump {100 * o.worst:.3g} % of the largest value): they were kept apart there "
            '(seam.open = "keep apart"), with the sector\'s own values'
        )
    if not case.output.merge:
        twice = shared_cells(mesh, nodes, group)
        nodes = Classes.none()
        notes.append("the copies are not merged (output.merge = false); values are the sector's")
        if len(twice.item):
            notes.append(
                f"{len(twice.items)} cells lie in a cut plane or on the axis and stand there once "
                "for every copy, since nothing was merged"
            )
    elif openings:
        nodes = nodes.without(np.unique([e for o in openings for e in o.entries]), group)
    if nodes is not seams.nodes:
        resolved = _resolved(mesh, fields, cases, nodes, group, "points", apart)
    cells = shared_cells(mesh, nodes, group)
    if len(cells.item):
        resolved |= _resolved(mesh, fields, cases, cells, group, "cells")
        notes.append(_double_cells(cells))
    notes += _frame_notes(fields, mesh)
    notes += derived_notes(fields, case.output.derived)
    if case.output.copies is not None and any(f.seam == "sum" for f in fields):
        notes.append(
            "only some copies are built: values at their open sides are those of the whole body, "
            "so the forces of the part do not balance"
        )
    return WholeBody(case, group, mesh, tuple(fields), cases, sector.results, _copies(case, group),
                     seams, nodes, cells, resolved, tuple(openings), tuple(notes),
                     sector.invalid_numbers)  # fmt: skip


def _resolved(
    mesh: Mesh,
    fields: list[Field],
    cases: tuple[LoadCase, ...],
    classes: Classes,
    group: Group,
    on: str,
    apart: Ints | None = None,
) -> dict[tuple[str, int], Resolved]:
    items = classes.items
    places = mesh.points[items] if on == "points" else cell_centres(mesh)[items]
    weights = cells_at_nodes(mesh, items) if on == "points" and len(items) else None
    near_axis = on_axis(mesh)
    own = None if apart is None else np.isin(items, apart)
    found = {}
    for k, c in enumerate(cases):
        for f in fields:
            # A cell's values are its own: only extensive ones add up where two coincide.
            if f.on == on and (on == "points" or f.seam == "sum"):
                values = f.values(c.model)[items]
                found[f.name, k] = resolve(f, values, places, classes, group, c.chi, weights,
                                           near_axis, own)  # fmt: skip
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
    for frame in dict.fromkeys(f.frame for f in fields if isinstance(f.frame, Cylindrical)):
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
