"""The sector as a case describes it: read, checked, its seams found, nothing resolved yet.

`read_sector` is where every command begins: what a case says is compared with what its files hold,
before anything is computed for the whole body.
"""

from __future__ import annotations

from collections.abc import Callable, Mapping
from dataclasses import dataclass, field

import numpy as np

from expander.admission import (
    check_complex,
    check_constant,
    check_integers,
    check_linear,
    check_mesh,
    check_numbers,
    check_same_arrays,
    check_same_mesh,
    check_storage,
    read_models,
)
from expander.behaviours import factors, is_plain
from expander.casefile import CaseFile, CaseTable, Direction, FieldTable, plane_names
from expander.declarations import fields_of
from expander.errors import InputError
from expander.fields import (
    Field,
    check_invariants,
    check_load_odd,
    check_shear,
    frames_of,
)
from expander.groups import CutPlane, CyclicAxis, Group, make_group
from expander.loadcases import LoadCase, Result, behaviour_of, mode_factor, results_of
from expander.model import Mesh, Model
from expander.placements import Floats, unit
from expander.seams import Seams, find_seams
from expander.tiling import check_sides, check_touch, check_turns

Step = Callable[[str], None]


@dataclass(frozen=True, eq=False)
class Sector:
    """What is known before anything is computed for the whole body.

    Attributes
    ----------
    model : that of the first case, or the first with complex fields; all cases share its mesh.
    seams : which nodes of different copies are one.
    notes : what was assumed or left out, each a sentence.
    invalid_numbers : values that are not finite and were accepted, counted by field.
    """

    case: CaseFile
    group: Group
    model: Model
    fields: tuple[Field, ...]
    cases: tuple[LoadCase, ...]
    results: tuple[Result, ...]
    seams: Seams
    notes: tuple[str, ...]
    invalid_numbers: dict[str, int] = field(default_factory=dict)

    @property
    def mesh(self) -> Mesh:
        return self.model.mesh


def on_axis(mesh: Mesh) -> float:
    """Distance from the axis of a cylindrical frame that counts as on it."""
    return 1e-9 * mesh.size + 8.0 * mesh.spacing


def read_sector(
    case: CaseFile,
    skip_undeclared: bool = False,
    allow_nan: bool = False,
    step: Step = lambda words: None,
) -> Sector:
    """Read and check everything that a case describes.

    Parameters
    ----------
    step : called with a few words before each slow part, for a progress display.

    Raises
    ------
    InputError
        For anything wrong with the case or its models (exit status 2).
    """
    group = _group(case)
    tables = case.case or [CaseTable(name="result")]
    behaviours = [behaviour_of(case, t) for t in tables]
    chis = [factors(group, b) for b in behaviours]
    step("reading")
    models = read_models(case, tables, allow_nan)
    waves = {n: t for n, t in case.fields.items() if t.real is not None or t.amplitude is not None}
    told = next((m for m in models if _holds(m, waves)), models[0])
    mesh = told.mesh
    notes = [note for m in dict.fromkeys(models) for note in m.notes]
    check_mesh(told)
    for table, model in zip(tables, models, strict=True):
        if model is not told:
            check_same_mesh(told, model, table.name)
            notes += check_same_arrays(told, model, table.name, skip_undeclared, set(waves))
    cases = tuple(
        LoadCase(t.name, m, b, chi, t.factor * mode_factor(t, chi))
        for t, m, b, chi in zip(tables, models, behaviours, chis, strict=True)
    )
    results = results_of(case, cases)
    check_linear(case, cases)
    odd = not all(is_plain(chi) for chi in chis)
    frames = frames_of(case, {n: direction(t.axis, f"frames.{n}.axis")
                              for n, t in case.frames.items()})  # fmt: skip
    scaled = bool(case.sum) or any(c.factor != 1.0 for c in cases)
    fields, left_out = fields_of(told, case, frames, skip_undeclared, odd, scaled)
    notes += left_out
    check_shear(fields, group.placements)
    for c in cases:
        if not c.plain:
            check_load_odd(fields, f"case {c.name!r} ({c.behaviour.words()}), antisymmetric")
        check_complex(fields, c)
    if case.sum:
        check_invariants(fields, f"the sum {case.sum[0].name!r}")
    check_storage(fields, group)
    check_integers(fields, cases, group)
    check_constant(fields, cases, results)
    invalid = check_numbers(fields, cases, allow_nan)
    step("checking the copies")
    tolerance = case.seam.tolerance
    check_sides(mesh, group, tolerance)
    step("finding seams")
    seams = find_seams(mesh, group, tolerance)
    notes += check_touch(mesh, group, seams, case.seam.open == "keep apart")
    notes += check_turns(mesh, group, seams, tolerance)
    notes += _order_notes(fields)
    return Sector(case, group, told, tuple(fields), cases, results, seams, tuple(notes),
                  invalid)  # fmt: skip


def _holds(model: Model, waves: Mapping[str, FieldTable]) -> bool:
    """Whether a model has the arrays of all complex fields."""
    names = {*model.point_data, *model.cell_data}
    return all(
        {*(t.real or t.amplitude or []), *(t.imaginary or t.phase_degrees or [])} <= names
        for t in waves.values()
    )


def direction(word: Direction, key: str) -> Floats:
    """The unit vector that a direction of the case file means."""
    vector = np.eye(3)["xyz".index(word)] if isinstance(word, str) else np.array(word, dtype=float)
    if not vector.any():
        raise InputError(f"{key} = [0, 0, 0] has no direction.", 'Expected "x", "y", "z" or three '
                         "numbers that are not all zero.")  # fmt: skip
    return unit(vector)


def _group(case: CaseFile) -> Group:
    planes = [
        CutPlane(n, direction(m.normal, f"mirror {n!r}: normal"), np.array(m.point, dtype=float))
        for n, m in zip(plane_names(case), case.mirror, strict=True)
    ]
    axis = None
    if case.cyclic is not None:
        axis = CyclicAxis(case.cyclic.sectors, direction(case.cyclic.axis, "cyclic.axis"),
                          np.array(case.cyclic.point, dtype=float))  # fmt: skip
    return make_group(planes, axis)


def _order_notes(fields: list[Field]) -> list[str]:
    """Stored orders of tensors that neither the case nor the file names."""
    return [
        f"{f.name!r} is taken as stored in the order {' '.join(f.quantity.components)}"
        + (f", {'engineering' if f.quantity.engineering else 'tensor'} shear"
           if f.kind == "symmetric tensor" else "")
        + f"; if not, set fields.{f.name}.components"
        for f in fields
        if f.order_assumed
    ]  # fmt: skip
