"""The scene of a picture: the two grids, their deformation, and the words around them."""

from __future__ import annotations

from dataclasses import dataclass, replace
from typing import TYPE_CHECKING

import numpy as np
from numpy.typing import ArrayLike

from expander.body import WholeBody
from expander.fields import Field
from expander.frames import Cylindrical
from expander.images import arrays_of, fields_in, is_complex, left_out_of
from expander.loadcases import Result
from expander.placements import Floats
from expander.resolve import to_global
from viewer.colours import rounded
from viewer.shown import Shown, choose, finite_range, moving_field
from viewer.views import View, automatic

if TYPE_CHECKING:
    import pyvista

# Arrays of the grids of a scene, beside the `copy` of each cell.
VALUE = "shown"
MOVED = "moved"

_MOVED_PART = 0.06  # the largest displacement is drawn as this part of the body's size


@dataclass(frozen=True, eq=False)
class Scene:
    """What a picture shows.

    Attributes
    ----------
    title, words, source : the result's name, its load words, the case it belongs to.
    sector, body : modelled part and whole body, `VALUE` on points or cells if there is a field,
        the displacement `MOVED` on points if there is one.
    shown : field and measure of the colours; None if the model holds no fields.
    span : smallest and largest value over the whole body; None if no value is a finite number.
    missing : whether some values are not finite numbers.
    factor : the displacement is drawn so many times as large.
    largest : the largest displacement, with its unit.
    copies : number of copies in the body, and in the whole group.
    outlined : whether the modelled part is among them.
    """

    title: str
    words: str
    source: str
    sector: pyvista.UnstructuredGrid
    body: pyvista.UnstructuredGrid
    shown: Shown | None
    span: tuple[float, float] | None
    missing: bool
    factor: float
    largest: tuple[float, str] | None
    view: View
    copies: tuple[int, int]
    outlined: bool


def scene_of(
    body: WholeBody,
    result: Result,
    field: str | None = None,
    component: str | None = None,
    factor: float | None = None,
    towards: ArrayLike | None = None,
    moment: float | None = None,
) -> Scene:
    """The scene of one result of a prepared case.

    Parameters
    ----------
    field, component : what gives the colours; see `shown.choose`.
    factor : of the deformation; the largest displacement is drawn as about 6 % of the body's
        size if None.
    towards : direction from the body to the eye; a pleasant one if None.
    moment : of the cycle of a complex result, in degrees of omega t; its beginning if None.

    Raises
    ------
    InputError
        For an unknown field or component, with those that there are.
    """
    at = _moment(body, result) if moment is None else moment
    fields = fields_in(body, result, at)
    shown = choose(fields, field, component, left_out_of(body, result))
    moving = moving_field(fields)
    grid = _grid(body, result, shown, moving, at)
    sector = _grid(replace(body, copies=(0,)), result, shown, moving, at)
    values = [_values(g) for g in (grid, sector)] if shown else []
    largest = None
    if moving is not None:
        lengths = np.linalg.norm(np.asarray(grid.point_data[MOVED]), axis=1)
        largest = (float(lengths.max(initial=0.0)), moving.unit or body.case.model.unit or "")
    if factor is None:
        size = float(np.linalg.norm(np.ptp(np.asarray(grid.points, dtype=float), axis=0)))
        factor = rounded(_MOVED_PART * size / largest[0]) if largest and largest[0] > 0 else 0.0
    if towards is None:
        # The unit cell of the picture is the body, also when only some copies are shown
        view = automatic(
            np.asarray(grid.points, dtype=float), np.asarray(sector.points, float), body.group
        )
    else:
        view = View.looking_from(towards)
    return Scene(
        title=_title(body, result, at),
        words=_words(body, result),
        source=_source(body),
        sector=sector,
        body=grid,
        shown=shown,
        span=finite_range(values),
        missing=any(not np.isfinite(v).all() for v in values),
        factor=factor,
        largest=largest,
        view=view,
        copies=(len(body.copies), len(body.group)),
        outlined=0 in body.copies,
    )


def _grid(
    body: WholeBody,
    result: Result,
    shown: Shown | None,
    moving: Field | None,
    moment: float | None,
) -> pyvista.UnstructuredGrid:
    """The copies of `body` with no more arrays than the picture needs."""
    from expander.writers.grid import build_grid

    wanted = {f.name for f in (shown.field if shown else None, moving) if f is not None}
    arrays = [
        a for a in arrays_of(body, result, moment)
        if a.section not in ("points", "cells") or a.name == "copy" or a.name in wanted
    ]  # fmt: skip
    grid = build_grid(arrays, {})
    stored: dict[str, Floats] = {}
    for name in wanted:
        data = grid.point_data if name in grid.point_data else grid.cell_data
        array = np.asarray(data[name], dtype=float)
        stored[name] = array.reshape(len(array), -1)
        del data[name]
    if shown is not None:
        data = grid.point_data if shown.field.on == "points" else grid.cell_data
        data[VALUE] = _measured(shown, stored[shown.field.name])
    if moving is not None:
        moved = _global_vectors(moving, stored[moving.name], grid, body.on_axis)
        grid.point_data[MOVED] = np.nan_to_num(moved, nan=0.0, posinf=0.0, neginf=0.0)
    return grid


def _moment(body: WholeBody, result: Result) -> float | None:
    """A complex result is drawn at the beginning of its cycle."""
    waves = any(is_complex(body, result, f) for f in body.fields)
    return 0.0 if waves and not result.real else None


def _measured(shown: Shown, stored: Floats) -> Floats:
    """The measure of each row, (n,); no number where a stored component is none."""
    whole = np.isfinite(stored).all(axis=1)
    values = np.full(len(stored), np.nan)
    values[whole] = shown.measure.values(stored[whole])
    return values


def _global_vectors(
    f: Field, stored: Floats, grid: pyvista.UnstructuredGrid, on_axis: float
) -> Floats:
    places = np.asarray(grid.points, dtype=float)
    turned = to_global(f, stored, places, on_axis) if isinstance(f.frame, Cylindrical) else stored
    return np.asarray(turned @ f.quantity.spread.T)


def _values(grid: pyvista.UnstructuredGrid) -> Floats:
    data = grid.point_data if VALUE in grid.point_data else grid.cell_data
    return np.asarray(data[VALUE])


def _source(body: WholeBody) -> str:
    """The case file with its folder, enough to know it by."""
    source = (body.case.source or body.cases[0].model.source).absolute()
    return f"{source.parent.name}/{source.name}".lstrip("/")


def _title(body: WholeBody, result: Result, moment: float | None) -> str:
    """The result's name; a single result has none of its own and is called after its model."""
    name = result.name if body.case.case else body.cases[0].model.source.stem
    if moment is None:
        return name
    mean = f" + {body.cases[result.mean].name}" if result.mean is not None else ""
    when = "beginning of the cycle" if moment == 0.0 else f"{moment:g} degrees into the cycle"
    return f"{name}{mean}, {when}"


def _words(body: WholeBody, result: Result) -> str:
    """The load words; for a sum those of its terms."""
    terms = [(body.cases[k], a) for k, a in result.terms]
    if len(terms) == 1 and terms[0][1] == 1.0:
        return terms[0][0].behaviour.words()
    return "  +  ".join(
        (f"{a:g} × " if a != 1.0 else "") + f"{c.name} ({c.behaviour.words()})" for c, a in terms
    )
