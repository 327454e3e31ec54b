"""Statics of a load case: totals, equilibrium, rigid-body freedom and magnitudes."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from expander.audit.equilibrium import BALANCED, Balance, InPlane, balance, in_plane_share
from expander.audit.magnitudes import Magnitude, body_size, magnitudes
from expander.audit.rigid import Motions, common_point, free_motions, holding, share
from expander.audit.totals import (
    Resultant,
    SupportSet,
    Vanishing,
    of_sector,
    per_copy,
    scale_of,
    support_sets,
    vanishing,
    whole,
)
from expander.behaviours import Factors
from expander.cells import dimensions
from expander.fields import Field
from expander.loadcases import LoadCase
from expander.placements import Floats
from expander.quantities import quantity
from expander.resolve import Numbers, acting, product, to_global
from expander.roles import having
from expander.sector import Sector, on_axis


@dataclass(frozen=True, eq=False)
class Total:
    """Resultants of one field of nodal forces, with the nodal moments that go with it.

    Attributes
    ----------
    role : "applied force", "reaction" or "nodal force".
    fields : names. sector, body : of the modelled part and of the whole body, about one point.
    scale : sums of the magnitudes of forces and of their moments over the whole body.
    supports : for reactions: each support of the sector with its resultant there and in the body.
    """

    role: str
    fields: tuple[str, ...]
    sector: Resultant
    body: Resultant
    copies: tuple[Resultant, ...]
    scale: tuple[float, float]
    supports: tuple[tuple[SupportSet, Resultant, Resultant], ...] = ()


@dataclass(frozen=True, eq=False)
class CaseAudit:
    """One load case in the whole body.

    Attributes
    ----------
    balanced : the fields whose sum was tried for equilibrium, and how well it balances, with
        moments about the middle of the body. None where that cannot be tried.
    not_balanced : why it was not tried, in words.
    in_plane : what forces at seam nodes make of it, where it does not balance.
    motions, share, held : rigid-body motions left free, the part of the displacement that is one,
        and the work of the reactions in each; `held` is None without reactions.
    """

    case: LoadCase
    chi: Factors
    totals: tuple[Total, ...]
    vanishing: Vanishing
    balanced: tuple[tuple[str, ...], Balance] | None
    not_balanced: str
    in_plane: InPlane | None
    motions: Motions
    share: float
    coefficients: Numbers
    held: Numbers | None
    magnitudes: tuple[Magnitude, ...]


def multiplicity(sector: Sector) -> NDArray[np.int64]:
    """(n,) how many copies share each node; 1 away from seams."""
    classes = sector.seams.nodes
    count = np.ones(sector.mesh.point_count, dtype=np.int64)
    if len(classes.items):
        count[classes.items] = np.diff(np.append(classes.starts, len(classes.item)))
    return count


def global_vectors(sector: Sector, f: Field, case: LoadCase, known: bool = True) -> Numbers:
    """(n, 3) a vector in global directions; components that are not stored are zero.

    What is not finite is taken as zero, or left as it is if not `known`.
    """
    mesh = sector.mesh
    values = to_global(f, f.values(case.model), mesh.points, on_axis(mesh))
    q = f.quantity if f.frame.letters == "x y z" else f.quantity.complete
    if known:
        values = np.nan_to_num(values, posinf=0.0, neginf=0.0)
    return product(values, q.spread)


def _added(sector: Sector, fields: Sequence[Field], case: LoadCase) -> Numbers | None:
    parts = [global_vectors(sector, f, case) for f in fields]
    return np.asarray(np.sum(parts, axis=0)) if parts else None


# Loads are compared with themselves; but where reactions are far larger, as under temperature, no
# better than these are printed.
_OF_REACTIONS = 0.01


@dataclass(frozen=True)
class Forces:
    """Fields of nodal forces, with the nodal moments that go with them, that are one thing."""

    role: str
    forces: tuple[Field, ...]
    moments: tuple[Field, ...] = ()

    @property
    def names(self) -> tuple[str, ...]:
        return tuple(f.name for f in self.forces + self.moments)


def forces_of(sector: Sector) -> list[Forces]:
    """Applied loads together, reactions together, and every other field of nodal forces alone:
    a contact force may be listed among the nodal forces already."""
    found = []
    for force, moment in (("applied force", "applied moment"), ("reaction", "reaction moment")):
        both = Forces(force, tuple(having(sector.fields, force)),
                      tuple(having(sector.fields, moment)))  # fmt: skip
        found += [both] if both.names else []
    nodal = having(sector.fields, "nodal force")
    moments = tuple(having(sector.fields, "nodal moment"))
    found += [Forces("nodal force", (f,), moments if len(nodal) == 1 else ()) for f in nodal]
    return found + [Forces("other force", (f,)) for f in having(sector.fields, "other force")]


def case_audit(
    sector: Sector, case: LoadCase, chi: Factors, about: Floats, shares: NDArray[np.int64]
) -> CaseAudit:
    mesh, group = sector.mesh, sector.group
    forces = forces_of(sector)
    there = [total_of(sector, case, chi, about, f) for f in forces]
    # Far from the body every couple is small beside force times distance.
    middle = common_point(group, mesh.bounds.mean(axis=0))
    balanced, words = _balance(sector, case, chi, middle, forces)
    loads, reaction = _loads(forces), next((f for f in forces if f.role == "reaction"), None)
    in_plane = None
    if balanced is not None and balanced[1].relative > BALANCED and loads and reaction:
        listed = _added(sector, loads.forces, case)
        back = total_of(sector, case, chi, middle, reaction).body
        if listed is not None:
            in_plane = in_plane_share(mesh.points, listed, shares, group, chi, back)
    motions = free_motions(group, chi, plane_normal(sector),
                           mesh.bounds.mean(axis=0))  # fmt: skip
    u = having(sector.fields, "displacement")
    rotation = having(sector.fields, "rotation")
    part = 0.0
    coefficients: Numbers = np.zeros(motions.count)
    if u:
        part, coefficients = share(
            motions, mesh.points, global_vectors(sector, u[0], case, known=False), 1.0 / shares
        )
    held = None
    if reaction is not None and reaction.forces:
        carried = _resolved_sum(sector, reaction.forces, case, chi)
        size = next((t.scale[0] for t in there if loads is not None and t.fields == loads.names),
                    0.0)  # fmt: skip
        held = holding(motions, mesh.points, carried / shares[:, None], size / len(group))
    sizes = magnitudes(
        body_size(group, mesh.points),
        global_vectors(sector, u[0], case) if u else None,
        global_vectors(sector, rotation[0], case) if rotation else None,
    )
    return CaseAudit(case, chi, tuple(there), vanishing(group, chi, about), balanced, words,
                     in_plane, motions, part, coefficients, held, sizes)  # fmt: skip


def plane_normal(sector: Sector) -> Floats | None:
    """Normal of a plane model: all nodes in a plane, 2D cells alone, nothing moves out of it."""
    mesh = sector.mesh
    if (dimensions(mesh.types) != 2).any():
        return None
    points = mesh.points.astype(float) - mesh.bounds.mean(axis=0)
    normal = np.linalg.eigh(points.T @ points)[1][:, 0]
    if np.abs(points @ normal).max() > 1e-6 * mesh.size:
        return None
    for f in having(sector.fields, "displacement"):
        for case in sector.cases:
            u = global_vectors(sector, f, case)
            if np.abs(u @ normal).max(initial=0.0) > 1e-9 * np.abs(u).max(initial=0.0):
                return None  # a plate or shell, which bends
    return np.asarray(normal) if having(sector.fields, "displacement") else None


def total_of(sector: Sector, case: LoadCase, chi: Factors, about: Floats, fields: Forces) -> Total:
    """The resultant of fields of nodal forces."""
    mesh, group = sector.mesh, sector.group
    f, m = _added(sector, fields.forces, case), _added(sector, fields.moments, case)
    f = np.zeros((mesh.point_count, 3)) if f is None else f
    own = of_sector(mesh.points, f, m, about)
    sizes = scale_of(mesh.points, f, m, about)
    supports = []
    if fields.role == "reaction" and fields.forces:
        supports = _supports(sector, case, chi, f, m, about, fields.forces)
    return Total(
        fields.role, fields.names, own, whole(own, group, chi), tuple(per_copy(own, group, chi)),
        (len(group) * sizes[0], len(group) * sizes[1]), tuple(supports),
    )  # fmt: skip


def _resolved_sum(sector: Sector, fields: Sequence[Field], case: LoadCase, chi: Factors) -> Numbers:
    """(n, 3) forces with the shares of all copies added where copies share a node."""
    total = _added(sector, fields, case)
    assert total is not None
    classes, group = sector.seams.nodes, sector.group
    if not len(classes.items):
        return total
    q = quantity("polar vector", 3)
    terms = np.empty((len(classes.item), 3), dtype=np.result_type(total, chi))
    for s in np.unique(classes.via).tolist():
        rows = np.flatnonzero(classes.via == s)
        A = acting(q, group.placements[s].Q, chi[s].item(), "load")
        terms[rows] = product(total[classes.source[rows]], A)
    out = total.astype(terms.dtype)
    out[classes.items] = np.add.reduceat(terms, classes.starts, axis=0)
    return out


def _supports(
    sector: Sector,
    case: LoadCase,
    chi: Factors,
    forces: Numbers,
    moments: Numbers | None,
    about: Floats,
    fields: Sequence[Field],
) -> list[tuple[SupportSet, Resultant, Resultant]]:
    """Each support with its resultant on the modelled part and in the whole body."""
    mesh, group = sector.mesh, sector.group
    added = _resolved_sum(sector, fields, case, chi)
    sets = {
        f.name: f.values(sector.model)[:, 0] == 1
        for f in having(sector.fields, "set")
        if np.isin(f.values(sector.model), (0, 1)).all()
    }
    single = any(f.stored_type(case.model) == np.float32 for f in fields)
    least = 1e-6 if single else 1e-9
    largest = float(np.linalg.norm(forces, axis=1).max(initial=0.0))
    added[np.linalg.norm(added, axis=1) <= least * largest] = 0.0
    # What cancels between copies is the reaction of the seam's own condition, and no support.
    shares = added / multiplicity(sector)[:, None]
    found = []
    for support in support_sets(mesh, added, sets, least):
        nodes = support.nodes
        if not len(nodes):
            continue
        own = of_sector(mesh.points[nodes], shares[nodes],
                        None if moments is None else moments[nodes], about)  # fmt: skip
        found.append((support, own, whole(own, group, chi)))
    return found


def _loads(forces: Sequence[Forces]) -> Forces | None:
    """What is the load: applied forces, or the only other field of nodal forces."""
    applied = [f for f in forces if f.role == "applied force"]
    nodal = [f for f in forces if f.role == "nodal force"]
    return applied[0] if applied else nodal[0] if len(nodal) == 1 else None


def _balance(
    sector: Sector, case: LoadCase, chi: Factors, about: Floats, forces: Sequence[Forces]
) -> tuple[tuple[tuple[str, ...], Balance] | None, str]:
    """Equilibrium of loads and reactions, or of nodal forces that hold the reactions already.

    Nodal forces without a word more may be the loads, or the forces of the elements, which at the
    supports are the reactions.
    """
    loads = _loads(forces)
    reaction = next((f for f in forces if f.role == "reaction"), None)
    if loads is None:
        several = any(f.role == "nodal force" for f in forces)
        return None, (
            "several fields of nodal forces, none called applied" if several
            else "reactions, but no loads in the file" if reaction is not None
            else "no nodal forces in the file"
        )  # fmt: skip
    a = total_of(sector, case, chi, about, loads)
    none = Resultant(np.zeros(3), np.zeros(3), a.body.about)
    if reaction is None:
        alone = balance(a.body, none, *a.scale)
        if loads.role == "nodal force" and alone.relative <= BALANCED:
            return (a.fields, alone), ""
        return None, "no reactions in the file"
    b = total_of(sector, case, chi, about, reaction)
    scales = [max(x, _OF_REACTIONS * y) for x, y in zip(a.scale, b.scale, strict=True)]
    if loads.role == "nodal force" and _hold_reactions(sector, case, loads, reaction):
        return (a.fields, balance(a.body, none, *scales)), ""
    return ((*a.fields, *b.fields), balance(a.body, b.body, *scales)), ""


def _hold_reactions(sector: Sector, case: LoadCase, loads: Forces, reaction: Forces) -> bool:
    """Whether nodal forces are the reactions where there are any."""
    f, r = _added(sector, loads.forces, case), _added(sector, reaction.forces, case)
    if f is None or r is None:
        return False
    size = np.linalg.norm(r, axis=1)
    held = size > 1e-6 * size.max(initial=0.0)
    off = float(np.linalg.norm(f[held] - r[held]))
    return bool(held.any()) and off <= 0.1 * float(np.linalg.norm(r[held]))
