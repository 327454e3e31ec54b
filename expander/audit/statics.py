"""Statics of a load case: totals, equilibrium, rigid-body freedom and magnitudes."""

from __future__ import annotations

from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

from expander.audit.equilibrium import BALANCED, Balance, InPlane, balance, in_plane_share
from expander.audit.magnitudes import Magnitude, body_size, magnitudes
from expander.audit.rigid import Motions, free_motions, holding, share
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
    balanced : the fields whose sum was tried for equilibrium, and how well it balances; of
        several that were tried, the best. None where there is nothing to balance.
    in_plane : what forces at seam nodes make of it, where it does not balance.
    motions, share, held : rigid-body motions left free, the part of the displacement that is one,
        and the work of the reactions in each; `held` is None without reactions.
    """

    case: LoadCase
    chi: Factors
    totals: tuple[Total, ...]
    vanishing: Vanishing
    balanced: tuple[tuple[str, ...], Balance] | None
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


def _added(sector: Sector, fields: list[Field], case: LoadCase) -> Numbers | None:
    parts = [global_vectors(sector, f, case) for f in fields]
    return np.asarray(np.sum(parts, axis=0)) if parts else None


# Loads are compared with themselves; but where reactions are far larger, as under temperature, no
# better than these are printed.
_OF_REACTIONS = 0.01

_PAIRS = (("applied force", "applied moment"), ("reaction", "reaction moment"),
          ("nodal force", "nodal moment"))  # fmt: skip


def case_audit(
    sector: Sector, case: LoadCase, chi: Factors, about: Floats, shares: NDArray[np.int64]
) -> CaseAudit:
    mesh, group = sector.mesh, sector.group
    totals = [_total(sector, case, chi, about, *pair) for pair in _PAIRS]
    there = [t for t in totals if t is not None]
    balanced = _balance(there)
    in_plane = None
    applied, reaction = (next((t for t in there if t.role == r), None)
                         for r in ("applied force", "reaction"))  # fmt: skip
    loads = applied or next((t for t in there if t.role == "nodal force"), None)
    if balanced is not None and balanced[1].relative > BALANCED and loads and reaction:
        forces = _added(sector, [f for f in sector.fields if f.name in loads.fields
                                 and f.kind == "polar vector"], case)  # fmt: skip
        assert forces is not None
        in_plane = in_plane_share(mesh.points, forces, shares, group, chi, reaction.body)
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
    if reaction is not None:
        carried = _resolved_sum(sector, "reaction", case, chi)
        held = holding(motions, mesh.points, carried / shares[:, None],
                       0.0 if loads is None else loads.scale[0] / len(group))  # fmt: skip
    sizes = magnitudes(
        body_size(group, mesh.points),
        global_vectors(sector, u[0], case) if u else None,
        global_vectors(sector, rotation[0], case) if rotation else None,
    )
    return CaseAudit(case, chi, tuple(there), vanishing(group, chi, about), balanced, in_plane,
                     motions, part, coefficients, held, sizes)  # fmt: skip


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


def _total(
    sector: Sector, case: LoadCase, chi: Factors, about: Floats, force: str, moment: str
) -> Total | None:
    """The resultant of all fields with a role; None if there are none."""
    mesh, group = sector.mesh, sector.group
    forces, moments = having(sector.fields, force), having(sector.fields, moment)
    f, m = _added(sector, forces, case), _added(sector, moments, case)
    if f is None and m is None:
        return None
    f = np.zeros((mesh.point_count, 3)) if f is None else f
    own = of_sector(mesh.points, f, m, about)
    sizes = scale_of(mesh.points, f, m, about)
    supports = _supports(sector, case, chi, f, m, about) if force == "reaction" else []
    return Total(
        force, tuple(x.name for x in forces + moments), own, whole(own, group, chi),
        tuple(per_copy(own, group, chi)), (len(group) * sizes[0], len(group) * sizes[1]),
        tuple(supports),
    )  # fmt: skip


def _resolved_sum(sector: Sector, role: str, case: LoadCase, chi: Factors) -> Numbers:
    """(n, 3) forces with the shares of all copies added where copies share a node."""
    total = _added(sector, having(sector.fields, role), case)
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
) -> list[tuple[SupportSet, Resultant, Resultant]]:
    """Each support with its resultant on the modelled part and in the whole body."""
    mesh, group = sector.mesh, sector.group
    added = _resolved_sum(sector, "reaction", case, chi)
    sets = {
        f.name: f.values(sector.model)[:, 0] == 1
        for f in having(sector.fields, "set")
        if np.isin(f.values(sector.model), (0, 1)).all()
    }
    single = any(f.values(case.model).dtype == np.float32
                 for f in having(sector.fields, "reaction"))  # fmt: skip
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


def _balance(totals: list[Total]) -> tuple[tuple[str, ...], Balance] | None:
    """Equilibrium of what must balance: loads and reactions, or all nodal forces by themselves.

    A field of nodal forces may hold the loads, or the forces of the elements, which include the
    reactions: of what it may mean, the better balance counts.
    """
    by_role = {t.role: t for t in totals}
    reaction = by_role.get("reaction")
    tried = []
    if "applied force" in by_role and reaction is not None:
        tried.append((by_role["applied force"], reaction))
    elif "nodal force" in by_role:
        forces = by_role["nodal force"]
        none = Resultant(np.zeros(3), np.zeros(3), forces.body.about)
        tried.append((forces, replace(forces, fields=(), body=none)))
        if reaction is not None:
            tried.append((forces, reaction))
    found = [
        (
            (*a.fields, *b.fields),
            balance(
                a.body,
                b.body,
                *(max(x, _OF_REACTIONS * y) for x, y in zip(a.scale, b.scale, strict=True)),
            ),
        )
        for a, b in tried
    ]
    return min(found, key=lambda pair: pair[1].relative, default=None)
