"""Re-reference of a case: the free rigid-body motion taken out of what the files hold."""

from __future__ import annotations

from dataclasses import replace

import numpy as np

from expander.audit.rigid import free_motions
from expander.audit.statics import global_vectors, multiplicity, plane_normal
from expander.errors import InputError
from expander.fields import Field
from expander.model import Model
from expander.quantities import quantity
from expander.rereference import remove
from expander.resolve import Numbers, from_global
from expander.roles import having
from expander.sector import Sector, on_axis


def referenced(sector: Sector) -> Sector:
    """The sector with the motion taken out of displacement and rotation, as the case asks.

    What was removed is a note, so that it is printed and recorded.

    Raises
    ------
    InputError
        If there is no displacement, no free motion, or the motion asked for would break the
        declared load behaviour.
    """
    table = sector.case.re_reference
    if table is None:
        return sector
    fields = having(sector.fields, "displacement")
    if not fields:
        raise InputError(
            "re_reference: the model has no displacement.",
            'Declare it with kind = "polar vector" and a name that says displacement.',
        )
    cases, notes = [], list(sector.notes)
    for case in sector.cases:
        motions = free_motions(sector.group, case.chi, plane_normal(sector),
                               sector.mesh.bounds.mean(axis=0))  # fmt: skip
        try:
            found = remove(
                motions, sector.mesh.points,
                global_vectors(sector, fields[0], case, known=False), table.method,
                1.0 / multiplicity(sector), table.nodes,
            )  # fmt: skip
        except InputError as error:
            raise InputError(f"re_reference, case {case.name!r}: {error.found}",
                             error.remedy) from None  # fmt: skip
        model = case.model
        for f in fields:
            rest = found.of_displacement(sector.mesh.points, global_vectors(sector, f, case))
            model = _with_values(sector, model, f, rest)
        for f in having(sector.fields, "rotation"):
            model = _with_values(sector, model, f,
                                 found.of_rotation(global_vectors(sector, f, case)))  # fmt: skip
        cases.append(replace(case, model=model))
        notes.append(f"case {case.name!r}: re-referenced by {table.method}: taken out "
                     f"{found.words}")  # fmt: skip
    return replace(sector, cases=tuple(cases), notes=tuple(notes),
                   model=cases[0].model)  # fmt: skip


def _with_values(sector: Sector, model: Model, f: Field, vectors: Numbers) -> Model:
    """The model with a vector field's arrays replaced; `vectors` (n, 3) in global directions."""
    mesh = sector.mesh
    q = f.quantity if f.frame.letters == "x y z" else f.quantity.complete
    full = quantity(f.kind, 3)
    stored = from_global(f, vectors @ (q.gather @ full.spread).T, mesh.points, on_axis(mesh))
    data = dict(model.point_data)
    names = f.stored_arrays(model)
    parts = [(names, stored)]
    if f.second and names == f.arrays:
        first, second = (
            (np.abs(stored), np.rad2deg(np.angle(stored)))
            if f.polar
            else (stored.real, stored.imag)
        )
        parts = [(names, first), (f.second, second)]
    for arrays, values in parts:
        for k, name in enumerate(arrays):
            old = np.asarray(data[name])
            kind = old.dtype if np.issubdtype(old.dtype, np.floating) else np.dtype(float)
            new = old.reshape(len(old), -1).astype(kind)
            columns = list(f.columns if f.columns is not None else range(new.shape[1]))
            columns = [0] if len(arrays) > 1 else columns
            part = values[:, [k]] if len(arrays) > 1 else values
            new[:, columns] = np.where(np.isfinite(new[:, columns]), part, new[:, columns])
            data[name] = new.reshape(old.shape)
    return replace(model, point_data=data)
