"""Modes with h nodal diameters, solved on one sector, against the equations of the whole ring.

Source: the finite element method on scikit-fem's reference shapes; the expanded amplitude x must
satisfy K x = lambda M x with the matrices that the whole ring assembles from all of its cells, and
that know nothing of sectors. Tolerance: |K x - lambda M x| <= 1e-9 |K x|.

Frequencies and numbers of waves: formulas for a thin ring and a thin plate, named below.
"""

from __future__ import annotations

import numpy as np
import pytest

from demo_cases.solver import Material, quadratic, tetrahedra, volume
from expander import expand
from expander.errors import CheckFailed, InputError
from tests.against_outside.waves_bodies import (
    CLOSE,
    Ring,
    amplitude,
    disc,
    hoop,
    off,
    stored,
    waves_around,
    wedge,
)

RINGS = [(N, h) for N in (5, 6, 7, 8) for h in sorted({0, 1, 2, N // 2 if N % 2 == 0 else 2})]
TRAVELLING = [(N, h) for N, h in RINGS if 0 < 2 * h < N]
PLANES = {"no plane": None, "symmetric plane": 1, "antisymmetric plane": -1}


def expanded(ring: Ring, folder, h: int, shape, words=None, **cyclic):
    """The whole ring from the shape on the sector."""
    points, cells = stored({"displacement": shape})
    model = ring.model(folder).values(points=points, cells=cells)
    model.table(cyclic=ring.cyclic(h, **cyclic))
    if words is not None:
        model.table(case=[{"name": "result", **words}])
    return model.expand()


def residual(ring: Ring, x, square: float) -> float:
    """|K x - lambda M x| / |K x| over the free unknowns of the whole ring."""
    free = np.ones(x.shape, dtype=bool)
    free[ring.whole_held] = False
    force = ring.KW @ x.ravel()
    left = (force - square * (ring.MW @ x.ravel()))[free.ravel()]
    return float(np.linalg.norm(left) / np.linalg.norm(force[free.ravel()]))


def carried(ring: Ring, h: int, shape):
    """(copies, n, 3): chi(g) Q f, with chi multiplied along from the generators."""
    return np.stack([chi * shape @ Q.T for Q, _, chi in ring.copies(h)])


def agrees(ring: Ring, grid, h: int, shape, square: float) -> None:
    """A mode of the whole ring, whose part on each sector is the given one."""
    x = ring.on_body(grid, amplitude(grid))
    assert residual(ring, x, square) < CLOSE
    assert off(x[ring.body.node], carried(ring, h, shape)) < CLOSE


@pytest.mark.parametrize("plane", PLANES.values(), ids=PLANES.keys())
@pytest.mark.parametrize(("N", "h"), RINGS)
def test_mode_of_the_whole_ring(tmp_path, N, h, plane):
    """The lowest modes, with the sign that is declared and with the one that the seam tells."""
    ring = wedge(N, plane=plane)
    assert ring.M.sum() == pytest.approx(3 * ring.density @ volume(ring.mesh), rel=1e-12)
    squares, shapes = ring.modes(h, 3)
    for square, shape in zip(squares, shapes, strict=True):
        for phase in ("auto", "+"):
            agrees(ring, expanded(ring, tmp_path, h, shape, phase=phase), h, shape, square)


@pytest.mark.parametrize("cells", [tetrahedra, quadratic], ids=["tetra 4", "hexa 20"])
@pytest.mark.parametrize(("N", "h"), [(5, 2), (6, 1), (6, 3)])
def test_other_cells(tmp_path, N, h, cells):
    ring = wedge(N, (1, 2, 1), cells, plane=-1)
    squares, shapes = ring.modes(h, 2)
    for square, shape in zip(squares, shapes, strict=True):
        agrees(ring, expanded(ring, tmp_path, h, shape), h, shape, square)


@pytest.mark.parametrize(("N", "h"), [(5, 0), (5, 1), (5, 2), (6, 0), (6, 1), (6, 2), (6, 3)])
def test_free_ring_and_its_rigid_motions(tmp_path, N, h):
    """Without supports h = 0 and h = 1 leave two rigid-body motions each (checks.md), which stay
    free of force on the whole ring; the next mode is elastic."""
    body = wedge(N)
    ring = Ring(body.mesh, body.axis, material=body.material, density=body.density)
    squares, shapes = ring.modes(h, 4)
    rigid = squares < 1e-7 * squares[-1]
    assert rigid.sum() == (2 if h <= 1 else 0)
    size = np.abs(ring.KW).max()
    for square, shape, still in zip(squares, shapes, rigid, strict=True):
        grid = expanded(ring, tmp_path, h, shape)
        if still:
            x = ring.on_body(grid, amplitude(grid))
            assert np.abs(ring.KW @ x.ravel()).max() < CLOSE * size * np.abs(x).max()
        else:
            agrees(ring, grid, h, shape, square)


@pytest.mark.parametrize(("N", "h"), [(3, 1), (4, 0), (4, 1), (4, 2), (5, 1), (5, 2), (6, 3)])
def test_nodes_on_the_axis(tmp_path, N, h):
    """A solid disc: its axis moves along itself, across itself or not at all."""
    plate = disc(N, 2, 1.0, 0.2, Material(young=70e9, poisson=0.3), 2700.0)
    ring = Ring(plate.mesh, plate.axis, planes=plate.planes, material=plate.material,
                density=plate.density).parity(1 if h == 1 else -1)  # fmt: skip
    squares, shapes = ring.modes(h, 5)
    on_axis = np.hypot(*ring.mesh.points.T[:2]) < 1e-9
    moving = 0
    for square, shape in zip(squares, shapes, strict=True):
        if square < 1e-7 * squares[-1]:
            continue
        agrees(ring, expanded(ring, tmp_path, h, shape), h, shape, square)
        moving += np.abs(shape[on_axis]).max() > 1e-3 * np.abs(shape).max()
    assert (moving > 0) == (h <= 1)


# --- what stands in the file ----------------------------------------------------------------------

SWAPS = {
    "as it is": (lambda f: f, "+"),
    "parts swapped": (lambda f: f.imag + 1j * f.real, "-"),
    "real part negated": (lambda f: -f.real + 1j * f.imag, "-"),
    "imaginary part negated": (np.conj, "-"),
    "both negated": (lambda f: -f, "+"),
    "swapped and one negated": (lambda f: -f.imag + 1j * f.real, "+"),
}


@pytest.mark.parametrize("swap", SWAPS.values(), ids=SWAPS.keys())
@pytest.mark.parametrize("plane", [None, -1], ids=["no plane", "antisymmetric plane"])
@pytest.mark.parametrize(("N", "h"), [(5, 1), (5, 2), (6, 2), (7, 1), (8, 2)])
def test_parts_swapped_or_negated(tmp_path, N, h, plane, swap):
    """Two real shapes of one frequency in any order and with any signs are a mode all the same:
    the seam tells which way it runs, and the other way does not close."""
    change, phase = swap
    ring = wedge(N, plane=plane)
    (square,), (shape,) = ring.modes(h, 1)
    given = change(shape)
    for word in ("auto", phase):
        grid = expanded(ring, tmp_path, h, given, phase=word)
        x = ring.on_body(grid, amplitude(grid))
        assert residual(ring, x, square) < CLOSE
        assert off(x[ring.body.node[0]], given) < CLOSE
        # Its factor runs the way that is said: as f, or as the conjugate of f.
        images = carried(ring, h, given if phase == "+" else given.conj())
        assert off(x[ring.body.node], images if phase == "+" else images.conj()) < CLOSE
        running = "lower" if phase == "+" else "higher"
        assert any(running in str(line) for line in grid.field_data["time"])
    with pytest.raises((CheckFailed, InputError)):
        expanded(ring, tmp_path, h, given, phase="-" if phase == "+" else "+")


@pytest.mark.parametrize(("N", "h"), [(5, 2), (8, 2)])
def test_amplitude_and_phase(tmp_path, N, h):
    """The same mode stored as magnitudes and phases of its components."""
    ring = wedge(N)
    (square,), (shape,) = ring.modes(h, 1)
    model = ring.model(tmp_path, names=())
    model.field("displacement", "polar vector", amplitude="size", phase_degrees="angle")
    model.values(points={"size": np.abs(shape), "angle": np.degrees(np.angle(shape))})
    grid = model.table(cyclic=ring.cyclic(h)).expand()
    agrees(ring, grid, h, shape, square)


@pytest.mark.parametrize("N", [5, 6])
@pytest.mark.parametrize("plane", [None, 1, -1])
def test_real_shapes(tmp_path, N, plane):
    """For h = 0 and N/2 a mode is real on the sector, and one real array serves."""
    ring = wedge(N, plane=plane)
    for h in {0, N // 2} if N % 2 == 0 else {0}:
        squares, shapes = ring.modes(h, 2)
        for square, shape in zip(squares, shapes, strict=True):
            at = np.unravel_index(np.abs(shape).argmax(), shape.shape)
            real = shape * np.exp(-1j * np.angle(shape[at]))
            assert np.abs(real.imag).max() < CLOSE * np.abs(real).max()
            model = ring.model(tmp_path, names=()).field("displacement", "polar vector")
            model.values(points={"displacement": np.ascontiguousarray(real.real)})
            grid = model.table(cyclic=ring.cyclic(h)).expand()
            x = ring.on_body(grid, np.asarray(grid["displacement"]))
            assert residual(ring, x, square) < CLOSE


# --- size of a mode -------------------------------------------------------------------------------


@pytest.mark.parametrize("plane", PLANES.values(), ids=PLANES.keys())
@pytest.mark.parametrize(("N", "h"), RINGS)
def test_modal_mass(tmp_path, N, h, plane):
    """Unit modal mass on the sector becomes unit modal mass of the whole ring: of the complex
    amplitude, or of each of the two real shapes, which are then orthogonal too."""
    ring = wedge(N, plane=plane)
    _, (shape,) = ring.modes(h, 1)
    f = shape.ravel()
    assert f.conj() @ ring.M @ f == pytest.approx(1.0, rel=1e-10)
    grid = expanded(ring, tmp_path, h, shape, {"mode_mass": "sector"})
    x = ring.on_body(grid, amplitude(grid)).ravel()
    assert x.conj() @ ring.MW @ x == pytest.approx(1.0, rel=1e-10)
    if (N, h) in TRAVELLING:
        grid = expanded(ring, tmp_path, h, shape, {"mode_mass": "sector, real pair"})
        x = ring.on_body(grid, amplitude(grid)).ravel()
        both = np.stack([x.real, x.imag])
        np.testing.assert_allclose(both @ ring.MW @ both.T, np.eye(2), atol=1e-10)


@pytest.mark.parametrize(("N", "h"), [(5, 0), (6, 3)])
def test_no_pair_where_the_factor_is_real(tmp_path, N, h):
    """For h = 0 and N/2 there is no pair of shapes: sqrt(2/|G|) would give a modal mass of 2."""
    ring = wedge(N)
    _, (shape,) = ring.modes(h, 1)
    with pytest.raises(InputError, match="pair"):
        expanded(ring, tmp_path, h, shape, {"mode_mass": "sector, real pair"})


# --- energy ---------------------------------------------------------------------------------------


@pytest.mark.parametrize("plane", PLANES.values(), ids=PLANES.keys())
@pytest.mark.parametrize(("N", "h"), RINGS)
def test_energy(tmp_path, N, h, plane):
    """|G| times the sector's for the complex amplitude; of the real field at any moment |G|/2 times
    that of the sector's amplitude for 0 < h < N/2, and |G| times the sector's own for real chi."""
    ring = wedge(N, plane=plane)
    _, shapes = ring.modes(h, 2)
    f = shapes[0] + (0.3 - 0.8j) * shapes[1]  # complex at h = 0 and N/2 too
    model = ring.model(tmp_path)
    points, cells = stored({"displacement": f})
    model.values(points=points, cells=cells).table(cyclic=ring.cyclic(h))
    grid = model.expand()
    whole = ring.on_body(grid, amplitude(grid)).ravel()
    for A, AW in ((ring.K, ring.KW), (ring.M, ring.MW)):
        sector = (f.ravel().conj() @ A @ f.ravel()).real
        assert (whole.conj() @ AW @ whole).real == pytest.approx(ring.order * sector, rel=1e-10)
    for at in (0.0, 50.0, 200.0):
        grid = expand(model.write(), moment=at)
        now = ring.on_body(grid, np.asarray(grid["displacement"])).ravel()
        part = (f.ravel() * np.exp(1j * np.radians(at))).real
        for A, AW in ((ring.K, ring.KW), (ring.M, ring.MW)):
            if (N, h) in TRAVELLING:
                expected = ring.order / 2 * (f.ravel().conj() @ A @ f.ravel()).real
            else:
                expected = ring.order * (part @ A @ part)
            assert now @ AW @ now == pytest.approx(expected, rel=1e-10)


# --- thin ring and circular plate -----------------------------------------------------------------


def ring_frequency(n: int, R: float, t: float, b: float, E: float, rho: float) -> float:
    """In-plane flexural modes of a thin ring with n nodal diameters, Hz.

    R. D. Blevins, Formulas for Natural Frequency and Mode Shape, as quoted in checks.md.
    """
    EI, m = E * b * t**3 / 12, rho * b * t
    return n * (n * n - 1) / (2 * np.pi * R * R) * np.sqrt(EI / (m * (n * n + 1)))


def alias(n: int, N: int) -> int:
    """The number of nodal diameters of N sectors under which n waves are found."""
    return min(n % N, -n % N)


def counted(ring: Ring, folder, h: int, shape, component, radius: float):
    """Strongest wave count around the rim, and how much of the rest there is."""
    grid = expanded(ring, folder, h, shape, phase="+")
    x = amplitude(grid)
    points = np.asarray(grid.points)
    if component == "radial":
        out = points[:, :2] / np.maximum(np.hypot(*points.T[:2]), 1e-12)[:, None]
        values = np.einsum("na,na->n", x[:, :2], out)
    else:
        values = x[:, 2]
    return waves_around(grid, values, radius, 0.0 if component == "radial" else points[:, 2].max())


def test_thin_ring_of_the_table(tmp_path):
    """R = 0.369 m, 0.048 m by 0.05 m: f_2 = 211.65 Hz, f_3 = 598.64 Hz by the thin-ring formula.

    A ring of t/R = 0.13 lies below the formula, which leaves out rotatory inertia and shear: by
    less than 1 % with two and less than 2 % with three waves, as for a straight beam of that depth
    and wave length, whose frequencies fall by (n t/R)^2 (1 + E/(kappa G))/24.
    """
    R, t, b, E, rho = 0.369, 0.048, 0.05, 185e9, 7800.0
    assert ring_frequency(2, R, t, b, E, rho) == pytest.approx(211.65, abs=0.01)
    assert ring_frequency(3, R, t, b, E, rho) == pytest.approx(598.64, abs=0.01)
    ring = hoop(6, R - t / 2, R + t / 2, b, 12, Material(young=E, poisson=0.3), rho)
    for n, most in ((2, 0.01), (3, 0.02)):
        squares, shapes = ring.modes(n, 3)
        f = np.sqrt(squares[0]) / (2 * np.pi)
        assert -most < f / ring_frequency(n, R, t, b, E, rho) - 1 < 0.0
        m, _ = counted(ring, tmp_path, n, shapes[0], "radial", R + t / 2)
        assert abs(m[0]) == n


@pytest.mark.parametrize("N", [5, 6])
def test_thin_ring_frequencies_and_waves(tmp_path, N):
    """n = 2 to 8 waves on a ring of t/R = 0.02, within 0.5 % of the thin-ring formula. They are
    found under h = n modulo N, or N less that; on the ring n of them are counted, run the way of h
    when n = m N + h and against it when n = m N - h, and nothing else is there."""
    R, t, b, E, rho = 1.0, 0.02, 0.02, 200e9, 7800.0
    ring = hoop(N, R - t / 2, R + t / 2, b, 24, Material(young=E, poisson=0.3), rho)
    found = {h: ring.modes(h, 6) for h in range(N // 2 + 1)}
    for n in range(2, 9):
        h = alias(n, N)
        squares, shapes = found[h]
        f = np.sqrt(np.abs(squares)) / (2 * np.pi)
        expected = ring_frequency(n, R, t, b, E, rho)
        k = int(np.abs(f - expected).argmin())
        assert f[k] == pytest.approx(expected, rel=0.005)
        m, size = counted(ring, tmp_path, h, shapes[k], "radial", R + t / 2)
        if 0 < 2 * h < N:
            assert m[0] == (n if n % N == h else -n)
            assert size[1] < 1e-2 * size[0]
        else:  # a real factor: both ways alike
            assert abs(m[0]) == n
            assert size[2] < 1e-2 * size[0]


PLATE = {  # lambda^2, nu = 0.33: (nodal diameters, circles), recomputed in checks.md; A. W. Leissa,
    # Vibration of Plates, NASA SP-160, prints 5.253, 9.084, 12.23, 20.52 (from memory)
    (2, 0): 5.262,
    (0, 1): 9.069,
    (3, 0): 12.244,
    (1, 1): 20.513,
}


@pytest.mark.parametrize(("N", "side"), [(3, 6), (4, 6), (5, 5), (6, 4)])
def test_free_circular_plate(tmp_path, N, side):
    """The four lowest modes of a free plate, h/R = 0.02, within 0.5 %, each under the h that its
    waves are seen as by N sectors, and its waves counted around the rim."""
    R, thick, E, nu, rho = 0.5, 0.01, 70e9, 0.33, 2700.0
    plate = disc(N, side, R, thick, Material(young=E, poisson=nu), rho)
    D = E * thick**3 / (12 * (1 - nu * nu))
    found = {h: plate.modes(h, 6) for h in range(N // 2 + 1)}
    for (n, _), expected in PLATE.items():
        h = alias(n, N)
        squares, shapes = found[h]
        parameter = np.sqrt(np.abs(squares)) * R**2 * np.sqrt(rho * thick / D)
        k = int(np.abs(parameter - expected).argmin())
        assert parameter[k] == pytest.approx(expected, rel=0.005)
        m, size = counted(plate, tmp_path, h, shapes[k], "axial", R)
        if 0 < 2 * h < N:
            assert m[0] == (n if n % N == h else -n)
            assert size[1] < 1e-2 * size[0]
        else:
            assert abs(m[0]) == n
