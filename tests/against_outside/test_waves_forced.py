"""Harmonic responses of one sector against the whole ring, solved directly under the same load.

Source: the finite element method on scikit-fem's reference shapes. The ring is assembled from all
of its cells and solved with the load F exp(i h k alpha) of every sector k, turned by k sectors; the
expander sees the sector's complex amplitudes alone. Damping is structural, K (1 + i eta), and
differs from cell to cell through K. Tolerance: 1e-9 of the largest value.

Directions: with exp(i h k alpha) and exp(+i omega t) the phase h k alpha + omega t of a crest is
constant, so that k falls as t grows.
"""

from __future__ import annotations

import numpy as np
import pytest
import pyvista as pv

from demo_cases.solver import Cyclic, block, surface_load
from expander import expand
from expander.casefile import read_case
from expander.errors import InputError
from expander.expansion import plan
from tests.against_outside.bodies import SHIFT, SKEW, Model
from tests.against_outside.elastic import rows, seam_nodes
from tests.against_outside.waves_bodies import (
    CLOSE,
    KINDS,
    Complex,
    Ring,
    amplitude,
    off,
    stored,
    wedge,
)

ETA = 0.04
RINGS = [(5, 0), (5, 1), (5, 2), (6, 0), (6, 1), (6, 2), (6, 3), (7, 3), (8, 4)]
TRAVELLING = [(5, 2), (6, 1), (8, 3)]


def load_of(ring: Ring) -> Complex:
    """(n, 3) the sector's share of a load: two forces out of phase inside, and a traction on the
    rim, which reaches the seams."""
    away = (ring.mesh.points - SHIFT) @ SKEW
    radius = np.hypot(away[:, 0], away[:, 1])
    rim = radius > radius.max() - 1e-3

    def traction(x, normal):
        return normal * (1 + 0.2 * x[..., :1]) + [0.3, -0.1, 0.2]

    load = (1 - 0.4j) * surface_load(ring.mesh, rim, traction)
    load[ring.somewhere] += np.array([[2.0, 1j, -1.0], [0.5j, 1 + 1j, 3.0]])
    return load


def response(ring: Ring, h: int, eta: float = ETA):
    """Load, displacement and dynamic stiffness of the sector, and those of the whole ring.

    Excited a little below the third natural frequency of this h: modes mix, phases differ.
    """
    squares, _ = ring.modes(h, 3)
    square = 0.97 * squares[2]
    D = (1 + 1j * eta) * ring.K - square * ring.M
    DW = (1 + 1j * eta) * ring.KW - square * ring.MW
    load = load_of(ring)
    whole = ring.whole_load(h, load)
    return (load, ring.respond(h, load, D), D), (whole, ring.respond_whole(whole, DW), DW)


def model_of(ring: Ring, folder, h: int, load, u, D, names=tuple(KINDS), **cyclic) -> Model:
    fields = {n: f for n, f in ring.harmonic(h, u, load, D).items() if n in names}
    points, cells = stored(fields)
    model = ring.model(folder, names=names).values(points=points, cells=cells)
    return model.table(cyclic=ring.cyclic(h, **cyclic))


def displacements(ring: Ring, folder, h: int, load, u, D, **cyclic) -> Model:
    return model_of(ring, folder, h, load, u, D, ("displacement",), **cyclic)


@pytest.mark.parametrize("plane", [None, 1, -1], ids=["no plane", "symmetric", "antisymmetric"])
@pytest.mark.parametrize(("N", "h"), RINGS)
def test_damped_response(tmp_path, N, h, plane):
    """Every field, complex, on and off the seams; complex for h = 0 and N/2 too."""
    ring = wedge(N, plane=plane)
    (load, u, D), (whole, x, DW) = response(ring, h)
    assert np.abs(u.imag).max() > 0.1 * np.abs(u.real).max()
    expected = ring.harmonic(h, x, whole, DW, whole=True)
    grid = model_of(ring, tmp_path, h, load, u, D, phase="+").expand()
    node, cell = rows(grid, ring.body)
    on_seam = np.isin(node, seam_nodes(ring.body))
    for name, values in expected.items():
        found = amplitude(grid, name)
        if len(values) == len(node):
            size = float(np.abs(values).max())
            assert off(found[on_seam], values[node][on_seam], size) < CLOSE, name
            assert off(found[~on_seam], values[node][~on_seam], size) < CLOSE, name
        else:
            assert off(found, values[cell]) < CLOSE, name


@pytest.mark.parametrize(("N", "h"), [*TRAVELLING, (6, 0), (6, 3)])
@pytest.mark.parametrize("factor", ["+i omega t", "-i omega t"])
def test_moments(tmp_path, N, h, factor):
    """The field at omega t is Re(x exp(+i omega t)); with the other time factor it is seen at the
    mirrored time."""
    ring = wedge(N, plane=-1)
    (load, u, D), (whole, x, DW) = response(ring, h)
    expected = ring.harmonic(h, x, whole, DW, whole=True)
    model = model_of(ring, tmp_path, h, load, u, D)
    case = model.table(model={"time_factor": factor}).write()
    sign = 1 if factor.startswith("+") else -1
    for at in (0.0, 37.0, 90.0, 211.5):
        grid = expand(case, moment=at)
        node, cell = rows(grid, ring.body)
        turn = np.exp(1j * sign * np.radians(at))
        for name, values in expected.items():
            chosen = values[node if len(values) == len(node) else cell]
            found = np.asarray(grid[name])
            assert off(found, (chosen * turn).real, float(np.abs(values).max())) < CLOSE, name


@pytest.mark.parametrize("factor", ["+i omega t", "-i omega t"])
@pytest.mark.parametrize("suffix", ["vtu", "pvd"])
def test_series_of_files(tmp_path, factor, suffix):
    """output.phases = 5: five files in the order of time, omega t = 0, 72, .. degrees."""
    ring = wedge(6)
    (load, u, D), (_, x, _) = response(ring, 2)
    model = displacements(ring, tmp_path, 2, load, u, D).table(model={"time_factor": factor})
    model.table(output={"file": f"ring.{suffix}", "phases": 5})
    plan(read_case(model.write())).write()
    reader = pv.PVDReader(tmp_path / "ring.pvd")
    files = [d.path for d in reader.datasets]
    assert len(files) == 5
    sign = 1 if factor.startswith("+") else -1
    for k, file in enumerate(files):
        grid = pv.read(tmp_path / file)
        at = float(grid.field_data["phase_degrees"][0])
        assert at == pytest.approx(72.0 * k)
        now = (x * np.exp(1j * sign * np.radians(at))).real
        found = ring.on_body(grid, np.asarray(grid["displacement"]))
        assert off(found, now, float(np.abs(x).max())) < CLOSE


# --- forward, backward, standing ------------------------------------------------------------------


@pytest.mark.parametrize("plane", [None, -1])
@pytest.mark.parametrize("factor", ["+i omega t", "-i omega t"])
@pytest.mark.parametrize("phase", ["+", "-"])
@pytest.mark.parametrize(("N", "h"), TRAVELLING)
def test_other_waves(tmp_path, N, h, phase, factor, plane):
    """Undamped: the ring solved directly under the load that runs the other way (the conjugate
    amplitude), and under the load that stands (its real part)."""
    ring = wedge(N, plane=plane)
    (load, u, D), (whole, x, DW) = response(ring, h, eta=0.0)
    if phase == "-":  # the same sector solved with the other sign
        load, u, whole = load.conj(), u.conj(), whole.conj()
        x = ring.respond_whole(whole, DW)
    given = "backward" if (phase == "+") == factor.startswith("+") else "forward"
    reversed_ = {"backward": "forward", "forward": "backward"}[given]
    direct = {
        "as given": x,
        given: x,
        reversed_: ring.respond_whole(whole.conj(), DW),
        "standing": ring.respond_whole(whole.real.astype(complex), DW),
    }
    model = displacements(ring, tmp_path, h, load, u, D, phase=phase)
    model.table(model={"time_factor": factor})
    sign = 1 if factor.startswith("+") else -1
    for word, expected in direct.items():
        model.table(case=[{"name": "result", "wave": word, "undamped": True}])
        case = model.write()
        grid = expand(case)
        assert off(ring.on_body(grid, amplitude(grid)), expected) < CLOSE
        for at in (0.0, 75.0, 260.0):
            now = (expected * np.exp(1j * sign * np.radians(at))).real
            grid = expand(case, moment=at)
            found = ring.on_body(grid, np.asarray(grid["displacement"]))
            assert off(found, now, float(np.abs(expected).max())) < CLOSE


def crest(ring: Ring, case, count: int) -> list[float]:
    """Angle in degrees about the axis, right-handed, of the highest axial displacement among the
    images of one node, at `count` moments of the cycle in the order of time; a parabola through
    the three highest around the circle gives it between sectors."""
    node = ring.somewhere[0]
    direction = np.asarray(ring.axis.axis)
    angles = []
    for k in range(count):
        grid = expand(case, moment=360.0 * k / count)
        u = ring.on_body(grid, np.asarray(grid["displacement"]))[ring.body.node[:, node]]
        points = (ring.body.mesh.points[ring.body.node[:, node]] - SHIFT) @ SKEW
        angle = np.degrees(np.arctan2(points[:, 1], points[:, 0])) % 360.0
        order = np.argsort(angle)
        height = (u @ direction)[order]
        top = int(height.argmax())
        low, high = height[top - 1], height[(top + 1) % len(height)]
        between = 0.5 * (low - high) / (low - 2 * height[top] + high)
        angles.append(float(angle[order][top] + between * 360.0 / len(height)))
    return angles


@pytest.mark.parametrize("factor", ["+i omega t", "-i omega t"])
@pytest.mark.parametrize("phase", ["+", "-"])
@pytest.mark.parametrize("word", ["as given", "forward", "backward", "standing"])
def test_direction_of_the_crest(tmp_path, word, phase, factor):
    """One crest on twelve sectors, followed through the cycle: forward is toward increasing sector
    numbers, right-handed about the axis, once around in a cycle; as the file says in words."""
    ring = wedge(12, (1, 2, 1))
    load = load_of(ring)
    D = ring.K - 0.5 * ring.modes(1, 1)[0][0] * ring.M
    u = ring.respond(1, load, D)
    if phase == "-":
        u = u.conj()
    model = displacements(ring, tmp_path, 1, load, u, D, phase=phase)
    model.table(model={"time_factor": factor})
    model.table(case=[{"name": "result", "wave": word, "undamped": True}])
    case = model.write()
    said = " ".join(str(line) for line in expand(case).field_data["time"])
    assert f"exp({factor})" in said
    angles = crest(ring, case, 24)
    steps = (np.diff([*angles, angles[0]]) + 180.0) % 360.0 - 180.0
    if word == "standing":
        assert "standing" in said
        moving = np.abs(np.abs(steps) - 180.0) < 1e-3  # the crest jumps across, or stays
        assert (moving | (np.abs(steps) < 1e-3)).all()
        assert moving.sum() == 2
        return
    given = "backward" if (phase == "+") == factor.startswith("+") else "forward"
    running = given if word == "as given" else word
    assert steps.sum() == pytest.approx(360.0 if running == "forward" else -360.0)
    assert (steps > 0).all() if running == "forward" else (steps < 0).all()
    assert {"forward": "higher sector numbers", "backward": "lower sector numbers"}[running] in said
    assert ("forward" in said) == (running == "forward")
    assert ("backward" in said) == (running == "backward")


@pytest.mark.parametrize("word", ["forward", "backward", "standing"])
def test_other_waves_need_a_word(tmp_path, word):
    """Another wave from one amplitude assumes no damping and no gyroscopic terms: the user says
    so, or it is refused."""
    ring = wedge(5)
    (load, u, D), _ = response(ring, 2)
    model = displacements(ring, tmp_path, 2, load, u, D)
    model.table(case=[{"name": "result", "wave": word}])
    with pytest.raises(InputError, match="undamped"):
        model.expand()


# --- a static mean, sums --------------------------------------------------------------------------


def test_mean_and_its_moments(tmp_path):
    """A static mean (h = 0) is added at every moment, and to no amplitude."""
    ring = wedge(7)
    (_, u, _), (_, x, _) = response(ring, 2)
    force = load_of(ring).real.astype(complex)
    still = ring.respond(0, force, ring.K)
    steady = ring.respond_whole(ring.whole_load(0, force), ring.KW).real
    steady, still = (3 * np.abs(x).max() / np.abs(steady).max() * a for a in (steady, still))
    model = ring.model(tmp_path)
    for name, values in (("wave", u), ("speed", still)):
        points, cells = stored({"displacement": values})
        model.values(name, points=points, cells=cells)
    model.table(case=[
        {"name": "wave", "nodal_diameters": 2, "mean": "speed"}, {"name": "speed"}
    ])  # fmt: skip
    case = model.write()
    grid = expand(case, "wave")
    assert off(ring.on_body(grid, amplitude(grid)), x) < CLOSE
    for at in (0.0, 130.0):
        grid = expand(case, "wave", moment=at)
        found = ring.on_body(grid, np.asarray(grid["displacement"]))
        assert off(found, steady + (x * np.exp(1j * np.radians(at))).real) < CLOSE


def test_complex_factors(tmp_path):
    """An engine order on all h at once: complex factors [re, im] of unit loads in one sum."""
    ring = wedge(6)
    squares, _ = ring.modes(1, 1)
    D = (1 + 1j * ETA) * ring.K - 0.8 * squares[0] * ring.M
    DW = (1 + 1j * ETA) * ring.KW - 0.8 * squares[0] * ring.MW
    load = load_of(ring)
    factors = {0: 0.3 - 0.2j, 1: 1.0 + 0.5j, 2: -0.7j, 3: 0.4 + 0.1j}
    whole = sum(a * ring.whole_load(h, load) for h, a in factors.items())
    x = ring.respond_whole(whole, DW)
    model = ring.model(tmp_path)
    for h in factors:
        points, cells = stored({"displacement": ring.respond(h, load, D)})
        model.values(f"h{h}", points=points, cells=cells)
    model.table(
        case=[{"name": f"h{h}", "nodal_diameters": h} for h in factors],
        sum=[{"name": "all", "terms": {f"h{h}": [a.real, a.imag] for h, a in factors.items()}}],
    )
    case = model.write()
    grid = expand(case, "all")
    assert off(ring.on_body(grid, amplitude(grid)), x) < CLOSE
    grid = expand(case, "all", moment=300.0)
    now = (x * np.exp(1j * np.radians(300.0))).real
    found = ring.on_body(grid, np.asarray(grid["displacement"]))
    assert off(found, now, float(np.abs(x).max())) < CLOSE


def test_power_of_the_damped_wave(tmp_path):
    """What the load puts in over a cycle the ring damps out: -Im of half F^H x against eta x^H K x
    (energy balance), on the expanded ring |G| times the sector's."""
    for h, plane in ((2, -1), (0, 1), (3, None)):
        ring = wedge(6, plane=plane)
        (load, u, D), _ = response(ring, h)
        model = model_of(ring, tmp_path, h, load, u, D, ("displacement", "nodal_force"))
        grid = model.expand()
        x, F = (ring.on_body(grid, amplitude(grid, n)).ravel() for n in model.fields)
        put_in = -(F.conj() @ x).imag
        assert put_in == pytest.approx(ETA * (x.conj() @ ring.KW @ x).real, rel=1e-9)
        assert put_in == pytest.approx(-ring.order * (load.ravel().conj() @ u.ravel()).imag)


# --- refusals -------------------------------------------------------------------------------------


@pytest.mark.parametrize(("N", "h"), [(5, 0), (5, 1), (5, 2), (6, 0), (6, 1), (6, 2), (6, 3)])
@pytest.mark.parametrize("kind", ["real", "invariant"])
def test_real_fields_and_invariants(tmp_path, N, h, kind):
    """A wave has amplitude and phase, and its von Mises stress differs from copy to copy: a real
    field and an invariant are refused for 0 < h < N/2, and served for h = 0 and N/2."""
    ring = wedge(N)
    load = load_of(ring).real.astype(complex)
    u = ring.respond(h, load, ring.K)
    model = displacements(ring, tmp_path, h, load, u, ring.K)
    points, _ = model.data["result"]
    if kind == "real":
        model.field("extra", "polar vector")
        points["extra"] = u.real.copy()
    else:
        model.field("extra", "invariant")
        points["extra"] = np.linalg.norm(u.real, axis=1)
    if 0 < 2 * h < N:
        reason = "is real" if kind == "real" else "invariant differs from copy to copy"
        with pytest.raises(InputError, match=f"extra.*{reason}"):
            model.expand()
    else:
        grid = model.expand()
        first = np.asarray(grid["copy"]) == 0
        assert first.any()
        size = np.abs(points["extra"]).max()
        found = ring.on_body(grid, np.asarray(grid["extra"]))[ring.body.node]
        for (Q, _, chi), image in zip(ring.copies(h), found, strict=True):
            expected = chi.real * u.real @ Q.T if kind == "real" else points["extra"]
            assert off(image, expected, float(size)) < CLOSE


@pytest.mark.parametrize(("N", "h"), [(5, 3), (5, 4), (6, 4), (6, 5), (7, 4), (6, 6), (6, 8)])
def test_more_nodal_diameters_than_half_the_sectors(tmp_path, N, h):
    """h and N - h are one pair of waves that run in opposite directions."""
    ring = wedge(N)
    (load, u, D), _ = response(ring, 1)
    with pytest.raises(InputError, match=f"0 to {N // 2}"):
        displacements(ring, tmp_path, h, load, u, D).expand()


@pytest.mark.parametrize(("N", "h"), [(5, 1), (6, 2), (8, 3)])
def test_half_sectors_are_refused(tmp_path, N, h):
    """With a cut plane through the axis the two waves of a pair mix for 0 < h < N/2, and no factor
    says how: refused, not copied wrongly."""
    alpha = np.pi / N
    mesh = block(2, 2, 1).mapped(
        lambda u, v, w: ((1 + u) * np.cos(alpha * v), (1 + u) * np.sin(alpha * v), 0.5 * w)
    )
    ring = Ring(mesh, Cyclic(N))
    points, cells = stored({"displacement": np.ones_like(mesh.points) * (1 + 0.5j)})
    model = ring.model(tmp_path).values(points=points, cells=cells)
    model.table(mirror=[{"name": "half", "normal": "y"}], cyclic=ring.cyclic(h))
    with pytest.raises(InputError, match="through the cyclic axis"):
        model.expand()
