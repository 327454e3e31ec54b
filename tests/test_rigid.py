"""Rigid-body motions that a case leaves free, against a numerical null space, and magnitudes."""

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

from expander.audit.magnitudes import body_box, body_size, magnitudes
from expander.audit.rigid import (
    _complex_direction,
    common_point,
    displacement,
    free_motions,
    holding,
    share,
)
from expander.errors import InputError
from expander.groups import CutPlane, CyclicAxis, make_group
from expander.placements import unit

ABOUT_ORIGIN = " through (0, 0, 0)"


def null_space(group, chi, points, normal=None) -> np.ndarray:
    """(k, n, 3) all motions of a body with u(g x) = chi Q u(x), by plain linear algebra.

    The unknowns are six motions about the origin; with `normal` those of a plane.
    """
    six = np.eye(6)
    if normal is not None:
        a = np.linalg.svd(normal[None])[2][1:]
        six = np.zeros((3, 6))
        six[:2, :3], six[2, 3:] = a, normal

    def fields(x):
        return np.stack([m[:3] + np.cross(m[3:], x) for m in six], axis=-1)  # (n, 3, 6)

    rows = [
        fields(p.apply(points)) - c * np.einsum("ij,njk->nik", p.Q, fields(points))
        for c, p in zip(chi, group.placements, strict=True)
    ]
    _, s, vh = np.linalg.svd(np.concatenate(rows).reshape(-1, len(six)))
    kept = vh[s < 1e-9 * max(1.0, s[0])].conj()
    return np.einsum("kj,nij->kni", kept, fields(points))


def same_span(a: np.ndarray, b: np.ndarray) -> bool:
    """Whether two sets of independent fields (k, n, 3) span the same space."""
    if len(a) != len(b):
        return False
    if not len(a):
        return True
    A, B = (f.reshape(len(f), -1).T for f in (a, b))
    A, B = (np.linalg.qr(f)[0] for f in (A, B))
    return bool(np.linalg.svd(A.conj().T @ B, compute_uv=False).min() > 1.0 - 1e-9)


@pytest.mark.parametrize("name", CASES)
@pytest.mark.parametrize("seed", [None, 11])
def test_motions_are_the_null_space(name, seed):
    """As declared about the origin, and askew at a point off it."""
    R, t = somewhere(seed) if seed else (np.eye(3), np.zeros(3))
    group, chi = CASES[name].build(R, t)
    points = np.random.default_rng(1).uniform(-2.0, 2.0, size=(5, 3)) + t
    motions = free_motions(group, chi, near=points.mean(axis=0))
    assert motions.count == len(motions.words) == len(motions.basis)
    assert same_span(displacement(motions, points), null_space(group, chi, points))
    trace = np.mean(
        [np.conj(c) * (1 + p.det) * np.trace(p.Q) for c, p in zip(chi, group.placements)]  # noqa: B905
    )
    assert motions.count == pytest.approx(trace, abs=1e-9)
    assert motions.complex == np.iscomplexobj(chi)


@pytest.mark.parametrize("seed", [None, 11])
@pytest.mark.parametrize("name", [n for n in CASES if " z" not in n and n[:5] != "x y z"])
def test_plane_models(name, seed):
    R, t = somewhere(seed) if seed else (np.eye(3), np.zeros(3))
    group, chi = CASES[name].build(R, t)
    flat = np.random.default_rng(2).uniform(-2.0, 2.0, size=(5, 3)) * [1, 1, 0]
    points = flat @ R.T + t
    motions = free_motions(group, chi, R @ Z if seed else True, near=points.mean(axis=0))
    assert same_span(displacement(motions, points), null_space(group, chi, points, R @ Z))
    Q2 = [(R.T @ p.Q @ R)[:2, :2] for p in group.placements]
    count = np.mean(
        [np.conj(c) * (np.trace(q) + np.linalg.det(q)) for c, q in zip(chi, Q2, strict=True)]
    )
    assert motions.count == pytest.approx(count, abs=1e-9)


def test_a_plane_model_mirrored_in_its_own_plane():
    """Antisymmetric about the model's own plane no motion in the plane is left."""
    for sign, count in ((1, 3), (-1, 0)):
        assert free_motions(*Case([Z], (sign,)).build(), plane_model=True).count == count


@pytest.mark.parametrize(
    ("name", "words"),
    [
        ("x S", ["translation along y", "translation along z", "rotation about x" + ABOUT_ORIGIN]),
        ("x A", ["translation along x", "rotation about y" + ABOUT_ORIGIN,
                 "rotation about z" + ABOUT_ORIGIN]),
        ("x y SS", ["translation along z"]),
        ("x y SA", ["translation along y", "rotation about x" + ABOUT_ORIGIN]),
        ("x y AA", ["rotation about z" + ABOUT_ORIGIN]),
        ("x y z SSS", []),
        ("N = 7 h = 0", ["translation along z", "rotation about z" + ABOUT_ORIGIN]),
        ("N = 7 h = 1", ["translation across the axis z (complex: x + i y)",
                         "rotation about lines across the axis z" + ABOUT_ORIGIN
                         + " (complex: x + i y)"]),
        ("N = 7 h = 2", []),
        ("N = 2 h = 1", ["translation along x", "translation along y",
                         "rotation about x" + ABOUT_ORIGIN, "rotation about y" + ABOUT_ORIGIN]),
    ],
)  # fmt: skip
def test_words(name, words):
    assert list(free_motions(*CASES[name].build()).words) == words


def test_words_of_skew_planes():
    skew = Case([np.array([1.0, 1.0, 0.0])], (1,)).build(t=(1.0, 1.0, 0.0))
    assert free_motions(*skew, near=(3.0, 2.0, 5.0)).words == (
        "translation along z",
        "translation along (0.7071, -0.7071, 0)",
        "rotation about (0.7071, 0.7071, 0) through (1.5, 0.5, 5)",
    )


def test_a_plane_askew_keeps_a_horizontal_translation():
    motions = free_motions(*Case([np.array([1.0, 2.0, 3.0])], (1,)).build())
    assert motions.basis[0] == pytest.approx([2 / 5**0.5, -1 / 5**0.5, 0, 0, 0, 0])


def test_the_conjugate_wave_has_the_conjugate_motion():
    group, chi = CASES["N = 5 h = 1"].build()
    forward, backward = free_motions(group, chi), free_motions(group, chi.conj())
    assert forward.basis[0, :3] == pytest.approx(X + 1j * Y)
    assert backward.basis == pytest.approx(forward.basis.conj())
    assert backward.words[0] == "translation across the axis z (complex: x - i y)"


@pytest.mark.parametrize("axis", ["x", "y", "(0.26, -0.48, 0.84)"])
def test_words_of_another_axis(axis):
    direction = {"x": X, "y": Y}.get(axis, np.array([0.26, -0.48, 0.84]))
    group = make_group([], CyclicAxis(4, direction / np.linalg.norm(direction), np.zeros(3)))
    words = free_motions(group, 1j ** np.arange(4)).words
    expected = {"x": "x (complex: y + i z)", "y": "y (complex: x - i z)"}.get(axis, "(0.2")
    assert words[0].startswith(f"translation across the axis {expected}")


@given(st.floats(0, 7))
def test_complex_directions_start_from_a_preferred_one(phase):
    """Whatever phase the singular vectors come with."""
    span = np.exp(1j * phase) * (X - 1j * Z)[:, None] / np.sqrt(2.0)
    assert _complex_direction(span, np.eye(3))[0] == pytest.approx(X - 1j * Z)
    tilted = np.array([0.6, 0.8, 0.0])
    span = np.exp(1j * phase) * (Z + 1j * tilted)[:, None] / np.sqrt(2.0)
    assert _complex_direction(span, np.eye(3))[0] == pytest.approx(Z + 1j * tilted)


def test_an_axis_is_named_as_declared():
    """Its own direction, though it points away from all of x, y and z."""
    direction = unit([-2.0, -1.0, -2.0])
    group = make_group([], CyclicAxis(5, direction, np.zeros(3)))
    motions = free_motions(group, np.ones(5))
    assert motions.basis.tolist() == [[*direction, 0, 0, 0], [0, 0, 0, *direction]]


@given(st.integers(0, 10_000), st.sampled_from(sorted(CASES)))
def test_the_common_point_is_the_nearest(seed, name):
    """No placement moves it, and the way to it is normal to all directions that none turns."""
    R, t = somewhere(seed)
    group, _ = CASES[name].build(R, t)
    near = np.random.default_rng(seed).uniform(-5, 5, 3)
    p = common_point(group, near)
    assert max(np.abs(g.apply(p) - p).max() for g in group.placements) < 1e-12 * 40
    still = np.linalg.svd(np.concatenate([g.Q - np.eye(3) for g in group.placements]))
    fixed = still[2][still[1] < 1e-9]
    assert np.abs(fixed @ (p - near)).max(initial=0.0) < 1e-12 * 40


# --- share and holding --------------------------------------------------------------------------


def moving(name, seed, size):
    """A body, its motions, and a displacement of the case with rigid motion in it."""
    points, group, chi = placed_body(name)
    motions = free_motions(group, chi, near=points.mean(axis=0))
    u = equivariant(group, chi, waves(seed, np.iscomplexobj(chi)))(points)
    rng = np.random.default_rng(seed)
    c = size * rng.normal(size=motions.count)
    if motions.complex:
        c = c * np.exp(1j * rng.uniform(0, 6, motions.count))
    return points, group, chi, motions, u + np.einsum("k,kni->ni", c, displacement(motions, points))


@pytest.mark.parametrize("name", BODIES)
@pytest.mark.parametrize("seed", range(3))
def test_share_of_the_sector_is_that_of_the_whole_body(name, seed):
    points, group, chi, motions, u = moving(name, seed, 0.7)
    x, v, gap = whole(points, group, chi, u)
    assert gap < 1e-12 * np.abs(u).max()
    part, c = share(motions, points, u, 1.0 / multiplicity(points, group))
    A = displacement(motions, x).reshape(motions.count, -1).T
    expected = np.linalg.lstsq(A, v.ravel(), rcond=None)[0]
    assert c == pytest.approx(expected, rel=1e-10, abs=1e-12)
    assert part == pytest.approx(np.linalg.norm(A @ expected) / np.linalg.norm(v), rel=1e-10)
    assert 0.0 < part < 1.0
    # Without the weights seam nodes count too often, and the answer is another.
    if motions.count:
        assert share(motions, points, u)[0] != pytest.approx(part, rel=1e-6)


@pytest.mark.parametrize("name", BODIES)
def test_any_rigid_motion_of_all_six_adds_only_the_free_ones(name):
    """Over the whole body a field of the case is orthogonal to every motion that is not free."""
    points, group, chi, motions, u = moving(name, 4, 0.0)
    x, v, _ = whole(points, group, chi, u)
    away = x - motions.point
    six = np.stack([np.broadcast_to(e, x.shape) for e in np.eye(3)]
                   + [np.cross(e, away) for e in np.eye(3)])  # fmt: skip
    best = np.linalg.lstsq(six.reshape(6, -1).T.astype(v.dtype), v.ravel(), rcond=None)[0]
    assert best @ motions.basis.conj().T @ motions.basis / (1 + motions.complex) == pytest.approx(
        best, abs=1e-10 * np.abs(v).max()
    )


@pytest.mark.parametrize("name", BODIES)
def test_pure_motion_and_no_motion(name):
    points, _, _, motions, u = moving(name, 5, 0.0)
    fields = displacement(motions, points)
    for k, field in enumerate(fields):
        part, c = share(motions, points, 3.0 * field)
        assert part == pytest.approx(1.0, abs=1e-12)
        assert c == pytest.approx(3.0 * np.eye(motions.count)[k], abs=1e-11)
    _, c = share(motions, points, u)
    rest = u - np.einsum("k,kni->ni", c, fields)
    assert share(motions, points, rest)[0] < 1e-12
    assert share(motions, points, 0.0 * u)[0] == 0.0


def test_no_free_motion_has_no_share():
    group, chi = CASES["x y z SSS"].build()
    part, c = share(free_motions(group, chi), np.eye(3), np.ones((3, 3)))
    assert part == 0.0
    assert c.shape == (0,)


def test_values_that_are_not_finite_are_left_out():
    points, _, _, motions, u = moving("half A", 6, 1.0)
    spoilt = u.copy()
    spoilt[[0, 3], 1] = np.nan, np.inf
    kept = np.setdiff1d(np.arange(len(u)), [0, 3])
    part, c = share(motions, points, spoilt)
    expected = share(motions, points[kept], u[kept])
    assert part == expected[0]
    assert c.tolist() == expected[1].tolist()


@pytest.mark.parametrize("seed", [None, 12, 13])
def test_nodes_on_one_line_see_no_turn_about_it(seed):
    """A beam along z on the axis: its nodes know nothing of the rotation about z."""
    R, t = somewhere(seed) if seed else (np.eye(3), np.zeros(3))
    group, chi = CASES["N = 4 h = 0"].build(R, t)
    points = t + np.linspace(0, 1, 5)[:, None] * (R @ Z)
    motions = free_motions(group, chi, near=t)
    part, c = share(motions, points, np.full((5, 3), 2.0) * (R @ Z))
    assert part == pytest.approx(1.0)
    assert abs(c[0]) == pytest.approx(2.0)
    assert c[1] == 0.0


@pytest.mark.parametrize("name", BODIES)
def test_holding_is_the_work_of_all_reactions(name):
    points, group, chi, motions, f = moving(name, 7, 0.5)
    x = np.concatenate([p.apply(points) for p in group.placements])
    body = np.concatenate([c * f @ p.Q.T for c, p in zip(chi, group.placements, strict=True)])
    phi = displacement(motions, x)
    most = np.linalg.norm(phi, axis=2) @ np.linalg.norm(body, axis=1)
    expected = np.einsum("kni,ni->k", phi.conj(), body) / most
    assert holding(motions, points, f) == pytest.approx(expected, abs=1e-12)
    assert np.abs(expected).min(initial=1.0) > 1e-4  # the check below has something to tell apart
    # Forces that do no work in any free motion: the free part taken out.
    g = f - np.einsum("k,kni->ni", share(motions, points, f)[1], displacement(motions, points))
    assert np.abs(holding(motions, points, g)).max(initial=0.0) < 1e-12


def test_holding_at_the_axis_and_round_off():
    """A force at a node on the axis holds no turn about it; round-off is no force."""
    R, t = somewhere(8)
    group, chi = CASES["N = 4 h = 0"].build(R, t)
    motions = free_motions(group, chi, near=t)
    points = np.array([[0, 0, 0.7], [1.0, 0, 0]]) @ R.T + t
    held = holding(motions, points, np.array([[5.0, 7.0, 0], [0, 0, 0]]) @ R.T)
    turn = [k for k, w in enumerate(motions.words) if w.startswith("rotation")]
    assert held[turn].tolist() == [0.0]
    push = np.array([[0, 0, 0], [0, 1e-14, 0]]) @ R.T
    assert abs(holding(motions, points, push)[turn][0]) == pytest.approx(1.0)
    assert abs(holding(motions, points, push, loads=1.0)[turn][0]) < 1e-13
    assert holding(motions, points, 0.0 * push).tolist() == [0.0, 0.0]


# --- refusals -----------------------------------------------------------------------------------


def test_factors_must_be_a_character():
    group, chi = CASES["x y SA"].build()
    with pytest.raises(InputError, match="4 copies"):
        free_motions(group, chi[:3])
    with pytest.raises(InputError, match="contradict"):
        free_motions(group, chi * [1, 1, 1, -1])


def test_a_plane_model_must_stay_in_its_plane():
    with pytest.raises(InputError, match="out of that plane"):
        free_motions(*Case([np.array([0.0, 1.0, 1.0])], (1,)).build(), plane_model=True)
    with pytest.raises(InputError, match="normal x"):
        free_motions(*CASES["N = 3 h = 0"].build(), plane_model=[1, 0, 0])


# --- magnitudes ---------------------------------------------------------------------------------


def test_the_box_of_the_whole_body():
    group = make_group([CutPlane("x", X, 2 * X), CutPlane("y", Y, np.zeros(3))], None)
    box = body_box(group, [[2.0, 0, 0], [5.0, 4.0, 1.0]])
    assert box.tolist() == [[-1.0, -4.0, 0.0], [5.0, 4.0, 1.0]]
    assert body_size(group, [[2.0, 0, 0], [5.0, 4.0, 1.0]]) == 8.0


@pytest.mark.parametrize(
    ("u", "rotation", "verdicts"),
    [
        (0.79, 0.49, ["plausible", "plausible"]),
        (0.81, 0.51, ["large", "large"]),
        (7.9, 6.28, ["large", "large"]),
        (8.1, 6.29, ["absurd", "absurd"]),
        (np.inf, 0.0, ["absurd", "plausible"]),
        (np.nan, 0.0, ["plausible", "plausible"]),
    ],
)
def test_verdicts(u, rotation, verdicts):
    small = np.full((4, 3), 1e-3)
    moved, turned = small.copy(), small.copy()
    moved[2], turned[1] = [0, -u, 0], [0, rotation, 0]
    found = magnitudes(8.0, moved, turned)
    assert [m.verdict for m in found] == verdicts
    if np.isfinite(u):
        assert [(m.field, m.node, m.largest) for m in found] == [
            ("displacement", 2, u),
            ("rotation", 1, pytest.approx(rotation, abs=2e-3)),
        ]
        limits = [{"large": 0.8, "plausible": 0.8, "absurd": 8.0}[verdicts[0]],
                  {"large": 0.5, "plausible": 0.5, "absurd": 2 * np.pi}[verdicts[1]]]  # fmt: skip
        assert [m.limit for m in found] == pytest.approx(limits)


def test_only_what_is_there_is_judged():
    assert magnitudes(1.0) == ()
    assert magnitudes(1.0, np.zeros((0, 3))) == ()
    assert [m.field for m in magnitudes(1.0, rotation=np.zeros((1, 3)))] == ["rotation"]


@given(st.integers(0, 1000))
def test_largest_over_the_cycle(seed):
    """Against the values at many phases."""
    rng = np.random.default_rng(seed)
    v = rng.normal(size=(6, 3)) + 1j * rng.normal(size=(6, 3))
    phases = np.exp(1j * np.linspace(0, 2 * np.pi, 20_001))
    lengths = np.linalg.norm((v[:, :, None] * phases).real, axis=1).max(axis=1)
    found = magnitudes(1.0, v)[0]
    assert found.node == np.argmax(lengths)
    assert found.largest == pytest.approx(lengths.max(), rel=1e-7)
