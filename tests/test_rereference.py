"""Rigid-body motion taken out of a case: what remains still belongs to it."""

from __future__ import annotations

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st
from meshes import somewhere
from rigid_cases import (
    BODIES,
    CASES,
    Case,
    X,
    Y,
    Z,
    equivariant,
    multiplicity,
    placed_body,
    waves,
    whole,
)

from expander.audit.rigid import displacement, free_motions
from expander.errors import InputError
from expander.rereference import Rereference, least_squares, remove, three_points

SEEDS = st.integers(0, 10_000)


def state(name, seed, size=1.0):
    """A body, its motions, and displacement and rotation of the case with rigid motion in them."""
    points, group, chi = placed_body(name)
    complex_ = np.iscomplexobj(chi)
    motions = free_motions(group, chi, near=points.mean(axis=0))
    u = equivariant(group, chi, waves(seed, complex_))(points)
    w = equivariant(group, chi, waves(seed + 1, complex_), axial=True)(points)
    rng = np.random.default_rng(seed)
    c = size * rng.normal(size=motions.count)
    if complex_:
        c = c * np.exp(1j * rng.uniform(0, 6, motions.count))
    return points, group, chi, motions, u, w, c


def with_motion(motions, points, u, w, c):
    return u + np.einsum("k,kni->ni", c, displacement(motions, points)), w + c @ motions.basis[
        :, 3:
    ]


# --- least squares ------------------------------------------------------------------------------


@given(SEEDS, st.sampled_from(sorted(BODIES)), st.sampled_from([1e-3, 1.0, 1e3]))
def test_what_remains_is_still_carried_from_copy_to_copy(seed, name, size):
    """Displacement and rotation close at every seam, before and after."""
    points, group, chi, motions, u, w, c = state(name, seed, size)
    u, w = with_motion(motions, points, u, w, c)
    found = remove(motions, points, u, weights=1.0 / multiplicity(points, group))
    rest, turned = found.of_displacement(points, u), found.of_rotation(w)
    det = np.array([p.det for p in group.placements])
    for values, factor in ((u, chi), (rest, chi), (w, chi * det), (turned, chi * det)):
        assert whole(points, group, factor, values)[2] < 1e-12 * (1 + size)
    if motions.count:
        assert np.abs(found.motion).max() > 0.0


@given(SEEDS, st.sampled_from(sorted(BODIES)))
def test_what_remains_has_no_motion_over_the_whole_body(seed, name):
    points, group, chi, motions, u, w, c = state(name, seed)
    u, _ = with_motion(motions, points, u, w, c)
    found = remove(motions, points, u, weights=1.0 / multiplicity(points, group))
    x, rest, _ = whole(points, group, chi, found.of_displacement(points, u))
    six = [np.broadcast_to(e, x.shape) for e in np.eye(3)]
    six += [np.cross(e, x - motions.point) for e in np.eye(3)]
    work = np.einsum("kni,ni->k", np.stack(six), rest)
    assert np.abs(work).max() < 1e-11 * np.abs(u).max() * len(x)


@given(SEEDS, st.sampled_from(sorted(BODIES)), st.sampled_from([1e-3, 1.0, 1e3]))
def test_twice_is_once(seed, name, size):
    points, _, _, motions, u, w, c = state(name, seed, size)
    u, w = with_motion(motions, points, u, w, c)
    found = remove(motions, points, u)
    rest = found.of_displacement(points, u)
    again = remove(motions, points, rest)
    assert np.abs(again.displacement(points)).max() < 1e-12 * (1 + size)
    assert again.of_displacement(points, rest) == pytest.approx(rest, abs=1e-12 * (1 + size))


@given(SEEDS, st.sampled_from(sorted(BODIES)))
def test_pure_motion_leaves_nothing(seed, name):
    points, _, _, motions, u, w, c = state(name, seed)
    u, w = with_motion(motions, points, 0 * u, 0 * w, c)
    found = remove(motions, points, u)
    assert found.coefficients == pytest.approx(c, abs=1e-11)
    assert np.abs(found.of_displacement(points, u)).max() < 1e-11
    assert np.abs(found.of_rotation(w)).max() < 1e-11


@given(SEEDS, st.sampled_from(sorted(BODIES)))
def test_added_motion_changes_only_what_is_removed(seed, name):
    points, _, _, motions, u, w, c = state(name, seed)
    moved, _ = with_motion(motions, points, u, w, c)
    a, b = (remove(motions, points, v) for v in (u, moved))
    assert b.coefficients - a.coefficients == pytest.approx(c, abs=1e-11)
    assert b.of_displacement(points, moved) == pytest.approx(
        a.of_displacement(points, u), abs=1e-11
    )


def test_complex_amplitudes_of_a_real_case():
    """A forced, damped response is complex on cut planes too."""
    points, group, chi = placed_body("quarter SS")
    motions = free_motions(group, chi, near=points.mean(axis=0))
    u = equivariant(group, chi, waves(3, True))(points)
    c = least_squares(motions, points, u)
    parts = [least_squares(motions, points, v) for v in (u.real, u.imag)]
    assert c == pytest.approx(parts[0] + 1j * parts[1], abs=1e-13)
    rest = remove(motions, points, u).of_displacement(points, u)
    assert whole(points, group, chi, rest)[2] < 1e-12


def test_plane_model():
    group, chi = CASES["x A"].build()
    points = np.random.default_rng(0).uniform(0, 1, (6, 3)) * [1, 1, 0]
    motions = free_motions(group, chi, plane_model=True)
    found = remove(motions, points, 0.25 * X + np.cross(0.5 * Z, points))
    assert found.words == ("translation along x 0.25, rotation about z through (0, 0, 0) 0.5 rad")


@pytest.mark.parametrize(
    ("name", "coefficients", "words"),
    [
        ("N = 7 h = 0", [0.0123, 4.5e-4],
         "translation along z 0.0123, rotation about z through (0, 0, 0) 0.00045 rad"),
        ("x y SA", [-1234567.0, 0.0],
         "translation along y -1.235e+06, rotation about x through (0, 0, 0) 0 rad"),
        ("N = 4 h = 1", [0.5j, -0.25],
         "translation across the axis z (complex: x + i y) 0.5 (phase 90 degrees), rotation about "
         "lines across the axis z through (0, 0, 0) (complex: x + i y) -0.25 rad"),
    ],
)  # fmt: skip
def test_words(name, coefficients, words):
    motions = free_motions(*CASES[name].build())
    assert Rereference(motions, "least squares", np.array(coefficients)).words == words


# --- three points -------------------------------------------------------------------------------


@given(SEEDS, st.booleans())
def test_three_points_rule(seed, complex_):
    """The first at rest, the second along its direction, the third in the plane."""
    rng = np.random.default_rng(seed)
    x, u = rng.normal(size=(3, 3)), rng.normal(size=(3, 3)).astype(complex if complex_ else float)
    if complex_:
        u += 1j * rng.normal(size=(3, 3))
    t, omega = three_points(x, u)
    rest = u - t - np.cross(omega, x - x[0])
    along = (x[1] - x[0]) / np.linalg.norm(x[1] - x[0])
    normal = np.cross(x[1] - x[0], x[2] - x[0])
    normal /= np.linalg.norm(normal)
    scale = 1e-12 * (1 + np.abs(omega).max()) * (1 + np.abs(x).max())
    assert np.abs(rest[0]).max() < scale
    assert np.abs(rest[1] - (rest[1] @ along) * along).max() < scale
    assert abs(rest[2] @ normal) < scale


@given(SEEDS)
def test_three_points_find_a_rigid_motion(seed):
    rng = np.random.default_rng(seed)
    x, t, omega = rng.normal(size=(3, 3)), rng.normal(size=3), rng.normal(size=3)
    found = three_points(x, t + np.cross(omega, x - x[0]))
    assert found[0] == pytest.approx(t)
    assert found[1] == pytest.approx(
        omega, abs=1e-12 / np.linalg.norm(np.cross(*np.diff(x, axis=0))) ** 2
    )


@pytest.mark.parametrize(
    "x",
    [
        [[0, 0, 0], [1, 1, 1], [3, 3, 3]],
        [[0, 0, 0], [1, 1, 1], [1, 1, 1]],
        [[2, 2, 2], [2, 2, 2], [1, 0, 1]],
        [[0, 0, 0], [1e-3, 0, 0], [2e-3, 1e-10, 0]],
        [[5, 5, 5], [5, 5, 5], [5, 5, 5]],
    ],
)
def test_points_on_one_line_are_refused(x):
    with pytest.raises(InputError, match="one line"):
        three_points(np.array(x, dtype=float), np.zeros((3, 3)))


def test_thin_triangles_are_none_of_these():
    t, omega = three_points(1e-3 * np.array([[0, 0, 0], [1, 0, 0], [0, 1e-4, 0]]), np.eye(3) * 0)
    assert not t.any()
    assert not omega.any()


@given(SEEDS, st.sampled_from(sorted(BODIES)))
def test_three_points_of_a_free_motion(seed, name):
    """A deformation of the case that leaves the three points at rest, and free motion: the motion
    is removed whole, the rest closes, and twice is once."""
    points, group, chi, motions, u, w, c = state(name, seed)
    nodes = _triangle(points, np.random.default_rng(seed))
    images = np.stack([p.apply(points[nodes]) for p in group.placements])
    away = np.linalg.norm(points[:, None, None] - images, axis=3).min(axis=1)
    u *= away.prod(axis=1)[:, None]
    moved, turned = with_motion(motions, points, u, w, c)
    found = remove(motions, points, moved, "three points", nodes=nodes)
    rest = found.of_displacement(points, moved)
    assert found.coefficients == pytest.approx(c, abs=1e-10)
    assert rest == pytest.approx(u, abs=1e-10)
    assert found.of_rotation(turned) == pytest.approx(w, abs=1e-10)
    assert whole(points, group, chi, rest)[2] < 1e-11
    again = remove(motions, points, rest, "three points", nodes=nodes)
    assert np.abs(again.displacement(points)).max() < 1e-10


def _triangle(points, rng):
    """Three nodes of a triangle that is not thin."""
    while True:
        nodes = rng.choice(len(points), 3, replace=False)
        a, b = points[nodes[1:]] - points[nodes[0]]
        if np.linalg.norm(np.cross(a, b)) > 0.1:
            return nodes.tolist()


def test_three_points_that_deform_in_a_free_way_only():
    """Quarter S S, points in the cut plane x that move along z: only the translation is free, and
    the field is removed without losing what closes."""
    R, t = somewhere(2)
    group, chi = Case([X, Y], (1, 1)).build(R, t)
    flat = np.array([[1.0, 1, 0], [2.0, 1, 0], [1.0, 2, 0], [0, 0, 1], [0, 1, 1.0]])
    points = flat @ R.T + t
    motions = free_motions(group, chi, near=points.mean(axis=0))
    u = np.array([[0, 0, 0.3]] * 3 + [[0, 0, 0.9], [0, 0.1, 0.2]]) @ R.T
    found = remove(motions, points, u, "three points", nodes=[0, 1, 2])
    rest = found.of_displacement(points, u) @ R
    assert rest == pytest.approx(u @ R - [0, 0, 0.3], abs=1e-12)
    assert not found.motion[3:].any()


@pytest.mark.parametrize(
    ("case", "plane_model", "motion", "said"),
    [
        (Case([X, Y], (1, 1)), None, [0.1, 0.01, 1, 0, 0, 0],
         ["translation along x of 0.1,", "plane 'plane 1' under symmetric load"]),
        (Case([X, Y], (1, -1)), None, [0, 0, -0.2, 0, 0, 0],
         ["translation along z of -0.2,", "plane 'plane 2' under antisymmetric load"]),
        (Case([X], (-1,)), None, [0.3, 0, 0, 0.02, 0, 0],
         ["rotation about x of 0.02 rad", "plane 'plane 1' under antisymmetric load",
          "free here: translation along x, rotation about y"]),
        (Case([], (), 5, 0), None, [0, 0.1, 0.3, 0, 0, 0],
         ["translation along y of 0.1,", "load of 0 nodal diameters on 5 sectors"]),
        (Case([], (), 8, 1), None, [0, 0, 0.3, 0, 0, 0],
         ["translation along z of 0.3,", "load of 1 nodal diameters on 8 sectors"]),
        (Case([X], (-1,)), True, [0.3, 0, 0, 0, 0.02, 0],
         ["rotation about y of 0.02 rad", "the plane of the plane model"]),
    ],
)  # fmt: skip
def test_motions_that_the_load_forbids(case, plane_model, motion, said):
    group, chi = case.build()
    points = np.array([[1.0, 0.2, 0], [2, 1, 0], [1, 3, 0], [2, 2, 0]])
    motions = free_motions(group, chi, plane_model)
    u = np.array(motion[:3]) + np.cross(motion[3:], points)
    with pytest.raises(InputError) as refused:
        remove(motions, points, u, "three points", nodes=[0, 1, 2])
    for words in said:
        assert words in str(refused.value)


@pytest.mark.parametrize(("part", "refused"), [(2e-6, True), (0.5e-6, False)])
def test_how_much_is_forbidden(part, refused):
    """Part of the motion's own displacement; 5 units of free translation, to the side a little."""
    group, chi = Case([X, Y], (1, 1)).build()
    points = np.array([[1.0, 0, 0], [2, 1, 0], [1, 3, 0]])
    motions = free_motions(group, chi)
    u = np.tile([5.0 * part, 0, 5.0], (3, 1))
    if refused:
        with pytest.raises(InputError, match="translation along x"):
            remove(motions, points, u, "three points", nodes=[0, 1, 2])
    else:
        found = remove(motions, points, u, "three points", nodes=[0, 1, 2])
        assert found.motion.tolist() == pytest.approx([0, 0, 5.0, 0, 0, 0])


def test_the_motion_counts_where_the_body_hardly_moves():
    """Three points turn together, the far end of the body stays: the motion is that of the points,
    1 rad over some 10 units, and beside it a translation of 5e-6 is round-off."""
    group, chi = Case([X], (-1,)).build()
    points = np.array([[0.1, 0, 0], [0.2, 0.1, 0], [0.1, 0, 0.1], [10.0, 0, 0]])
    u = np.cross(Z, points) + 5e-6 * Y
    u[3] = 0.0
    found = remove(free_motions(group, chi), points, u, "three points", nodes=[0, 1, 2])
    assert found.motion.tolist() == pytest.approx([0, 0, 0, 0, 0, 1.0], abs=1e-12)


def test_a_forbidden_turn_counts_by_what_it_moves_far_away():
    """A small turn about x moves the far end of the body, whatever the three points see of it."""
    group, chi = Case([X, Y], (1, 1)).build()
    points = np.array([[0.1, 0, 0], [0.2, 0.1, 0], [0.1, 0.3, 0], [0, 0, 1e6]])
    u = np.tile([0, 0, 1.0], (4, 1)) + np.cross([0, 1e-9, 0], points)
    with pytest.raises(InputError, match="rotation about y"):
        remove(free_motions(group, chi), points, u, "three points", nodes=[0, 1, 2])


def test_three_points_of_a_wave():
    """Complex displacement and complex motions."""
    group, chi = Case([], (), 5, 1).build()
    motions = free_motions(group, chi)
    points = np.array([[1.0, 0.2, 0], [2, 1, 0], [1, 3, 1.0]])
    c = np.array([0.3 - 0.1j, 0.02j])
    u = np.einsum("k,kni->ni", c, displacement(motions, points))
    found = remove(motions, points, u, "three points", nodes=[2, 0, 1])
    assert found.coefficients == pytest.approx(c)
    with pytest.raises(InputError, match=r"0\.3 \(phase 90 degrees\)"):
        remove(motions, points, u + 0.3j * Z, "three points", nodes=[2, 0, 1])


# --- refusals -----------------------------------------------------------------------------------


def test_nothing_to_remove():
    motions = free_motions(*CASES["x y z SSS"].build())
    for method in ("least squares", "three points"):
        with pytest.raises(InputError, match="nothing to remove"):
            remove(motions, np.eye(3), np.eye(3), method, nodes=[0, 1, 2])


@pytest.mark.parametrize("nodes", [None, [], [0, 1], [0, 1, 3], [-1, 0, 1], [0, 1, 2, 2]])
def test_nodes_that_are_no_three_points(nodes):
    motions = free_motions(*CASES["x S"].build())
    with pytest.raises(InputError, match="node numbers from 0 to 2"):
        remove(motions, np.eye(3), np.eye(3), "three points", nodes=nodes)


def test_an_unknown_method():
    with pytest.raises(InputError, match="least squares"):
        remove(free_motions(*CASES["x S"].build()), np.eye(3), np.eye(3), "best")


def test_y_is_a_direction_too():
    """Removal along each axis on its own, so that no component is mistaken for another."""
    for k, sign in ((0, X), (1, Y), (2, Z)):
        motions = free_motions(*Case([sign], (-1,)).build())
        points = np.random.default_rng(k).normal(size=(5, 3))
        found = remove(motions, points, np.tile(2.0 * sign, (5, 1)))
        assert found.motion.tolist() == pytest.approx([*(2.0 * sign), 0, 0, 0], abs=1e-13)
