"""Totals of solved sectors against statics by hand.

The sector is solved with its seam conditions by `demo_cases.solver` (scikit-fem); equilibrium of
the whole body and totals are hand statics. Tolerance as for solved bodies, see `elastic.SOLVED`.
"""

from __future__ import annotations

from collections.abc import Mapping

import numpy as np
import pytest

import expander
from demo_cases.solver import (
    CutPlane,
    Cyclic,
    Solution,
    block,
    body_force,
    on_plane,
    point_load,
    quadratic,
    surface_load,
)
from expander.audit.equilibrium import against_expected, balance, in_plane_share
from expander.audit.totals import (
    Resultant,
    of_sector,
    per_copy,
    scale_of,
    support_sets,
    vanishing,
    whole,
)
from expander.body import WholeBody
from expander.casefile import read_case
from tests.against_outside.bodies import SHIFT, SKEW, Floats
from tests.against_outside.elastic import SOLVED, Body

X, Y, Z = SKEW.T
SPAN, WIDE, HIGH, P = 6.0, 0.5, 0.8, 40.0
FIELDS: Mapping[str, Mapping[str, object]] = {
    "nodal_force": {"kind": "polar vector", "seam": "sum"},
    "reaction": {"kind": "polar vector", "seam": "sum"},
}


def solved(tmp_path, body: Body, load: Floats) -> tuple[WholeBody, Solution]:
    """The plan of the expansion and the sector's solution."""
    solution = body.solve(load)
    model = body.model(tmp_path)
    for name, words in FIELDS.items():
        model.field(name, **words)  # type: ignore[arg-type]
    model.values(points={"nodal_force": solution.external_force, "reaction": solution.reaction})
    return expander.plan(read_case(model.write())).body, solution


def totals(plan: WholeBody, forces: Floats, about: Floats) -> Resultant:
    points = plan.mesh.points
    return whole(of_sector(points, forces, None, about), plan.group, plan.cases[0].chi)


def scales(plan: WholeBody, forces: Floats, about: Floats) -> tuple[float, float]:
    force, moment = scale_of(plan.mesh.points, forces, None, about)
    return len(plan.group) * force, len(plan.group) * moment


def half_beam(parity: int = 1) -> Body:
    """Half of a beam along a skew X, clamped at its end; the cut plane is its middle."""
    mesh = block(6, 2, 2).mapped(lambda u, v, w: (u * SPAN / 2, v * WIDE, w * HIGH))
    mesh = mesh.mapped(lambda *x: (np.stack(x, axis=1) @ SKEW.T + SHIFT).T)
    end = np.flatnonzero(on_plane(mesh, X, SHIFT + SPAN / 2 * X))
    return Body(mesh, end, [CutPlane(X, SHIFT, parity)], about=SHIFT)


def middle_load(body: Body, force: Floats) -> Floats:
    """A force shared by the three nodes of the top edge in the cut plane."""
    top = on_plane(body.mesh, X, SHIFT) & on_plane(body.mesh, Z, SHIFT + HIGH * Z)
    assert top.sum() == 3
    return point_load(body.mesh, np.flatnonzero(top), force / 3)


def test_beam_clamped_at_both_ends(tmp_path) -> None:
    """P at the middle: each end carries P/2 whatever the beam's section; about one end's foot the
    applied moment is P times half the span, and the reactions balance it."""
    body = half_beam()
    plan, solution = solved(tmp_path, body, middle_load(body, -P / 2 * Z))
    foot = SHIFT - SPAN / 2 * X + WIDE / 2 * Y
    applied = totals(plan, solution.external_force, foot)
    reaction = totals(plan, solution.reaction, foot)
    assert np.abs(applied.force @ SKEW - [0, 0, -P]).max() < SOLVED * P
    assert np.abs(applied.moment @ SKEW - [0, P * SPAN / 2, 0]).max() < SOLVED * P * SPAN
    found = balance(applied, reaction, *scales(plan, solution.external_force, foot))
    assert found.relative < SOLVED
    assert found.ratio == pytest.approx(1.0, rel=SOLVED)
    words = vanishing(plan.group, plan.cases[0].chi, foot).words
    assert words.startswith("force along (")
    # The ends, by the reaction of the whole body at the sector's nodes: seam reactions are gone.
    resolved = np.array(solution.reaction)
    resolved[plan.nodes.items] = plan.resolved["reaction", 0].patch
    (end,) = support_sets(plan.mesh, resolved)
    assert (end.nodes == body.fixed).all()
    alone = np.zeros_like(resolved)
    alone[end.nodes] = resolved[end.nodes]
    # The thrust along the beam is not statics: a clamped beam loaded off its axis has one.
    assert np.abs((alone.sum(axis=0) @ SKEW)[1:] - [0, P / 2]).max() < SOLVED * P
    # The sector's own shares would show the cut plane as a second support.
    assert len(support_sets(plan.mesh, solution.reaction)) == 2


def test_load_on_the_plane_not_halved(tmp_path) -> None:
    """The modelled half carries the whole of P in the plane: the body balances, under 2 P."""
    body = half_beam()
    plan, solution = solved(tmp_path, body, middle_load(body, -P * Z))
    force, about = solution.external_force, SHIFT
    applied, reaction = totals(plan, force, about), totals(plan, solution.reaction, about)
    assert balance(applied, reaction, *scales(plan, force, about)).relative < SOLVED
    found = against_expected(applied.force, -P * Z, 1e-6, plan.group)
    assert not found.ok
    assert found.ratio == pytest.approx(2.0, rel=SOLVED)
    assert "2 times the force expected: was a load in a cut plane given in full" in found.words
    multiplicity = np.bincount(plan.nodes.item, minlength=len(force)).clip(1)
    meant = Resultant(P * Z, np.cross(WIDE / 2 * Y + HIGH * Z, P * Z), SHIFT)
    chi = plan.cases[0].chi
    share = in_plane_share(plan.mesh.points, force, multiplicity, plan.group, chi, meant)
    assert share.balances
    assert share.fraction == 1.0


def test_load_on_the_plane_listed_in_full(tmp_path) -> None:
    """Solved with P/2, but P written down: applied is twice what the reactions carry."""
    body = half_beam()
    load = middle_load(body, -P / 2 * Z)
    plan, solution = solved(tmp_path, body, load)
    reaction = totals(plan, solution.reaction, SHIFT)
    found = balance(totals(plan, 2 * load, SHIFT), reaction, *scales(plan, 2 * load, SHIFT))
    assert found.ratio == pytest.approx(2.0, rel=SOLVED)
    assert found.relative == pytest.approx(0.5, rel=SOLVED)
    multiplicity = np.bincount(plan.nodes.item, minlength=len(load)).clip(1)
    chi = plan.cases[0].chi
    share = in_plane_share(plan.mesh.points, 2 * load, multiplicity, plan.group, chi, reaction)
    assert share.balances
    assert "halved there it balances" in share.words


def test_antisymmetric_half(tmp_path) -> None:
    """Pressure p down on the top of the half, up on that of the other: no force, and the couple
    2 p (area of a half) (its arm), SPAN / 4, about Y; the ends carry it."""
    body = half_beam(-1)
    top = on_plane(body.mesh, Z, SHIFT + HIGH * Z)
    plan, solution = solved(tmp_path, body, surface_load(body.mesh, top, -3.0 * Z))
    about = np.array([1.0, 2.0, 3.0])
    applied = totals(plan, solution.external_force, about)
    reaction = totals(plan, solution.reaction, about)
    size = 3.0 * SPAN * WIDE
    assert np.abs(applied.force).max() < SOLVED * size
    couple = 2 * 3.0 * (SPAN / 2 * WIDE) * SPAN / 4
    assert np.abs(applied.moment @ SKEW - [0, couple, 0]).max() < SOLVED * size * 10
    found = balance(applied, reaction, *scales(plan, solution.external_force, about))
    assert found.relative < SOLVED


def test_copies_alone_do_not_balance(tmp_path) -> None:
    """A ring under a load of its own in each sector: the neighbours pull, and the sum balances."""
    angle = 2 * np.pi / 7
    mesh = quadratic(block(2, 2, 1)).mapped(
        lambda u, v, w: ((1 + u) * np.cos(angle * v), (1 + u) * np.sin(angle * v), 0.4 * w)
    )
    rim = np.flatnonzero(np.hypot(*mesh.points[:, :2].T) < 1 + 1e-9)
    body = Body(mesh, rim, cyclic=Cyclic(7))
    plan, solution = solved(
        tmp_path,
        body,
        body_force(mesh, lambda x: np.stack([x[..., 1], x[..., 0] ** 2, 1 + x[..., 0]], axis=-1)),
    )
    about, chi = np.array([0.2, -0.3, 0.9]), plan.cases[0].chi
    size = scales(plan, solution.external_force, about)
    held = np.array(solution.reaction)  # the supports' share, without the seams' own
    held[plan.nodes.items] = plan.resolved["reaction", 0].patch
    held /= np.bincount(plan.nodes.item, minlength=len(held)).clip(1)[:, None]
    applied, back = totals(plan, solution.external_force, about), totals(plan, held, about)
    assert balance(applied, back, *size).relative < SOLVED
    assert balance(applied, totals(plan, solution.reaction, about), *size).relative < SOLVED
    loads = per_copy(of_sector(mesh.points, solution.external_force, None, about), plan.group, chi)
    carry = per_copy(of_sector(mesh.points, held, None, about), plan.group, chi)
    for load, reaction in zip(loads, carry, strict=True):
        assert balance(load, reaction, size[0] / 7, size[1] / 7).relative > 1e-3
