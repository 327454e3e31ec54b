"""Phases: which way round a complex amplitude runs, where that is left to its seam.

Two real shapes of one frequency make ``a + i b`` or ``a - i b``; which of them goes with
``exp(+i h k alpha)`` shows at the faces of the sector, and nowhere else: the shapes are not
orthogonal on the sector.
"""

from __future__ import annotations

from dataclasses import replace

import numpy as np

from expander.behaviours import Behaviour, Factors, factors
from expander.checking.declared import primary
from expander.checking.jumps import jump_at
from expander.checking.seamlist import Seam, seams_of
from expander.closing import largest_value
from expander.fields import Field
from expander.loadcases import LoadCase, results_of
from expander.sector import Sector


def decided(sector: Sector) -> Sector:
    """The sector with ``phase = "auto"`` decided in every case where it makes a difference.

    What was decided, and by how much, is a note.
    """
    open_ = [c for c in sector.cases if c.complex_factors and c.behaviour.phase == "auto"]
    if not open_:
        return sector
    seams = seams_of(sector)
    notes, cases = list(sector.notes), []
    for case in sector.cases:
        if case not in open_:
            cases.append(case)
            continue
        gaps = {p: _gap(sector, seams, case, chi) for p, chi in _both(sector, case).items()}
        best = "-" if gaps["-"] < gaps["+"] else "+"
        words = (
            f"the seam closes with {best!r} (jump {100 * gaps[best]:.2g} % of the largest value, "
            f"{100 * max(gaps.values()):.2g} % with the other)"
            if np.isfinite(gaps[best])
            else 'there is no complex field on points to tell it by: "+" is assumed'
        )
        notes.append(f'case {case.name!r}, phase = "auto": {words}')
        behaviour = replace(case.behaviour, phase=best)
        cases.append(replace(case, behaviour=behaviour, chi=factors(sector.group, behaviour)))
    return replace(sector, cases=tuple(cases), notes=tuple(notes),
                   results=results_of(sector.case, tuple(cases)))  # fmt: skip


def _both(sector: Sector, case: LoadCase) -> dict[str, Factors]:
    load, h = case.behaviour.load, case.behaviour.nodal_diameters
    return {p: factors(sector.group, Behaviour(load, h, p)) for p in ("+", "-")}


def _gap(sector: Sector, seams: list[Seam], case: LoadCase, chi: Factors) -> float:
    """Root mean square of the jumps of all fields, as part of their largest values.

    Fields that must agree tell it; where there are none, those recovered from elements do.
    """
    found: list[float] = []
    for fields in _telling(sector):
        for f in fields:
            values = f.values(case.model)
            scale = largest_value(values)
            for seam in seams if scale > 0.0 else ():
                jump = jump_at(sector.mesh, sector.group, seam, f, case, values, chi)
                found.append(float(np.mean(jump.lengths**2)) / scale**2 if len(jump.lengths) else 0)
        if found:
            return float(np.sqrt(np.mean(found)))
    return np.inf


def _telling(sector: Sector) -> tuple[list[Field], list[Field]]:
    waves = [f for f in sector.fields if f.complex_values and f.on == "points"]
    return [f for f in waves if primary(f)], [f for f in waves if f.seam == "recovered"]
