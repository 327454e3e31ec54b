"""The magnetic field, an axial vector, of magnets and coils with their images, by magpylib.

Source: J. D. Jackson, Classical Electrodynamics, 3rd ed., table 6.1: magnetic induction and
magnetisation are axial, current density is polar. The images' fields come from magpylib
(M. Ortner and L. G. Coliado Bandeira, SoftwareX 11 (2020) 100466), which knows no symmetry: a
coil's image is a coil through the image points with the same current, so that B turns out to be
axial follows from the law of Biot and Savart alone.

Tolerance: 1e-12 of the largest magnitude. magpylib evaluates the image in other local coordinates,
so its round-off does not cancel in the comparison; its formulas for cuboids and current lines lose
two or three digits by cancellation at a few sizes from the source.
"""

from __future__ import annotations

from collections.abc import Sequence

import magpylib
import numpy as np
import pytest
from scipy.spatial.transform import Rotation

from demo_cases.solver import block
from expander.errors import CheckFailed
from tests.against_outside.bodies import (
    SHIFT,
    SKEW,
    Floats,
    Model,
    centres,
    mirror,
    miss,
    no_twins,
    polar_basis,
    turn,
)

CLOSE = 1e-12
Placement = tuple[Floats, Floats]
COIL = np.array(
    [[0.35, 0.3, 0.9], [0.9, 0.35, 1.0], [0.95, 0.85, 1.25], [0.4, 0.95, 1.1], [0.35, 0.3, 0.9]]
)  # crooked: no symmetry of its own


def sources(placement: Placement, sign: float) -> list:
    """A magnet and a coil at an image place; sign turns magnetisation and current round.

    A cuboid is its own image, so the magnet's image is placed by a turn: one axis of its local
    coordinates is reversed if the placement mirrors.
    """
    Q, t = placement
    det = np.linalg.det(Q)
    orientation = Rotation.from_rotvec([0.3, -0.5, 0.8]).as_matrix()
    polarisation = np.array([0.4, -0.9, 1.1])
    magnet = magpylib.magnet.Cuboid(
        dimension=(0.3, 0.2, 0.4),
        position=Q @ [0.7, 0.5, -0.6] + t,
        orientation=Rotation.from_matrix(Q @ orientation @ np.diag([1, 1, det])),
    )
    in_space = sign * det * Q @ polarisation
    magnet.polarization = magnet.orientation.inv().apply(in_space)
    coil = magpylib.current.Polyline(vertices=COIL @ Q.T + t, current=sign * 4e5)
    return [magnet, coil]


def field(points: Floats, images: Sequence[tuple[Placement, float]]) -> Floats:
    """(n, 3) flux density of all images, tesla."""
    everything = [source for placement, sign in images for source in sources(placement, sign)]
    return magpylib.getB(everything, points, sumup=True)


def closed(*generators: tuple[Placement, float]) -> list[tuple[Placement, float]]:
    """All products of placements and their signs, the identity first."""
    images = [((np.eye(3), np.zeros(3)), 1.0)]
    for (Q, t), sign in images:  # grows while it is read
        for (P, s), other in generators:
            new = (P @ Q, P @ t + s)
            if not any(
                np.allclose(new[0], a, atol=1e-9) and np.allclose(new[1], b, atol=1e-9)
                for (a, b), _ in images
            ):
                images.append((new, sign * other))
    return images


def in_place(x: Floats) -> Floats:
    return x @ SKEW.T + SHIFT


def carried(images):
    """The same images about the skew system: sources stay where they are in its coordinates."""
    S = (SKEW, SHIFT)
    return [((S[0] @ Q, S[0] @ t + S[1]), sign) for (Q, t), sign in images]


def air(corner, size, n):
    """Nodes and cells of a block of air in the skew system."""
    mesh = block(*n).mapped(
        lambda u, v, w: (corner[0] + size[0] * u, corner[1] + size[1] * v, corner[2] + size[2] * w)
    )
    return in_place(mesh.points), {12: mesh.cells}


def model_of(tmp_path, points, cells):
    model = Model(tmp_path, points, cells)
    model.field("B", "axial vector")
    model.field("B_cells", "axial vector")
    return model


def values(points, cells, images):
    return {
        "points": {"B": field(points, images)},
        "cells": {"B_cells": field(points[cells[12]].mean(axis=1), images)},
    }


def check(whole, images):
    assert miss(whole["B"], field(whole.points, images)) < CLOSE
    assert miss(whole["B_cells"], field(centres(whole), images)) < CLOSE
    assert no_twins(whole, 1e-3)


# In the skew system's own coordinates: planes x = 0, y = 0 and z = -1.5.
PLANES = {"a": ((1, 0, 0), (0, 0, 0)), "b": ((0, 1, 0), (0, 0, 0)), "c": ((0, 0, 1), (0, 0, -1.5))}


@pytest.mark.parametrize(
    "words",
    [
        {"a": 1},
        {"a": -1},
        {"a": 1, "b": -1},
        {"a": -1, "b": -1},
        {"a": -1, "b": 1, "c": 1},
        {"a": -1, "b": -1, "c": -1},
    ],
    ids=str,
)
def test_images_in_skew_planes(tmp_path, words):
    """magpylib: magnet and coil with images in 1, 2 and 3 planes, each even or reversed."""
    images = carried(closed(*((mirror(*PLANES[name]), sign) for name, sign in words.items())))
    assert len(images) == 2 ** len(words)
    points, cells = air((0, 0, -1.5), (1.3, 1.2, 3.1), (3, 3, 5))
    model = model_of(tmp_path, points, cells)
    model.values(**values(points, cells, images))
    model.table(
        mirror=[
            {
                "name": name,
                "normal": SKEW @ PLANES[name][0],
                "point": in_place(np.array(PLANES[name][1])),
                "load": "symmetric" if sign > 0 else "antisymmetric",
            }
            for name, sign in words.items()
        ]
    )
    whole = model.expand()
    assert whole.n_cells == len(images) * 45
    check(whole, images)


def test_one_magnet_is_the_mean_of_both_cases(tmp_path):
    """magpylib: half of (magnet + image) and half of (magnet - image) is the magnet alone."""
    M = mirror(*PLANES["a"])
    points, cells = air((0, 0, -1.5), (1.3, 1.2, 3.1), (3, 3, 5))
    model = model_of(tmp_path, points, cells)
    for name, sign in (("even", 1.0), ("odd", -1.0)):
        model.values(name, **values(points, cells, carried(closed((M, sign)))))
    model.table(
        mirror=[{"name": "a", "normal": SKEW[:, 0], "point": SHIFT}],
        case=[{"name": "even"}, {"name": "odd", "load": {"a": "antisymmetric"}}],
        sum=[
            {"name": "alone", "terms": {"even": 0.5, "odd": 0.5}},
            {"name": "uneven", "terms": {"even": 0.75, "odd": -0.25}},
        ],
    )
    check(model.expand("alone"), carried(closed()))
    # 0.75 - 0.25 = 0.5 of the magnet itself, 0.75 + 0.25 = 1 of its image.
    whole = model.expand("uneven")
    one = carried(closed())
    image = carried(closed((M, 1.0)))[1:]
    assert miss(whole["B"], 0.5 * field(whole.points, one) + field(whole.points, image)) < CLOSE


def ring(count: int):
    """A sector of air around the skew system's z axis, with faces swept and twisted."""
    mesh = block(3, 3, 4).mapped(
        lambda u, v, w: (
            (0.2 + 1.2 * u) * np.cos(2 * np.pi / count * (v - 0.2) + 0.3 * u + 0.2 * w),
            (0.2 + 1.2 * u) * np.sin(2 * np.pi / count * (v - 0.2) + 0.3 * u + 0.2 * w),
            2.8 * w - 1.4,
        )
    )
    return in_place(mesh.points), {12: mesh.cells}


@pytest.mark.parametrize(("count", "h"), [(3, 0), (5, 0), (6, 0), (6, 3), (2, 0), (2, 1)])
def test_ring_of_magnets(tmp_path, count, h):
    """magpylib: N magnets and coils around a skew axis, all alike or alternating (h = N/2)."""
    axis = (0, 0, 1)
    step = turn(2 * np.pi / count, axis, (0, 0, 0))
    images = carried(closed((step, -1.0 if h else 1.0)))
    assert len(images) == count
    points, cells = ring(count)
    model = model_of(tmp_path, points, cells)
    model.field("B_polar", "axial vector", frame="shaft")

    def polar(x):
        return np.einsum("nia,na->ni", polar_basis(x, SKEW[:, 2], SHIFT), field(x, images))

    data = values(points, cells, images)
    data["points"]["B_polar"] = polar(points)
    model.values(**data)
    on_axis = in_place(np.array([0.0, 0.0, 4.0]))
    model.table(
        cyclic={"sectors": count, "axis": SKEW[:, 2], "point": on_axis, "nodal_diameters": h},
        frames={"shaft": {"type": "cylindrical", "axis": SKEW[:, 2], "point": on_axis}},
    )
    whole = model.expand()
    check(whole, images)
    assert miss(whole["B_polar"], polar(whole.points)) < CLOSE


def test_ring_of_two_magnets_one_switched_off(tmp_path):
    """magpylib: N = 2, h = 0 and h = 1 in halves give one magnet and coil alone."""
    step = turn(np.pi, (0, 0, 1), (0, 0, 0))
    points, cells = ring(2)
    model = model_of(tmp_path, points, cells)
    for name, sign in (("even", 1.0), ("odd", -1.0)):
        model.values(name, **values(points, cells, carried(closed((step, sign)))))
    model.table(
        cyclic={"sectors": 2, "axis": SKEW[:, 2], "point": SHIFT},
        case=[{"name": "even", "nodal_diameters": 0}, {"name": "odd", "nodal_diameters": 1}],
        sum=[{"name": "alone", "terms": {"even": 0.5, "odd": 0.5}}],
    )
    check(model.expand("alone"), carried(closed()))


@pytest.mark.parametrize("sign", [1, -1])
def test_half_sectors_of_magnets(tmp_path, sign):
    """magpylib: 4 sectors halved by a plane through the axis: 8 images, plane even or reversed."""
    count = 4
    step = turn(2 * np.pi / count, (0, 0, 1), (0, 0, 0))
    plane = ((0, 1, 0), (0, 0, 0))
    images = carried(closed((step, 1.0), (mirror(*plane), float(sign))))
    assert len(images) == 2 * count
    mesh = block(3, 3, 4).mapped(
        lambda u, v, w: (
            (0.2 + 1.2 * u) * np.cos(np.pi / count * v),
            (0.2 + 1.2 * u) * np.sin(np.pi / count * v),
            2.8 * w - 1.4,
        )
    )
    points, cells = in_place(mesh.points), {12: mesh.cells}
    model = model_of(tmp_path, points, cells)
    model.values(**values(points, cells, images))
    model.table(
        cyclic={"sectors": count, "axis": SKEW[:, 2], "point": SHIFT},
        mirror=[
            {
                "name": "middle",
                "normal": SKEW[:, 1],
                "point": SHIFT,
                "load": "symmetric" if sign > 0 else "antisymmetric",
            }
        ],
    )
    check(model.expand(), images)


def test_the_oracle_tells_polar_from_axial(tmp_path):
    """The same field declared as a polar vector does not close along the seam."""
    images = carried(closed((mirror(*PLANES["a"]), 1.0)))
    points, cells = air((0, 0, -1.5), (1.3, 1.2, 3.1), (3, 3, 5))
    model = model_of(tmp_path, points, cells)
    model.field("B", "polar vector")
    model.values(**values(points, cells, images))
    model.table(mirror=[{"name": "a", "normal": SKEW[:, 0], "point": SHIFT}])
    with pytest.raises(CheckFailed, match="B"):
        model.expand()
