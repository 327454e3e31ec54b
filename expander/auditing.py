"""The audit of the whole body: totals, mass, pieces, overlaps and rigid-body freedom.

All of it is found on the sector and carried around by the group; only volume and mass are
integrated a second time over the copies' own cells, so that a cell turned inside out would show.
"""

from __future__ import annotations

from dataclasses import dataclass, replace

import numpy as np

from expander.audit.connected import Pieces, connected
from expander.audit.mass import Properties, integrated, nodal, of_whole, properties
from expander.audit.overlap import Overlaps, overlaps
from expander.audit.section import Section, across
from expander.audit.statics import CaseAudit, case_audit, multiplicity
from expander.behaviours import Factors
from expander.body import plan_body
from expander.casefile import OutputTable, section_names
from expander.cells import dimensions
from expander.errors import InputError
from expander.fields import Field
from expander.loadcases import LoadCase
from expander.placements import Floats
from expander.quantities import quantity
from expander.resolve import Numbers, to_global
from expander.roles import having
from expander.sector import Sector, Step, direction, on_axis
from expander.topology import cell_centres
from expander.tradewords import normalised


@dataclass(frozen=True, eq=False)
class Audit:
    """The whole body.

    Attributes
    ----------
    mass_from : what the mass was taken from, in words.
    sector_mass, carried_mass, body_mass : of the modelled part, carried around, and integrated
        over all copies.
    sections : by name and result: the force and moment across a plane.
    section_stress : the field they are from, or "".
    """

    cases: tuple[CaseAudit, ...]
    about: Floats
    mass_from: str
    sector_mass: Properties
    carried_mass: Properties
    body_mass: Properties
    pieces: Pieces
    overlaps: Overlaps
    sections: tuple[tuple[str, str, Section], ...]
    section_stress: str = ""


def audit(sector: Sector, chis: dict[str, Factors], step: Step = lambda words: None) -> Audit:
    """Audit the whole body of a case.

    Parameters
    ----------
    chis : the factors of each case by name, with the direction of a wave decided.
    """
    mesh, group = sector.mesh, sector.group
    about = np.array(next((e.about for e in sector.case.expect), (0.0, 0.0, 0.0)), dtype=float)
    shares = multiplicity(sector)
    step("adding up forces")
    cases = tuple(case_audit(sector, c, chis[c.name], about, shares) for c in sector.cases)
    step("integrating mass")
    mass_from, own, round_, direct = _mass(sector)
    step("connecting pieces")
    parts = having(sector.fields, "part")
    labels = parts[0].values(sector.model)[:, 0].astype(np.int64) if parts else None
    name = parts[0].name if parts else "part"
    found = connected(mesh, group, sector.seams.nodes, labels, name)
    step("looking for overlaps")
    overlap = overlaps(mesh, group)
    step("cutting sections")
    stress = _section_stress(sector)
    return Audit(cases, about, mass_from, own, round_, direct, found, overlap,
                 tuple(_sections(sector, chis, stress)),
                 "" if stress is None else stress.name)  # fmt: skip


def _mass(sector: Sector) -> tuple[str, Properties, Properties, Properties]:
    """Mass of the sector, carried around, and integrated over all copies; and what it is from."""
    mesh, model = sector.mesh, sector.model
    density, thickness = (having(sector.fields, r) for r in ("density", "thickness"))
    rho = density[0].values(model)[:, 0].astype(float) if density else 1.0
    dims = dimensions(mesh.types)
    skin = 0.0 if (dims == 3).any() else 1.0  # what shells weigh beside solids is not known
    t = thickness[0].values(model)[:, 0].astype(float) if thickness else skin
    words = f"the cells and {density[0].name!r}" if density else "the cells with density 1"
    if (dims == 2).any():
        words += f" and {thickness[0].name!r}" if thickness else f" and thickness {skin:g}"
    own = properties(mesh, rho, t)
    bare = replace(
        sector, fields=(), cases=tuple(replace(c, chi=np.ones(len(sector.group)))
                                       for c in sector.cases),
        case=sector.case.model_copy(update={"output": OutputTable()}),
    )  # fmt: skip
    body = integrated(plan_body(bare), rho, t)
    lumped = having(sector.fields, "lumped mass")
    if lumped and not density:
        own_nodal = nodal(mesh.points, lumped[0].values(model)[:, 0].astype(float))
        mass = replace(own, mass=own_nodal.mass, centre=own_nodal.centre,
                       inertia=own_nodal.inertia)  # fmt: skip
        round_ = of_whole(mass, sector.group.placements)
        return f"the nodal masses {lumped[0].name!r}", mass, round_, body
    return words, own, of_whole(own, sector.group.placements), body


_USUAL = ("cell_stress", "element_stress", "stress", "stresses")  # cells are in equilibrium first


def _section_stress(sector: Sector) -> Field | None:
    """The stress that sections are taken from: the one named, else the one called stress."""
    if not sector.case.section:
        return None
    stresses = {f.name: f for f in having(sector.fields, "stress") if f.follows == "load"}
    named = {s.field for s in sector.case.section if s.field is not None}
    if not stresses or len(named) > 1 or not named <= set(stresses):
        raise InputError(
            "A [[section]] needs one stress"
            + (f", found section.field = {', '.join(sorted(named))}" if named else "") + ".",
            f"Stresses of the model: {', '.join(stresses) or 'none'}; one is declared with kind = "
            '"symmetric tensor" and a name that says stress.',
        )  # fmt: skip
    if named:
        return stresses[named.pop()]
    usual = [stresses[n] for n in stresses if normalised(n) in _USUAL]
    found = sorted(usual, key=lambda f: (f.on != "cells", _USUAL.index(normalised(f.name))))
    if not found and len(stresses) > 1:
        raise InputError(
            f"[[section]]: several stresses may be meant: {', '.join(stresses)}.",
            'Add field = ".." to the [[section]].',
        )
    return found[0] if found else next(iter(stresses.values()))


def _sections(
    sector: Sector, chis: dict[str, Factors], field: Field | None
) -> list[tuple[str, str, Section]]:
    """Force and moment across each section for each result, cases added up."""
    if field is None:
        return []
    thickness = having(sector.fields, "thickness")
    t = thickness[0].values(sector.model)[:, 0].astype(float) if thickness else 1.0
    found = []
    for name, table in zip(section_names(sector.case), sector.case.section, strict=True):
        normal = direction(table.normal, f"section {name!r}: normal")
        for result in sector.results:
            parts = [
                (a, across(sector.mesh, sector.group, chis[sector.cases[k].name],
                           _six(sector, field, sector.cases[k]), field.on, normal, table.point,
                           table.about, t))
                for k, a in result.terms
            ]  # fmt: skip
            first = parts[0][1]
            found.append((name, result.name, replace(
                first, force=np.sum([a * s.force for a, s in parts], axis=0),
                moment=np.sum([a * s.moment for a, s in parts], axis=0))))  # fmt: skip
    return found


def _six(sector: Sector, field: Field, case: LoadCase) -> Numbers:
    """(n, 6) a stress as xx yy zz xy yz zx in global directions."""
    mesh = sector.mesh
    places = mesh.points if field.on == "points" else cell_centres(mesh)
    values = to_global(field, field.values(case.model), places, on_axis(mesh))
    values = np.nan_to_num(values, posinf=0.0, neginf=0.0)
    q = field.quantity if field.frame.letters == "x y z" else field.quantity.complete
    six = quantity("symmetric tensor", 6)
    return np.asarray(values @ (six.gather @ q.spread).T)
