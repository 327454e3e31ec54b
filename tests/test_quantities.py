"""Quantities: how stored components turn with the body.

Oracles: explicit index formulas (numpy's einsum, sympy) on full arrays that this file fills and
reads with its own loops; eigenvalues by numpy; spglib's axial vectors. The parities are those of
J. D. Jackson, Classical Electrodynamics, 3rd ed., table 6.1, and J. F. Nye, Physical Properties
of Crystals, chapters I and II.
"""

from __future__ import annotations

import itertools

import numpy as np
import pytest
import spglib
import sympy
from hypothesis import assume, given
from hypothesis import strategies as st
from scipy.spatial.transform import Rotation

from expander.errors import InputError, NotYetError
from expander.quantities import Quantity, quantity, sign_words
from expander.tradewords import trade_word

pytestmark = pytest.mark.filterwarnings("ignore::DeprecationWarning:spglib")

FULL = "xx xy xz yx yy yz zx zy zz"
# kind, stored order, shear word, whether it is the storage of a plane model
STORAGES = [
    ("scalar", "value", "tensor", False),
    ("pseudoscalar", "value", "tensor", False),
    ("polar vector", "x y z", "tensor", False),
    ("polar vector", "z x y", "tensor", False),
    ("polar vector", "x y", "tensor", True),
    ("polar vector", "y x", "tensor", True),
    ("axial vector", "x y z", "tensor", False),
    ("axial vector", "y z x", "tensor", False),
    ("axial vector", "z", "tensor", True),
    ("symmetric tensor", "xx yy zz xy yz zx", "tensor", False),
    ("symmetric tensor", "xx yy zz yz xz xy", "tensor", False),  # Voigt's order
    ("symmetric tensor", "xx yy zz xy xz yz", "tensor", False),  # Abaqus/Standard's order
    ("symmetric tensor", "xx xy xz yy yz zz", "tensor", False),  # upper triangle by rows
    ("symmetric tensor", "xx yy zz xy yz zx", "engineering", False),
    ("symmetric tensor", "zz xx yy zy yx xz", "engineering", False),
    ("symmetric tensor", FULL, "tensor", False),
    ("symmetric tensor", "xx yy zz xy", "tensor", True),
    ("symmetric tensor", "xx yy zz xy", "engineering", True),
    ("symmetric tensor", "xx yy xy", "tensor", True),
    ("symmetric tensor", "xy yy xx", "engineering", True),
    ("tensor", FULL, "tensor", False),
    ("tensor", "xx yx zx xy yy zy xz yz zz", "tensor", False),  # by columns
    ("tensor", "xx xy yx yy", "tensor", True),
    ("axial tensor", FULL, "tensor", False),
]
AXIAL = {"pseudoscalar", "axial vector", "axial tensor"}
LEVI_CIVITA = np.array(
    [[[int(sympy.LeviCivita(i, j, k)) for k in range(3)] for j in range(3)] for i in range(3)]
)
MIRRORS = {letter: np.diag(1.0 - 2.0 * np.eye(3)[k]) for k, letter in enumerate("xyz")}

each_storage = pytest.mark.parametrize(
    ("kind", "order", "shear", "flat"),
    STORAGES,
    ids=[f"{k}-{o.replace(' ', '')}-{s}" for k, o, s, _ in STORAGES],
)


def stored_as(kind: str, order: str, shear: str = "tensor") -> Quantity:
    if order == "value":
        return quantity(kind, 1)
    return quantity(kind, len(order.split()), order, shear)


def fill(kind: str, order: str, shear: str, stored):
    """Stored components to the full array, component by component."""
    names = order.split()
    if order == "value":
        return np.array(stored[0])
    rank = len(names[0])
    full = np.full((3,) * rank, 0, dtype=object)
    for name, value in zip(names, stored, strict=True):
        index = tuple("xyz".index(letter) for letter in name)
        off = rank == 2 and index[0] != index[1]
        if off and shear == "engineering":
            value = value / 2
        full[index] = value
        if off and kind == "symmetric tensor" and name[::-1] not in names:
            full[index[::-1]] = value
    return full


def read(order: str, shear: str, full):
    """The full array to stored components."""
    if order == "value":
        return [np.asarray(full).item()]
    out = []
    for name in order.split():
        index = tuple("xyz".index(letter) for letter in name)
        double = 2 if shear == "engineering" and len(set(index)) == 2 else 1
        out.append(double * full[index])
    return out


def turn(kind: str, Q, full):
    """One Q for each index, times det Q if axial: written out with einsum."""
    rank = np.ndim(full)
    sign = round(float(np.linalg.det(np.array(Q, dtype=float)))) if kind in AXIAL else 1
    if rank == 0:
        moved = full
    elif rank == 1:
        moved = np.einsum("ij,j->i", Q, full)
    else:
        moved = np.einsum("ia,jb,ab->ij", Q, Q, full)
    return sign * moved


def random_Q(seed: int, flat: bool, mirrored: bool) -> np.ndarray:
    rng = np.random.default_rng(seed)
    if flat:
        R = Rotation.from_rotvec([0.0, 0.0, rng.uniform(0, 2 * np.pi)]).as_matrix()
        return R @ np.diag([-1.0, 1.0, 1.0]) if mirrored else R
    R = Rotation.random(rng=rng).as_matrix()
    return -R if mirrored else R


# --- A(Q) is a representation -------------------------------------------------------------------


@each_storage
@given(seeds=st.tuples(*[st.integers(0, 2**31)] * 2), flips=st.tuples(*[st.booleans()] * 2))
def test_products_inverse_and_identity(kind, order, shear, flat, seeds, flips) -> None:
    """A(Q1) A(Q2) = A(Q1 Q2), A(1) = 1, A(Q^T) = A(Q)^-1: any book on representations."""
    q = stored_as(kind, order, shear)
    Q1, Q2 = (random_Q(s, flat, f) for s, f in zip(seeds, flips, strict=True))
    np.testing.assert_allclose(q.matrix(Q1) @ q.matrix(Q2), q.matrix(Q1 @ Q2), atol=1e-13)
    np.testing.assert_allclose(q.matrix(Q1.T) @ q.matrix(Q1), np.eye(q.size), atol=1e-13)
    np.testing.assert_array_equal(q.matrix(np.eye(3)), np.eye(q.size))


@each_storage
@given(seed=st.integers(0, 2**31), mirrored=st.booleans())
def test_against_the_index_formula(kind, order, shear, flat, seed, mirrored) -> None:
    """v'_i = Q_ij v_j, T'_ij = Q_ia Q_jb T_ab, times det Q if axial (Nye, chapters I and II)."""
    q = stored_as(kind, order, shear)
    Q = random_Q(seed, flat, mirrored)
    stored = np.random.default_rng(seed).normal(size=q.size)
    if kind == "symmetric tensor" and q.size == 9:
        stored = (lambda T: (T + T.T).ravel())(stored.reshape(3, 3))
    full = fill(kind, order, shear, list(stored)).astype(float)
    want = read(order, shear, turn(kind, Q, full))
    np.testing.assert_allclose(q.matrix(Q) @ stored, want, atol=1e-13)


@pytest.mark.parametrize(
    ("kind", "order", "shear", "letter"),
    [(*s[:3], letter) for s in STORAGES for letter in ("xy" if s[3] else "xyz")],
)
def test_sign_tables_of_the_axis_mirrors(kind, order, shear, letter) -> None:
    """Exact algebra by sympy: every component keeps its size, and A holds that sign alone."""
    q = stored_as(kind, order, shear)
    symbols = list(sympy.symbols(" ".join(f"s{k}" for k in range(q.size)) + ",", seq=True))
    Q = MIRRORS[letter].astype(int)
    moved = read(order, shear, turn(kind, Q, fill(kind, order, shear, symbols)))
    if kind == "symmetric tensor" and q.size == 9:
        symmetric = {symbols[i]: symbols[j] for i, j in ((3, 1), (6, 2), (7, 5))}
        moved = [sympy.sympify(m) for m in moved]
        signs = [m.subs(symmetric) / s.subs(symmetric)
                 for m, s in zip(moved, symbols, strict=True)]  # fmt: skip
    else:
        signs = [sympy.simplify(m / s) for m, s in zip(moved, symbols, strict=True)]
    assert set(signs) <= {1, -1}
    np.testing.assert_array_equal(q.matrix(MIRRORS[letter]), np.diag([float(s) for s in signs]))
    flipped = [n for n, s in zip(q.components, signs, strict=True) if s < 0]
    expected = " ".join(flipped) or "none"
    if q.kind.rank == 0:
        expected = "sign" if flipped else "none"
    assert sign_words(q, q.matrix(MIRRORS[letter])) == expected


@pytest.mark.parametrize("shear", ["tensor", "engineering"])
def test_turned_shear_by_the_formula_of_the_books(shear: str) -> None:
    """Timoshenko and Goodier, Theory of Elasticity, 3rd ed., section 9 and 12: plane components
    in turned axes; with gamma the shear terms carry 1/2 and 2. Exact, at arctan(4/3)."""
    c, s = sympy.Rational(3, 5), sympy.Rational(4, 5)
    k = 1 if shear == "tensor" else 2
    # The body turns by +theta, which is the same as axes turned by -theta.
    want = sympy.Matrix([
        [c**2, s**2, -2 * s * c / k],
        [s**2, c**2, 2 * s * c / k],
        [k * s * c, -k * s * c, c**2 - s**2],
    ])  # fmt: skip
    Q = np.array([[0.6, -0.8, 0.0], [0.8, 0.6, 0.0], [0.0, 0.0, 1.0]])
    found = quantity("symmetric tensor", 3, "xx yy xy", shear).matrix(Q)
    np.testing.assert_allclose(found, np.array(want, dtype=float), atol=1e-15)


@given(seed=st.integers(0, 2**31), mirrored=st.booleans())
def test_both_shear_words_turn_the_same_strain(seed: int, mirrored: bool) -> None:
    """A strain stored either way and turned is the same physical strain, and the strain energy
    sigma . epsilon = sum of stored stress times stored engineering strain does not change."""
    rng = np.random.default_rng(seed)
    order = "xx yy zz xy yz zx"
    Q = random_Q(seed, False, mirrored)
    strain, stress = rng.normal(size=(2, 6))
    double = np.array([1, 1, 1, 2, 2, 2])
    as_tensor, as_gamma = (quantity("symmetric tensor", 6, order, w).matrix(Q)
                           for w in ("tensor", "engineering"))  # fmt: skip
    np.testing.assert_allclose(as_gamma @ (double * strain), double * (as_tensor @ strain))
    work = (as_tensor @ stress) @ (as_gamma @ (double * strain))
    np.testing.assert_allclose(work, stress @ (double * strain), atol=1e-12)
    assert np.abs(as_tensor - as_gamma).max() > 1e-3  # else the word would not matter


# --- what the kinds are to each other -----------------------------------------------------------


def A(kind: str, Q: np.ndarray) -> np.ndarray:
    size = {"scalar": 1, "pseudoscalar": 1, "polar vector": 3, "axial vector": 3}.get(kind, 9)
    return quantity(kind, size).matrix(Q)


@given(seed=st.integers(0, 2**31), mirrored=st.booleans())
def test_products_of_kinds(seed: int, mirrored: bool) -> None:
    """Cross, dot, dyadic and Levi-Civita (Nye, chapter II; Jackson, section 6.10)."""
    rng = np.random.default_rng(seed)
    Q = random_Q(seed, False, mirrored)
    u, v, a, b = rng.normal(size=(4, 3))
    polar, axial, tensor, axial_tensor = (
        A(k, Q) for k in ("polar vector", "axial vector", "tensor", "axial tensor")
    )
    pseudo = A("pseudoscalar", Q)[0, 0]
    close = {"rtol": 0, "atol": 1e-12}
    np.testing.assert_allclose(axial @ np.cross(u, v), np.cross(polar @ u, polar @ v), **close)
    np.testing.assert_allclose(polar @ np.cross(u, a), np.cross(polar @ u, axial @ a), **close)
    np.testing.assert_allclose(axial @ np.cross(a, b), np.cross(axial @ a, axial @ b), **close)
    np.testing.assert_allclose(pseudo * (u @ a), (polar @ u) @ (axial @ a), **close)
    np.testing.assert_allclose(u @ v, (polar @ u) @ (polar @ v), **close)
    np.testing.assert_allclose(
        tensor @ np.outer(u, v).ravel(), np.outer(polar @ u, polar @ v).ravel(), **close
    )
    np.testing.assert_allclose(
        axial_tensor @ np.outer(u, a).ravel(), np.outer(polar @ u, axial @ a).ravel(), **close
    )
    # The tensor of a rotation, w x r = W r, and back: the axial vector of a skew tensor.
    W = -np.einsum("ijk,k->ij", LEVI_CIVITA, a)
    np.testing.assert_allclose(
        (tensor @ W.ravel()).reshape(3, 3), -np.einsum("ijk,k->ij", LEVI_CIVITA, axial @ a), **close
    )
    M = rng.normal(size=(3, 3))
    np.testing.assert_allclose(
        np.trace((axial_tensor @ M.ravel()).reshape(3, 3)), pseudo * np.trace(M), **close
    )
    # Traction: a symmetric tensor times the normal is a polar vector.
    six = quantity("symmetric tensor", 6)
    T = M + M.T
    stored = six.matrix(Q) @ np.array(read("xx yy zz xy yz zx", "tensor", T))
    moved = fill("symmetric tensor", "xx yy zz xy yz zx", "tensor", list(stored)).astype(float)
    np.testing.assert_allclose(moved @ (polar @ u), polar @ (T @ u), **close)
    np.testing.assert_allclose(np.linalg.eigvalsh(moved), np.linalg.eigvalsh(T), **close)


@given(seed=st.integers(0, 2**31), mirrored=st.booleans())
def test_currents_and_their_magnetic_field(seed: int, mirrored: bool) -> None:
    """The law of Biot and Savart: current elements are polar, their flux density is axial."""
    rng = np.random.default_rng(seed)
    Q = random_Q(seed, False, mirrored)
    elements, places = rng.normal(size=(2, 7, 3))
    x = np.array([4.0, 3.0, -5.0])

    def flux_density(elements, places, x):
        r = x - places
        return (np.cross(elements, r) / np.linalg.norm(r, axis=1)[:, None] ** 3).sum(axis=0)

    moved = flux_density(elements @ A("polar vector", Q).T, places @ Q.T, Q @ x)
    np.testing.assert_allclose(
        moved, A("axial vector", Q) @ flux_density(elements, places, x), atol=1e-14
    )


@given(seed=st.integers(0, 2**31), mirrored=st.booleans())
def test_derivatives_of_kinds(seed: int, mirrored: bool) -> None:
    """For the linear field u = G x carried by Q: its gradient is a tensor, its curl an axial
    vector, its divergence a scalar."""
    Q = random_Q(seed, False, mirrored)
    G = np.random.default_rng(seed).normal(size=(3, 3))
    carried = A("polar vector", Q) @ G @ Q.T  # of y -> rho(Q) u(Q^-1 y)
    np.testing.assert_allclose(carried.ravel(), A("tensor", Q) @ G.ravel(), atol=1e-13)
    curl = np.einsum("ijk,kj->i", LEVI_CIVITA, G)
    np.testing.assert_allclose(
        np.einsum("ijk,kj->i", LEVI_CIVITA, carried), A("axial vector", Q) @ curl, atol=1e-13
    )
    np.testing.assert_allclose(np.trace(carried), A("scalar", Q)[0, 0] * np.trace(G), atol=1e-13)


# Jackson, table 6.1: rank and behaviour under inversion of space.
JACKSON = {
    "coordinate": ("polar vector", -1), "velocity": ("polar vector", -1),
    "momentum": ("polar vector", -1), "angular momentum": ("axial vector", 1),
    "force": ("polar vector", -1), "torque": ("axial vector", 1),
    "kinetic energy": ("scalar", 1), "potential energy": ("scalar", 1),
    "charge density": ("scalar", 1), "current density": ("polar vector", -1),
    "electric field": ("polar vector", -1), "polarization": ("polar vector", -1),
    "magnetic induction": ("axial vector", 1), "magnetization": ("axial vector", 1),
    "Poynting vector": ("polar vector", -1), "Maxwell stress tensor": ("symmetric tensor", 1),
}  # fmt: skip


@pytest.mark.parametrize("name", JACKSON)
def test_parity_under_inversion(name: str) -> None:
    kind, parity = JACKSON[name]
    size = {"scalar": 1, "symmetric tensor": 6}.get(kind, 3)
    np.testing.assert_array_equal(quantity(kind, size).matrix(-np.eye(3)), parity * np.eye(size))


# What an analyst calls it in an output file -> entry of table 6.1
@pytest.mark.parametrize(
    ("array", "size", "entry"),
    [
        ("Velocity", 3, "velocity"),
        ("displacement", 3, "coordinate"),
        ("reaction_force", 3, "force"),
        ("nodal_moment", 3, "torque"),
        ("magnetic_flux_density", 3, "magnetic induction"),
        ("temperature", 1, "charge density"),
        ("Cauchy_stress", 6, "Maxwell stress tensor"),
    ],
)
def test_trade_words_agree_with_the_table(array: str, size: int, entry: str) -> None:
    word = trade_word(array, size)
    assert word is not None
    assert word.kind == JACKSON[entry][0]


def test_inversion_tells_the_pseudo_from_the_plain() -> None:
    assert A("pseudoscalar", -np.eye(3)).item() == -1.0
    np.testing.assert_array_equal(A("axial tensor", -np.eye(3)), -np.eye(9))
    np.testing.assert_array_equal(A("tensor", -np.eye(3)), np.eye(9))


# --- spglib: moments of a magnetic crystal are axial --------------------------------------------

# A lattice and the generators of its point group, all normal to or about x, y, z.
CRYSTALS = {
    "mmm": (np.diag([1.0, 1.3, 1.7]), [MIRRORS["x"], MIRRORS["y"], MIRRORS["z"]]),
    "mm2": (np.diag([1.0, 1.3, 1.7]), [MIRRORS["x"], MIRRORS["y"]]),
    "4/m": (np.diag([1.0, 1.0, 1.7]), [Rotation.from_euler("z", 90, True).as_matrix(),
                                       MIRRORS["z"]]),
    "4mm": (np.diag([1.0, 1.0, 1.7]), [Rotation.from_euler("z", 90, True).as_matrix(),
                                       MIRRORS["x"]]),
    "3m": (np.array([[1.0, 0, 0], [-0.5, np.sqrt(0.75), 0], [0, 0, 1.7]]),
           [Rotation.from_euler("z", 120, True).as_matrix(), MIRRORS["x"]]),
}  # fmt: skip


def closed(generators: list[tuple[np.ndarray, float]]) -> list[tuple[np.ndarray, float]]:
    """All products of the generators, with the product of their signs."""
    found = [(np.eye(3), 1.0)]
    for Q, s in found:  # grows while it is walked
        for P, t in generators:
            new = Q @ P
            if not any(np.abs(new - R).max() < 1e-9 for R, _ in found):
                found.append((new, s * t))
    return found


@pytest.mark.parametrize("signs", [(1.0, 1.0, 1.0), (1.0, -1.0, 1.0)], ids=["even", "odd"])
@pytest.mark.parametrize("name", CRYSTALS)
def test_spglib_finds_all_copies_of_axial_moments(name: str, signs) -> None:
    """Atoms and moments copied as axial vectors have the whole point group, each operation with
    time reversal just where chi = -1; copied as polar vectors they have not (is_axial of
    spglib.get_magnetic_symmetry)."""
    lattice, generators = CRYSTALS[name]
    group = closed(list(zip(generators, signs[: len(generators)], strict=True)))
    atom, moment = np.array([0.11, 0.18, 0.23]) @ lattice, np.array([0.3, 0.5, 0.9])
    places = np.array([Q @ atom for Q, _ in group]) @ np.linalg.inv(lattice)

    def operations(kind: str, is_axial: bool):
        moments = [s * A(kind, Q) @ moment for Q, s in group]
        cell = (lattice, places, [1] * len(group), np.array(moments))
        found = spglib.get_magnetic_symmetry(cell, symprec=1e-5, is_axial=is_axial)
        Qs = lattice.T @ found["rotations"] @ np.linalg.inv(lattice.T)
        return {
            (tuple(np.round(Q, 6).ravel() + 0.0), bool(t))
            for Q, t in zip(Qs, found["time_reversals"], strict=True)
        }

    want = {(tuple(np.round(Q, 6).ravel() + 0.0), s < 0) for Q, s in group}
    assert operations("axial vector", True) == want
    assert operations("polar vector", False) == want
    if signs[1] > 0:
        assert not want <= operations("polar vector", True)


# --- principal values ---------------------------------------------------------------------------


@given(seed=st.integers(0, 2**31))
@pytest.mark.parametrize("order", [None, *map(" ".join, itertools.permutations(
    ("largest", "middle", "smallest")))])  # fmt: skip
def test_principal_values_of_the_opposite_stress(order, seed: int) -> None:
    """Eigenvalues of -T: largest' = -smallest, middle' = -middle, smallest' = -largest."""
    q = quantity("principal values", 3, order)
    M = np.random.default_rng(seed).normal(size=(3, 3))
    names = q.components

    def principal(T):
        ranked = np.linalg.eigvalsh(T)
        return [ranked[["smallest", "middle", "largest"].index(n)] for n in names]

    np.testing.assert_allclose(q.odd @ principal(M + M.T), principal(-(M + M.T)), atol=1e-12)
    np.testing.assert_array_equal(q.matrix(random_Q(seed, False, True)), np.eye(3))
    assert not q.linear


@pytest.mark.parametrize("components", ["largest", "smallest", "middle", "largest middle"])
def test_incomplete_principal_values_are_no_triple(components: str) -> None:
    """Under chi = -1 the largest of a copy is minus the smallest, which is not there: there is no
    matrix for a part of the triple, so it is refused, at the latest when that matrix is asked."""
    with pytest.raises(InputError) as caught:
        _ = quantity("principal values", len(components.split()), components).odd
    assert "principal values" in str(caught.value)


@pytest.mark.parametrize(
    ("kind", "size", "sign"),
    [
        ("scalar", 1, -1), ("pseudoscalar", 1, -1), ("polar vector", 3, -1),
        ("axial vector", 3, -1), ("symmetric tensor", 6, -1), ("tensor", 9, -1),
        ("axial tensor", 9, -1), ("invariant", 1, 1), ("label", 1, 1), ("label", 2, 1),
    ],
)  # fmt: skip
def test_what_the_load_sign_does(kind: str, size: int, sign: int) -> None:
    """A linear response changes sign with the load; what is quadratic in it or no response at
    all does not (design of superposition; common practice)."""
    q = quantity(kind, size)
    np.testing.assert_array_equal(q.odd, sign * np.eye(size))
    assert q.linear == (sign < 0)


# --- refusals -----------------------------------------------------------------------------------

LEAVES = {
    "turned about x": Rotation.from_euler("x", 30, degrees=True).as_matrix(),
    "turned about y": Rotation.from_euler("y", 90, degrees=True).as_matrix(),
    "slanted mirror": np.eye(3) - np.outer([1, 0, 1], [1, 0, 1]),
    "cube diagonal": Rotation.from_rotvec(2 * np.pi / 3 * np.ones(3) / np.sqrt(3)).as_matrix(),
}


@pytest.mark.parametrize("Q", LEAVES.values(), ids=LEAVES)
@pytest.mark.parametrize(
    ("kind", "order", "shear"), [s[:3] for s in STORAGES if s[3]], ids=lambda w: w
)
def test_plane_storage_refuses_to_leave_the_plane(kind, order, shear, Q) -> None:
    with pytest.raises(InputError, match="cannot hold") as caught:
        stored_as(kind, order, shear).matrix(Q)
    assert order in str(caught.value)
    assert kind in str(caught.value)
    assert "plane model" in str(caught.value)


@pytest.mark.parametrize(("kind", "order", "shear"), [s[:3] for s in STORAGES if s[3]])
def test_plane_storage_takes_what_stays_in_the_plane(kind, order, shear) -> None:
    for seed, mirrored in itertools.product(range(5), (False, True)):
        assert stored_as(kind, order, shear).matrix(random_Q(seed, True, mirrored)).any()


@pytest.mark.parametrize("kind", ["polar vector", "axial vector"])
def test_six_columns_are_translation_and_rotation(kind: str) -> None:
    with pytest.raises(InputError, match="6 components") as caught:
        quantity(kind, 6)
    for word in ("translations and rotations", "two fields", "columns = [4, 5, 6]"):
        assert word in str(caught.value)


@pytest.mark.parametrize(
    ("arguments", "words"),
    [
        (("vektor", 3), ["'vektor' is unknown", "polar vector"]),
        (("polar vector", 4), ["4 components", "3 or 2"]),
        (("axial vector", 2), ["2 components"]),
        (("symmetric tensor", 5), ["5 components"]),
        (("tensor", 6), ["6 components"]),
        (("scalar", 2), ["2 components"]),
        (("symmetric tensor", 6, "xx yy zz xy yz"), ["names 5", "the array has 6"]),
        (("symmetric tensor", 6, "xx yy zz xy xy zx"), ["named twice"]),
        (("symmetric tensor", 6, "xx yy zz xy yx zx"), ["one component of a symmetric tensor"]),
        (("symmetric tensor", 6, "11 22 33 12 23 31"), ["'11' is not a component"]),
        (("polar vector", 3, "x y w"), ["'w' is not a component"]),
        (("polar vector", 3, "x y z", "engineering"), ["no meaning for a polar vector"]),
        (("tensor", 9, None, "engineering"), ["no meaning for a tensor"]),
    ],
)  # fmt: skip
def test_wrong_declarations_are_refused(arguments, words) -> None:
    with pytest.raises(InputError) as caught:
        quantity(*arguments)
    for word in words:
        assert word in str(caught.value)


@pytest.mark.parametrize("kind", ["stiffness", "compliance"])
def test_rank_four_comes_later(kind: str) -> None:
    with pytest.raises(NotYetError, match=kind):
        quantity(kind, 21)


@given(seed=st.integers(0, 2**31))
def test_a_turn_mixes_components(seed: int) -> None:
    """Off the axes there is no table of signs, and it is not called one."""
    Q = random_Q(seed, False, True)
    assume(np.abs(Q).max() < 0.99)
    q = quantity("symmetric tensor", 6)
    assert sign_words(q, q.matrix(Q)) == "mixed"
    assert sign_words(quantity("scalar", 1), np.eye(1)) == "none"
