"""Mass and sections against solids and beams of the tables.

Sources: mass, centre and moments of inertia of homogeneous solids and thin shells (tables of any
text on mechanics; common practice); beams and bars in bending, shear and torsion: Roark's Formulas
for Stress and Strain (sigma = M y / I, tau = V Q / (I b), tau = T r / J); statics by hand.

Curved solids are meshed with quadratic cells, whose sides are parabolas where the body has circles.
A parabola through three points of an arc of angle ``2 h`` encloses with the centre
``(4 sin h - sin h cos h) / (3 h)`` of the arc's area (two thirds of chord times sagitta, by hand),
which is ``1 - h^4 / 30``: errors fall by 16 with half the cells. That order must show, and two
meshes are extrapolated (Richardson) to the value of the table.
"""

from __future__ import annotations

from collections.abc import Callable

import numpy as np
import pytest

from expander.audit.mass import Properties, of_whole, properties
from expander.audit.section import across
from expander.groups import CutPlane, CyclicAxis, Group, make_group
from expander.model import Mesh
from tests.against_outside.bodies import SHIFT, SKEW, Floats, miss, stored

X, Y, Z = np.eye(3)
ORIGIN = np.zeros(3)


def mirrors(*normals: Floats) -> Group:
    return make_group([CutPlane(f"plane {k}", n, ORIGIN) for k, n in enumerate(normals)], None)


def cyclic(sectors: int) -> Group:
    return make_group([], CyclicAxis(sectors, Z, ORIGIN))


# --- meshes of mapped blocks --------------------------------------------------------------------

_CORNERS = [(0, 0, 0), (2, 0, 0), (2, 2, 0), (0, 2, 0), (0, 0, 2), (2, 0, 2), (2, 2, 2), (0, 2, 2)]
_EDGES = [(1, 0, 0), (2, 1, 0), (1, 2, 0), (0, 1, 0), (1, 0, 2), (2, 1, 2), (1, 2, 2), (0, 1, 2),
          (0, 0, 1), (2, 0, 1), (2, 2, 1), (0, 2, 1)]  # fmt: skip
_FACES = [(0, 1, 1), (2, 1, 1), (1, 0, 1), (1, 2, 1), (1, 1, 0), (1, 1, 2), (1, 1, 1)]
_WAYS = ((1, 2), (2, 3), (3, 7), (7, 4), (4, 5), (5, 1))


def block(counts: tuple[int, int, int], mapping: Callable, kind: int) -> Mesh:
    """The unit cube in hexahedra (12, 25, 29) or tetrahedra (24), every node mapped."""
    shape = [2 * n + 1 for n in counts]
    number = np.arange(np.prod(shape)).reshape(shape)
    start = np.stack(np.meshgrid(*[2 * np.arange(n) for n in counts], indexing="ij"), axis=-1)
    local = _CORNERS + _EDGES + _FACES

    def nodes(at: tuple[int, int, int]) -> np.ndarray:
        return number[tuple(start[..., k] + at[k] for k in range(3))].ravel()

    if kind == 24:
        cells = []
        for a, b in _WAYS:
            c = np.array([_CORNERS[k] for k in (0, a, b, 6)])
            middle = [(c[i] + c[j]) // 2 for i, j in ((0, 1), (1, 2), (2, 0), (0, 3), (1, 3),
                                                      (2, 3))]  # fmt: skip
            cells.append(np.stack([nodes(tuple(p)) for p in [*c, *middle]], axis=1))
        connectivity = np.concatenate(cells)
    else:
        count = {12: 8, 25: 20, 29: 27}[kind]
        connectivity = np.stack([nodes(p) for p in local[:count]], axis=1)
    axes = [np.linspace(0.0, 1.0, n) for n in shape]
    unit = np.stack([g.ravel() for g in np.meshgrid(*axes, indexing="ij")], axis=1)
    used, renumbered = np.unique(connectivity, return_inverse=True)
    m, k = connectivity.shape
    return Mesh(mapping(*unit[used].T), renumbered.ravel(), np.arange(0, m * k + 1, k),
                np.full(m, kind, dtype=np.uint8))  # fmt: skip


def surface(n: int, mapping: Callable) -> Mesh:
    """The unit square in quadrilaterals with nine nodes, every node mapped."""
    size = 2 * n + 1
    number = np.arange(size**2).reshape(size, size)
    i, j = (a.ravel() for a in np.meshgrid(*[2 * np.arange(n)] * 2, indexing="ij"))
    local = [(0, 0), (2, 0), (2, 2), (0, 2), (1, 0), (2, 1), (1, 2), (0, 1), (1, 1)]
    connectivity = np.stack([number[i + a, j + b] for a, b in local], axis=1)
    axis = np.linspace(0.0, 1.0, size)
    u, v = (a.ravel() for a in np.meshgrid(axis, axis, indexing="ij"))
    return Mesh(mapping(u, v), connectivity.ravel(), np.arange(0, 9 * n * n + 1, 9),
                np.full(n * n, 28, dtype=np.uint8))  # fmt: skip


def cylinder(inner: float, outer: float, height: float, angle: float) -> Callable:
    """A sector of a tube from angle zero."""

    def mapping(u, v, w):
        r, theta = inner + (outer - inner) * u, angle * v
        return np.stack([r * np.cos(theta), r * np.sin(theta), height * w], axis=1)

    return mapping


def cone(radius: float, height: float, top: float) -> Callable:
    """A quarter of a frustum whose radius falls to `top` times that of the foot."""

    def mapping(u, v, w):
        r, theta = radius * u * (1.0 - (1.0 - top) * w), np.pi / 2 * v
        return np.stack([r * np.cos(theta), r * np.sin(theta), height * w], axis=1)

    return mapping


def on_sphere(u: Floats, v: Floats) -> Floats:
    """Directions to a third of an eighth of a sphere: a quarter of the cube's face x = 1."""
    x = np.stack([np.ones_like(u), u, v], axis=1)
    return x / np.linalg.norm(x, axis=1, keepdims=True)


def third_of_octant(radius: float) -> Callable:
    """A third of an eighth of a ball."""

    def mapping(u, v, w):
        return radius * np.maximum(u, 1e-9)[:, None] * on_sphere(v, w)

    return mapping


# --- mass ---------------------------------------------------------------------------------------


def numbers(p: Properties) -> Floats:
    return np.concatenate([[p.mass], p.centre, p.inertia.ravel()])


def table(mass: float, centre: Floats, Ixx: float, Iyy: float, Izz: float) -> Floats:
    return np.concatenate([[mass], centre, np.diag([Ixx, Iyy, Izz]).ravel()])


BOX = (1.3, 0.7, 2.1)
RHO = 7.8


@pytest.mark.parametrize("kind", [12, 24, 25, 29])
@pytest.mark.parametrize("count", [1, 2, 3])
def test_a_box_from_a_half_a_quarter_and_an_eighth(kind, count):
    """Sides 2a, 2b, c about its centre: m (b^2 + c^2) / 12 and so on."""
    a, b, c = BOX
    mesh = block((2, 2, 3), lambda u, v, w: np.stack([a * u, b * v, c * w], axis=1), kind)
    group = mirrors(*np.eye(3)[:count])
    whole = of_whole(properties(mesh, RHO), group.placements)
    sides = np.array(BOX) * [2.0 if k < count else 1.0 for k in range(3)]
    m = RHO * np.prod(sides)
    s = m * sides**2 / 12.0
    centre = [0.0 if k < count else BOX[k] / 2 for k in range(3)]
    expected = table(m, centre, s[1] + s[2], s[0] + s[2], s[0] + s[1])
    assert miss(numbers(whole), expected) < 1e-13


def test_products_of_inertia_and_a_skew_position():
    """A box turned and moved: R I R^T, and nothing of the distance from the origin."""
    a, b, c = BOX
    mesh = block(
        (1, 1, 1),
        lambda u, v, w: (
            np.stack([a * (u - 0.5), b * (v - 0.5), c * (w - 0.5)], axis=1) @ SKEW.T + SHIFT
        ),
        12,
    )
    m = RHO * a * b * c
    principal = np.diag([b * b + c * c, a * a + c * c, a * a + b * b]) * m / 12.0
    p = properties(mesh, RHO)
    assert miss(p.centre, SHIFT) < 1e-14
    assert miss(p.inertia, SKEW @ principal @ SKEW.T) < 1e-13


R, H, INNER = 1.4, 0.9, 0.6

# The three parts of an octant: the turn about its diagonal.
THIRDS = make_group([], CyclicAxis(3, np.ones(3) / np.sqrt(3.0), ORIGIN))

SOLIDS: dict[str, tuple[Callable, list[Group], Floats]] = {
    # m = rho pi r^2 h; Izz = m r^2 / 2; Ixx = m (3 r^2 + h^2) / 12
    "cylinder": (
        cylinder(1e-9 * R, R, H, 2 * np.pi / 5),
        [cyclic(5)],
        table(1.0, [0, 0, H / 2], *[(3 * R**2 + H**2) / 12] * 2, R**2 / 2)
        * (RHO * np.pi * R**2 * H),
    ),
    # r^2 becomes r^2 + inner^2
    "annulus": (
        cylinder(INNER, R, H, np.pi / 3),
        [cyclic(6)],
        table(1.0, [0, 0, H / 2], *[(3 * (R**2 + INNER**2) + H**2) / 12] * 2,
              (R**2 + INNER**2) / 2) * (RHO * np.pi * (R**2 - INNER**2) * H),
    ),
    # m = rho 4/3 pi r^3; I = 2/5 m r^2
    "sphere": (
        third_of_octant(R),
        [THIRDS, mirrors(X, Y, Z)],
        table(1.0, [0, 0, 0], *[2 * R**2 / 5] * 3) * (RHO * 4 / 3 * np.pi * R**3),
    ),
    # m = rho pi r^2 h / 3; centre at h/4; Izz = 3/10 m r^2; Ixx = 3/80 m (4 r^2 + h^2)
    "cone": (
        cone(R, H, 0.0),
        [mirrors(X, Y)],
        table(1.0, [0, 0, H / 4], *[3 * (4 * R**2 + H**2) / 80] * 2, 3 * R**2 / 10)
        * (RHO * np.pi * R**2 * H / 3),
    ),
}  # fmt: skip
for entry in SOLIDS.values():
    entry[2][1:4] /= entry[2][0]  # the centre does not take the mass


def carried(p: Properties, groups: list[Group]) -> Properties:
    for group in groups:
        p = of_whole(p, group.placements)
    return p


def fourth_order(coarse: Floats, fine: Floats, expected: Floats, scale: Floats) -> None:
    """Errors fall as the fourth power of the cell, and the extrapolated value is the expected."""
    errors = [np.abs((f - expected) / scale).max() for f in (coarse, fine)]
    assert errors[0] < 3e-4
    assert 14.0 < errors[0] / errors[1] < 18.0
    better = fine + (fine - coarse) / 15.0
    assert np.abs((better - expected) / scale).max() < 0.05 * errors[1]


@pytest.mark.parametrize(
    ("name", "kind"),
    [(n, k) for n in SOLIDS for k in (24, 25, 29) if (n, k) != ("cone", 24)],  # flat at the tip
)
def test_round_solids(name, kind):
    mapping, groups, expected = SOLIDS[name]
    found = []
    for n in (4, 8):
        p = properties(block((n, n, n), mapping, kind), RHO)
        assert not len(p.inverted)
        found.append(numbers(carried(p, groups)))
    scale = np.concatenate([[expected[0]], [R] * 3, [np.abs(expected[4:]).max()] * 9])
    fourth_order(*found, expected, scale)


@pytest.mark.parametrize("kind", [25, 29])
@pytest.mark.parametrize(("name", "arcs"), [("cylinder", 5), ("annulus", 6), ("cone", 4)])
def test_round_solids_have_the_mass_of_their_parabolas(name, arcs, kind):
    """To round-off: cells of 20 and 27 nodes hold radius times a parabola exactly."""
    mapping, groups, expected = SOLIDS[name]
    whole = carried(properties(block((2, 3, 2), mapping, kind), RHO), groups)
    h = np.pi / (3 * arcs)
    share = (4 * np.sin(h) - np.sin(h) * np.cos(h)) / (3 * h)
    assert abs(whole.mass / (expected[0] * share) - 1.0) < 1e-13
    assert miss(whole.centre, expected[1:4]) < 1e-13


def test_a_frustum_of_flat_sides_is_exact():
    """A square frustum with sides 2a and 2b and height h: V = h (A + sqrt(A B) + B) / 3."""
    a, b, h = 1.2, 0.5, 0.8

    def mapping(u, v, w):
        half = a + (b - a) * w
        return np.stack([half * u, half * v, h * w], axis=1)

    whole = of_whole(properties(block((2, 2, 2), mapping, 12)), mirrors(X, Y).placements)
    A, B = 4 * a * a, 4 * b * b
    volume = h * (A + np.sqrt(A * B) + B) / 3
    assert abs(whole.volume - volume) < 1e-14 * volume
    height = h * (A + 2 * np.sqrt(A * B) + 3 * B) / (A + np.sqrt(A * B) + B) / 4
    assert abs(whole.centre[2] - height) < 1e-14


def test_a_thin_sphere():
    """Area 4 pi r^2, I = 2/3 m r^2."""
    t = 0.02
    m = RHO * t * 4 * np.pi * R**2
    expected = table(m, ORIGIN, *[2 / 3 * m * R**2] * 3)
    scale = np.concatenate([[m], [R] * 3, [m * R**2] * 9])
    groups = [THIRDS, mirrors(X, Y, Z)]
    found = []
    for n in (3, 6):
        p = properties(surface(n, lambda u, v: R * on_sphere(u, v)), RHO, t)
        whole = carried(p, groups)
        assert abs(whole.mass - RHO * t * whole.area) < 1e-12
        found.append(numbers(whole))
    fourth_order(*found, expected, scale)


def test_a_thin_tube():
    """Area 2 pi r h; Izz = m r^2; Ixx = m (6 r^2 + h^2) / 12, open at both ends."""
    t = 0.02
    m = RHO * t * 2 * np.pi * R * H
    expected = table(m, [0, 0, H / 2], *[m * (6 * R**2 + H**2) / 12] * 2, m * R**2)
    scale = np.concatenate([[m], [R] * 3, [m * R**2] * 9])

    def tube(u, v):
        theta = 2 * np.pi / 7 * u
        return np.stack([R * np.cos(theta), R * np.sin(theta), H * v], axis=1)

    found = [
        numbers(of_whole(properties(surface(n, tube), RHO, t), cyclic(7).placements))
        for n in (2, 4)
    ]
    fourth_order(*found, expected, scale)


# --- sections -----------------------------------------------------------------------------------

# A cantilever along x, clamped at x = 0, of height 2c (y) and width 2b (z), P down at its end.
P, L, C, B = 3.0, 4.0, 0.5, 0.3
AREA, SECOND = 4 * B * C, 2 * B * (2 * C) ** 3 / 12


def beam(ny: int, kind: int = 12) -> Mesh:
    """The half y > 0, full width."""
    return block(
        (6, ny, 2), lambda u, v, w: np.stack([L * u, C * v, B * (2 * w - 1)], axis=1), kind
    )


def tensors(x: Floats, **parts: Floats) -> Floats:
    T = np.zeros((len(x), 3, 3))
    for name, values in parts.items():
        i, j = "xyz".index(name[0]), "xyz".index(name[1])
        T[:, i, j] = T[:, j, i] = values
    return T


def bending(x: Floats) -> Floats:
    """sigma_xx = -M y / I with M = -P (L - x); tau = -V Q / (I b) = -P (c^2 - y^2) / (2 I)."""
    return tensors(
        x,
        xx=P * (L - x[:, 0]) * x[:, 1] / SECOND,
        xy=-P * (C**2 - x[:, 1] ** 2) / (2 * SECOND),
    )


@pytest.mark.parametrize("kind", [12, 24, 25])
@pytest.mark.parametrize("skew", [False, True])
def test_a_cantilever_from_its_upper_half(kind, skew):
    """Antisymmetric bending about the half's cut plane: V = P, M = P (L - x), N = 0.

    The traction on the side that is clamped comes from the free end: (0, -P, 0), with moment
    -P (L - x) about z. Shear is a parabola; between the nodes it is taken as linear, which loses
    h^2 / (4 c^2) of V (trapezoidal rule, exact for a parabola).
    """
    mesh = beam(4, kind)
    Q, t = (SKEW, SHIFT) if skew else (np.eye(3), ORIGIN)
    stress = stored(Q @ bending(mesh.points) @ Q.T)
    placed = Mesh(mesh.points @ Q.T + t, mesh.connectivity, mesh.offsets, mesh.types)
    group = make_group([CutPlane("mid", Q @ Y, t)], None)
    at = L / 3 if kind == 24 else 1.7  # stress in tetrahedra is bilinear on planes of nodes only
    h = C / (4 if kind == 12 else 8)
    s = across(placed, group, [1, -1], stress, "points", Q @ X, t + at * (Q @ X))
    assert s.copies == (0, 1)
    assert abs(s.area - AREA) < 1e-12
    assert miss(s.centroid, t + Q @ [at, 0, 0], L) < 1e-9
    shear = P * (1 - h**2 / (4 * C**2))
    assert miss(s.force, Q @ [0, -shear, 0], P) < 1e-9
    # sigma_xx is bilinear: its moment is that of straight lines over the height, exact
    assert miss(s.moment, Q @ [0, 0, -P * (L - at)], P * L) < 1e-9
    # about the clamped end the shear force adds its lever
    foot = across(placed, group, [1, -1], stress, "points", Q @ X, t + at * (Q @ X), about=t)
    assert miss(foot.moment, Q @ [0, 0, -P * (L - at) - shear * at], P * L) < 1e-9


def test_a_symmetric_load_on_the_same_stress_pulls():
    """With the other word both halves are pulled: N = 2 int sigma dA over the half, no moment."""
    mesh = beam(4)
    stress = stored(tensors(mesh.points, xx=mesh.points[:, 1]))
    s = across(mesh, mirrors(Y), [1, 1], stress, "points", X, [1.7, 0, 0])
    assert miss(s.force, [2 * 2 * B * C**2 / 2, 0, 0]) < 1e-12
    assert np.abs(s.moment).max() < 1e-12


def test_a_cut_plane_as_section():
    """Through the neutral plane goes the shear flow: tau_max times the length, V Q / (I b)."""
    mesh = beam(4)
    stress = stored(bending(mesh.points))
    for side in (1.0, -1.0):
        s = across(mesh, mirrors(Y), [1, -1], stress, "points", side * Y, [0, 0, 0])
        assert miss(s.force, [-side * 1.5 * P / AREA * L * 2 * B, 0, 0]) < 1e-8
        assert abs(s.area - L * 2 * B) < 1e-9
        assert len(s.copies) == 1


def test_faces_of_cells_as_section():
    """Both normals at a plane of nodes: equal and opposite."""
    mesh = beam(4)
    stress = stored(bending(mesh.points))
    at = np.unique(mesh.points[:, 0])[2] * X
    a, b = (across(mesh, mirrors(Y), [1, -1], stress, "points", n, at) for n in (X, -X))
    assert miss(a.force, -b.force) < 1e-8
    assert miss(a.moment, -b.moment) < 1e-8
    assert miss(a.moment, [0, 0, -P * (L - at[0])], P * L) < 1e-8


@pytest.mark.parametrize("n", [5, 12])
def test_torsion_of_a_shaft(n):
    """tau = T r / J over a tube: T, with J = pi (R^4 - r^4) / 2, whichever sector is modelled.

    The traction (-y, x) T / J is linear, so all that counts is that the section is a polygon. With
    N corners on the circle it has J = N sin(2 pi / N) (2 + cos(2 pi / N)) R^4 / 12 (tables of plane
    figures; from memory, and it tends to pi R^4 / 2).
    """
    T, m = 11.0, 3
    mesh = block((2, m, 3), cylinder(INNER, R, H, 2 * np.pi / n), 12)
    x, y = mesh.points[:, :2].T
    J = np.pi / 2 * (R**4 - INNER**4)
    stress = stored(tensors(mesh.points, xz=-T * y / J, yz=T * x / J))
    s = across(mesh, cyclic(n), np.ones(n), stress, "points", Z, [0, 0, 0.4 * H])
    N = n * m
    a = 2 * np.pi / N
    share = N * np.sin(a) * (2 + np.cos(a)) / 12 / (np.pi / 2)
    assert miss(s.moment, [0, 0, T * share]) < 1e-12
    assert np.abs(s.force).max() < 1e-12 * T
    assert s.copies == tuple(range(n))


def test_a_ring_spinning_and_cut_in_two():
    """Hoop tension sigma: the halves pull with 2 sigma A, A the wall (statics of a thin ring).

    The stress sigma e_theta e_theta, constant in each cell, is taken at the cell's middle: at the
    section, half a cell of angle d from it, its pull across is sigma cos^2 d.
    """
    sigma, n, m = 5.0, 8, 2
    mesh = block((2, m, 2), cylinder(INNER, R, H, 2 * np.pi / n), 12)
    centres = mesh.points[mesh.connectivity].reshape(-1, 8, 3).mean(axis=1)
    theta = np.arctan2(centres[:, 1], centres[:, 0])
    e = np.stack([-np.sin(theta), np.cos(theta), 0 * theta], axis=1)
    stress = stored(sigma * e[:, :, None] * e[:, None, :])
    s = across(mesh, cyclic(n), np.ones(n), stress, "cells", Y, [0, 0, 0])
    d = np.pi / (n * m)
    A = (R - INNER) * H
    assert abs(s.area - 2 * A) < 1e-8
    assert miss(s.force, [0, 2 * sigma * A * np.cos(d) ** 2, 0]) < 1e-8
    assert s.copies == (n // 2, n - 1)
    assert miss(s.centroid, [0, 0, H / 2], R) < 1e-8
