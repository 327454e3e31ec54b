"""Copies that reach into the modelled part: found where they do, and nowhere else."""

from __future__ import annotations

from collections.abc import Callable
from pathlib import Path

import numpy as np
import pytest
from meshes import HEXAHEDRON, TRIANGLE, Sector, box, collapsed, quadratic, ring, tetrahedra

from demo_cases import available
from expander.audit import overlap
from expander.audit.overlap import _Inside, overlaps
from expander.body import prepare
from expander.casefile import read_case
from expander.groups import CutPlane, CyclicAxis, Group, make_group
from expander.placements import unit
from expander.topology import boundary_faces

ROOT = Path(__file__).parents[1]
ORIGIN = np.zeros(3)


def cyclic(sectors: int, *normals: object) -> Group:
    cuts = [CutPlane(f"p{k}", unit(n), ORIGIN) for k, n in enumerate(normals)]
    return make_group(cuts, CyclicAxis(sectors, unit([0, 0, 1]), ORIGIN))


Form = Callable[[Sector], Sector]

FORMS: dict[str, Form] = {
    "hexahedra": lambda s: s,
    "quadratic": quadratic,
    "tetrahedra": tetrahedra,
    "collapsed": collapsed,
}


# Name, cells, inner radius, lean; the wedges at an axis are not cut into tetrahedra here.
SHAPES = [
    pytest.param(FORMS[form], inner, lean, id=f"{form} {inner} {lean}")
    for form in FORMS
    for inner, lean in ((1.0, 0.0), (1.0, 0.4), (0.0, 0.3))
    if inner > 0.0 or form != "tetrahedra"
]


@pytest.mark.parametrize("sectors", [2, 3, 8, 24])
@pytest.mark.parametrize(("form", "inner", "lean"), SHAPES)
def test_none_in_a_right_ring(form: Form, sectors: int, inner: float, lean: float) -> None:
    found = overlaps(form(ring(sectors, lean=lean, inner=inner)).mesh(), cyclic(sectors))
    assert found.images > 0
    assert found.found == ()
    assert found.sampled == ""


@pytest.mark.parametrize("name", available())
def test_none_in_the_demo_cases(name: str) -> None:
    body = prepare(read_case(ROOT / "demo_cases" / name / "case.toml"))
    assert overlaps(body.mesh, body.group).found == ()


@pytest.mark.parametrize(("form", "inner", "lean"), SHAPES)
def test_one_sector_too_many(form: Form, inner: float, lean: float) -> None:
    """A sector of 360/8 degrees placed 9 times: neighbours share 5 degrees."""
    sector = form(ring(8, (4, 4, 3), lean=lean, inner=inner))
    (found,) = overlaps(sector.mesh(), cyclic(9)).found
    assert found.copy == 1
    assert "turned 40 degrees about z, overlaps" in found.words
    # By hand: the first face's node at the third of four radii lies 5 degrees within the second.
    if inner == 1.0 and lean == 0.0:
        radius = 1.0 + 0.75**1.2
        assert found.depth == pytest.approx(radius * np.sin(np.deg2rad(5.0)), rel=1e-9)
    assert 0.0 < found.depth <= 2.0 * np.sin(np.deg2rad(5.0))
    too_few = overlaps(sector.mesh(), cyclic(7))
    assert too_few.found == ()


@pytest.mark.parametrize("lean", [0.0, 0.4])
def test_part_that_sticks_out_through_the_seam(lean: float) -> None:
    """A pin of the model that reaches 9 degrees into the next sector, through its face."""
    body = ring(6, (3, 4, 4), lean=lean)
    pin = box((3, 1, 1), size=(0.5, 0.05, 0.05), corner=(-0.15, -0.025, -0.025))
    r, z = 1.5, 0.41
    theta = 2 * np.pi / 6 + lean * (np.sin(3 * r) + z * z)  # on the second face
    out, around = (
        np.array([np.cos(theta), np.sin(theta), 0]),
        np.array([-np.sin(theta), np.cos(theta), 0]),
    )
    pin = pin.moved(np.stack([around, out, [0, 0, 1.0]], axis=1), r * out + [0, 0, z])
    (found,) = overlaps(body.beside(pin).mesh(), cyclic(6)).found
    assert found.copy == 1
    # By hand: the end of the pin lies 0.35 beyond the face, in the middle of the material.
    assert found.node >= len(body.points)
    assert found.nodes >= 4
    assert found.depth == pytest.approx(0.3, abs=0.1)


def test_the_same_place_twice() -> None:
    """A whole block as the 'sector' of four: no surface node is inside, middles of cells are."""
    block = box((3, 3, 3), size=(2, 2, 2), corner=(-1, -1, 0))
    (found,) = (f for f in overlaps(block.mesh(), cyclic(4)).found if f.copy == 1)
    assert (found.nodes, found.node) == (0, -1)
    assert "centres of its cells" in found.words
    assert 0.5 < found.depth <= 1.0
    assert [f.copy for f in overlaps(block.mesh(), cyclic(4)).found] == [1, 2]


def test_wholly_inside() -> None:
    """A bolt of the model that lies, turned by 90 degrees, in the middle of the block."""
    block = box((4, 4, 4), size=(4, 4, 4), corner=(1, 1, 0))
    bolt = box((1, 1, 1), size=(0.5, 0.5, 0.5), corner=(2.8, -3.2, 1.7))
    (found,) = overlaps(block.beside(bolt).mesh(), cyclic(4)).found
    assert found.copy == 1
    assert found.nodes == 8
    # Its image is 2.7 to 3.2, 2.8 to 3.3, 1.7 to 2.2 in a block of 1 to 5, 1 to 5, 0 to 4.
    assert found.depth == pytest.approx(1.8, rel=1e-9)
    assert overlaps(block.beside(bolt.moved(np.eye(3), [0, 0, 9])).mesh(), cyclic(4)).found == ()


def test_with_a_plane_normal_to_the_axis() -> None:
    """Mirrored copies of the next sector count too; the plane's own image cannot overlap."""
    good = ring(6, lean=0.4)
    assert overlaps(good.mesh(), cyclic(6, [0, 0, 1])).found == ()
    found = overlaps(ring(6, (2, 4, 2), lean=0.4).mesh(), cyclic(7, [0, 0, 1])).found
    assert found[0].copy == 1


def test_mirror_planes_and_shells_are_passed_by() -> None:
    quarter = make_group([CutPlane("a", unit([1, 0, 0]), ORIGIN)], None)
    assert overlaps(box((2, 2, 2)).mesh(), quarter).images == 0
    corners = ring(8).points
    shell = Sector(corners, [(TRIANGLE, [0, 1, 4])])
    assert overlaps(shell.mesh(), cyclic(9)).images == 0


def test_more_points_than_are_tested_is_said(monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr(overlap, "MOST_TESTED", 50)
    found = overlaps(ring(8, (4, 8, 4), lean=0.4).mesh(), cyclic(9))
    assert [f.copy for f in found.found] == [1]
    assert found.sampled.startswith("at most 50 points of each image")


def test_every_copy_overlapping_is_not_listed_in_full() -> None:
    found = overlaps(ring(3, (2, 6, 2)).mesh(), cyclic(720))
    assert len(found.found) == 32


L_SHAPE = Sector(
    box((2, 2, 1), size=(2, 2, 1)).points,
    [c for k, c in enumerate(box((2, 2, 1), size=(2, 2, 1)).cells) if k != 3],
)


@pytest.mark.parametrize("form", ["hexahedra", "quadratic", "tetrahedra"])
def test_inside_and_depth_at_sharp_edges(form: str) -> None:
    """Re-entrant and sharp edges, and two tied blocks whose faces coincide: inside and distance by
    hand."""
    mesh = FORMS[form](L_SHAPE).mesh()
    inside = _Inside(mesh, np.arange(mesh.cell_count), boundary_faces(mesh))
    step = L_SHAPE.points[:, 0][(L_SHAPE.points[:, 0] > 0.5) & (L_SHAPE.points[:, 0] < 1.9)][0]
    p = np.random.default_rng(3).uniform(-0.5, 2.5, size=(4000, 3))
    boxed = ((p > 0) & (p < [2, 2, 1])).all(axis=1)
    truth = boxed & ~((p[:, 0] > step) & (p[:, 1] > step))
    here, host = inside.hosts(p)
    assert (np.flatnonzero(truth) == here).all()
    assert len(here) > 400
    q = p[here]
    walls = np.stack([q[:, 0], q[:, 1], q[:, 2], 1 - q[:, 2], 2 - q[:, 0], 2 - q[:, 1]]).min(axis=0)
    notch = np.hypot(*np.maximum(0, step - q[:, :2]).T)
    assert np.abs(inside.depths(q) - np.minimum(walls, notch)).max() < 1e-9
    assert host.max() < mesh.cell_count


def test_tied_blocks_and_other_cells() -> None:
    """Beside the common face of two blocks that are not joined a point is still inside."""
    sector = (
        Sector(np.zeros((0, 3)), []).beside(box((1, 1, 1))).beside(box((1, 1, 1), corner=(1, 0, 0)))
    )
    sector = sector.plus([(TRIANGLE, [0, 1, 2])])
    mesh = sector.mesh()
    solid = np.flatnonzero(mesh.types == HEXAHEDRON)
    inside = _Inside(mesh, solid[::-1].copy(), boundary_faces(mesh))
    here, host = inside.hosts(np.array([[0.99, 0.5, 0.5], [1.01, 0.5, 0.5], [2.1, 0.5, 0.5]]))
    assert here.tolist() == [0, 1]
    assert host.tolist() == [0, 1]
