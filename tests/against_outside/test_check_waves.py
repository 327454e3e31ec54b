"""`seamfold check` of cyclic sectors under loads and in modes with h nodal diameters.

Oracle: the sector's equations (scikit-fem) with the condition u_high = exp(i h alpha) R u_low
written out here, by the null space of all conditions together; or the whole ring's modes, solved
with no seam at all, of which a pair a + i b of one frequency is cut to a sector. The condition, and
that h counts modulo N: D. L. Thomas, Dynamics of rotationally periodic structures, Int. J. Num.
Meth. Eng. 14 (1979) 81-102.
"""

from __future__ import annotations

from pathlib import Path

import numpy as np
import pytest
from scipy.linalg import eigh, null_space

from demo_cases.solver import (
    Cyclic,
    Mesh,
    Solution,
    body_force,
    cyclic_pairs,
    merge_copies,
    stiffness,
)
from demo_cases.solver import placements as all_copies
from expander.commandline import main
from tests.against_outside.bodies import SIX, Model, mirrors
from tests.against_outside.checked import CELLS, STEEL, Found, Z, bore, found_in, ring, sides

PARTS = ("real", "imaginary")


def wave(mesh: Mesh, sectors: int, h: int, plane: int | None = None) -> np.ndarray:
    """(n, 3) amplitude of a forced response with h nodal diameters, phase "+", bore clamped.

    Parameters
    ----------
    plane : parity of a cut plane z = 0, or None where there is none.
    """
    n = len(mesh.points)
    rows = []
    eye = np.eye(3 * n).reshape(3 * n, n, 3)  # component of node

    def hold(node: int, direction: np.ndarray) -> None:
        rows.append(np.einsum("dc,c->d", eye[:, node], direction))

    for node in bore(mesh):
        for direction in np.eye(3):
            hold(node, direction)
    for node in sides(mesh, Z) if plane is not None else []:
        for direction in [Z] if plane == 1 else np.eye(3)[:2]:
            hold(node, direction)
    axis = Cyclic(sectors)
    turn = np.exp(2j * np.pi * h / sectors) * axis.placement[0]
    for low, high in zip(*cyclic_pairs(mesh, axis), strict=True):
        for component in range(3):
            rows.append(eye[:, high, component] - eye[:, low] @ turn[component])
    free = null_space(np.array(rows))
    K = stiffness(mesh, STEEL).toarray()
    generator = np.random.default_rng(7 * sectors + h)
    force = body_force(mesh, lambda x: np.stack([x[..., 1], 1 + x[..., 2], x[..., 0]], axis=-1))
    force = force * (1 + 0.5j) + 0.1j * generator.normal(size=3) * body_force(mesh, (1, 1, 1))
    reduced = free.conj().T @ K @ free
    return (free @ np.linalg.solve(reduced, free.conj().T @ force.ravel())).reshape(n, 3)


def model_of(
    folder: Path, mesh: Mesh, u: np.ndarray, sectors: int, h: int, stress: bool = False,
    plane: int | None = None, **cyclic: object,
) -> Model:  # fmt: skip
    """A case with a complex displacement, and the stress that goes with it."""
    model = Model(folder, mesh.points, {mesh.shape.vtk_type: mesh.cells})
    points, cells = {}, {}
    halves = [u.real, u.imag]
    for part, half in zip(PARTS, halves, strict=True):
        points[f"u_{part}"] = half
    model.field("displacement", "polar vector", real="u_real", imaginary="u_imaginary")
    if stress:
        for part, half in zip(PARTS, halves, strict=True):
            solution = Solution(mesh, STEEL, np.ascontiguousarray(half), np.zeros_like(half))
            points[f"s_{part}"], cells[f"c_{part}"] = solution.nodal_stress, solution.cell_stress
        six = {"components": SIX, "seam": "recovered"}
        model.field("stress", "symmetric tensor", real="s_real", imaginary="s_imaginary", **six)
        six = {"components": SIX}
        model.field(
            "cell_stress", "symmetric tensor", real="c_real", imaginary="c_imaginary", **six
        )
    model.values(points=points, cells=cells)
    if plane is not None:
        word = "symmetric" if plane == 1 else "antisymmetric"
        model.table(mirror=mirrors(("base", "z", [0, 0, 0], word)))
    return model.table(cyclic={"sectors": sectors, "nodal_diameters": h, **cyclic})


def check_of(folder: Path, mesh: Mesh, u: np.ndarray, sectors: int, h: int, **words) -> Found:
    return found_in(model_of(folder, mesh, u, sectors, h, **words).write())


def between(found: Found) -> dict:
    return found.load("between sectors")


ALL = [(5, 0), (5, 1), (5, 2), (6, 1), (6, 2), (6, 3), (7, 3), (8, 3), (8, 4), (12, 5), (3, 1)]
TRAVELLING = [(N, h) for N, h in ALL if 0 < 2 * h < N]


def sector(N: int, cells: str = "hexa 8") -> Mesh:
    return CELLS[cells](ring(N, (2, 3, 2), lean=0.2 if cells == "hexa 8" else 0.0))


@pytest.mark.parametrize("cells", list(CELLS))
@pytest.mark.parametrize(("N", "h"), ALL)
def test_right_wave(tmp_path, N, h, cells):
    """Right h: everything closes, the phase found is "+"; its conjugate runs the other way."""
    mesh = sector(N, cells)
    u = wave(mesh, N, h)
    for amplitude, sign in ((u, "+"), (u.conj(), "-")):
        found = check_of(tmp_path, mesh, amplitude, N, h, stress=True)
        assert found.verdict == "passed", found.all_findings
        assert {f["verdict"] for f in found.facts["fields"]} == {"closed"}
        assert between(found)["residual"] < 1e-9
        (case,) = found.facts["cases"]
        assert case["phase"] == (sign if 0 < 2 * h < N else None)
        assert max(found.times("traction"), found.times("kink")) < 3.0


@pytest.mark.parametrize("plane", [1, -1])
@pytest.mark.parametrize(("N", "h"), [(5, 1), (6, 2), (6, 3), (7, 3)])
def test_right_wave_with_a_plane(tmp_path, N, h, plane):
    """With a symmetric and an antisymmetric plane normal to the axis, and under the other word."""
    mesh = ring(N, (2, 3, 2))
    u = wave(mesh, N, h, plane)
    found = check_of(tmp_path, mesh, u, N, h, plane=plane, stress=True)
    assert found.verdict == "passed", found.all_findings
    assert all(f["verdict"] == "closed" for f in found.loads)
    found = check_of(tmp_path, mesh, u, N, h, plane=-plane)
    assert found.verdict == "failed"
    assert between(found)["verdict"] == "closed"
    word = {1: "symmetric", -1: "antisymmetric"}[plane]
    assert found.load("base")["found"] == word
    assert found.load("base")["line"] == f"[[mirror]] 'base': load = \"{word}\""


@pytest.mark.parametrize(("N", "h"), TRAVELLING)
def test_declared_direction(tmp_path, N, h):
    """Phase "+" as declared; a conjugated amplitude under it fails and is called that."""
    mesh = sector(N)
    u = wave(mesh, N, h)
    assert check_of(tmp_path, mesh, u, N, h, phase="+").verdict == "passed"
    assert check_of(tmp_path, mesh, u.conj(), N, h, phase="-").verdict == "passed"
    for amplitude, wrong, right in ((u.conj(), "+", "-"), (u, "-", "+")):
        found = check_of(tmp_path, mesh, amplitude, N, h, phase=wrong)
        assert found.verdict == "failed"
        load = between(found)
        assert load["verdict"] == "open"
        assert "conjugated" in load["found"]
        assert f'phase = "{right}"' in load["line"]
        assert found.says("conjugated", f'phase = "{right}"', weight="fails")


@pytest.mark.parametrize("phase", ["auto", "+", "-"])
@pytest.mark.parametrize(("N", "h"), [(5, 1), (6, 2), (7, 3), (8, 1), (8, 4), (6, 0)])
def test_wrong_nodal_diameters(tmp_path, N, h, phase):
    """Another h: the one that the two faces stand in is named, in the line to change."""
    mesh = sector(N)
    u = wave(mesh, N, h)
    for declared in range(N // 2 + 1):
        if declared == h:
            continue
        found = check_of(tmp_path, mesh, u, N, declared, phase=phase)
        load = between(found)
        assert found.verdict == "failed"
        assert (load["verdict"], load["declared"]) == ("open", f"h = {declared}")
        assert load["found"].startswith(f"h = {h}")
        assert f"nodal_diameters = {h}" in load["line"]
        assert ('phase = "+"' in load["line"]) == (0 < 2 * h < N)


@pytest.mark.parametrize("declared", [7 - 2, 7 + 2, 14 - 2])
def test_nodal_diameters_beyond_the_half(tmp_path, monkeypatch, capsys, declared):
    """h counts modulo N, and N - h is h the other way round: refused, with the range and why."""
    mesh = sector(7)
    case = model_of(tmp_path, mesh, wave(mesh, 7, 2), 7, declared).write()
    code, said = status(monkeypatch, capsys, case)
    assert code == 2
    assert f"nodal_diameters = {declared}" in said
    assert "0 to 3" in said
    assert "opposite directions" in said


def test_two_sectors(tmp_path):
    """N = 2: h = 1 is N/2, real and antisymmetric."""
    mesh = ring(2, (2, 6, 2))
    u = wave(mesh, 2, 1)
    assert check_of(tmp_path, mesh, u, 2, 1).verdict == "passed"
    found = check_of(tmp_path, mesh, u, 2, 0)
    assert found.verdict == "failed"
    assert between(found)["found"] == "h = 1"


# --- refusals -------------------------------------------------------------------------------------


def status(monkeypatch, capsys, case: Path) -> tuple[int, str]:
    """Exit status of the command and what it wrote to standard error."""
    monkeypatch.setattr("sys.argv", ["seamfold", "check", str(case)])
    monkeypatch.setenv("COLUMNS", "2000")
    code = 0
    try:
        main()
    except SystemExit as stop:
        code = int(stop.code or 0)
    return code, capsys.readouterr().err


@pytest.mark.parametrize("wrong", [5, 7, 12])
def test_wrong_sectors(tmp_path, monkeypatch, capsys, wrong):
    """The angle of the model says N."""
    mesh = sector(6)
    case = model_of(tmp_path, mesh, wave(mesh, 6, 2), wrong, 2).write()
    code, said = status(monkeypatch, capsys, case)
    assert code == 2
    assert "sectors = 6" in said


@pytest.mark.parametrize(("N", "h"), TRAVELLING[:4])
def test_single_real_shape(tmp_path, monkeypatch, capsys, N, h):
    """One real shape is not a wave: refused with the reason and the lines to add."""
    mesh = sector(N)
    model = Model(tmp_path, mesh.points, {12: mesh.cells}).field("displacement", "polar vector")
    model.values(points={"displacement": wave(mesh, N, h).real})
    case = model.table(cyclic={"sectors": N, "nodal_diameters": h}).write()
    code, said = status(monkeypatch, capsys, case)
    assert code == 2
    assert "phase" in said
    assert "real" in said
    assert "imaginary" in said


@pytest.mark.parametrize(("N", "h"), [(6, 3), (5, 0), (2, 1)])
def test_real_shapes_serve_the_ends(tmp_path, N, h):
    """For h = 0 and N/2 a real shape is enough, and its h is told."""
    mesh = ring(N, (2, 6, 2))
    for declared in {0, N // 2} if N % 2 == 0 else {0}:
        model = Model(tmp_path, mesh.points, {12: mesh.cells}).field("displacement", "polar vector")
        model.values(points={"displacement": wave(mesh, N, h).real})
        found = found_in(model.table(cyclic={"sectors": N, "nodal_diameters": declared}).write())
        assert found.verdict == ("passed" if declared == h else "failed")
        assert between(found)["found"] == f"h = {h}"


# --- modes of the whole ring ----------------------------------------------------------------------


@pytest.mark.parametrize("N", [5, 6])
def test_mode_pairs_of_the_whole_ring(tmp_path, N):
    """Pairs of one frequency, solved on the ring without any seam: a + i b on one sector.

    Which h they have follows from turning the ring by one sector; the check must find the same
    from the sector alone, and its sign with phase = "auto".
    """
    mesh = ring(N, (1, 2, 1))
    body = merge_copies(mesh.points, mesh.cells, all_copies(cyclic=Cyclic(N)))
    K = stiffness(body.mesh, STEEL).toarray()
    mass = np.repeat(body_force(body.mesh, (7.8e-9, 0, 0))[:, 0], 3)
    square, shapes = eigh(K, np.diag(mass))
    turn = Cyclic(N).placement[0]
    seen = set()
    k = 6  # after the rigid-body motions
    while k < 40:
        if square[k + 1] - square[k] > 1e-6 * square[k]:
            k += 1
            continue
        amplitude = (shapes[:, k] + 1j * shapes[:, k + 1]).reshape(-1, 3)
        first, second = amplitude[body.node[0]], amplitude[body.node[1]]
        ratio = np.vdot(first @ turn.T, second) / np.vdot(first, first)
        assert abs(abs(ratio) - 1) < 1e-6
        step = round(float(np.angle(ratio)) * N / (2 * np.pi))
        h, sign = abs(step), "+" if step > 0 else "-"
        if 2 * h == N:  # a pair too where each sector's mesh has two halves alike
            k += 2
            continue
        seen.add(h)
        found = check_of(tmp_path, mesh, first / np.abs(first).max() * 1e-3, N, h)
        assert found.facts["cases"][0]["phase"] == sign
        assert between(found)["verdict"] == "closed", found.all_findings
        assert next(m for m in found.measures() if m["measure"] == "value")["relative"] < 1e-6
        other = next(x for x in range(1, (N + 1) // 2) if x != h)
        wrong = check_of(tmp_path, mesh, first / np.abs(first).max() * 1e-3, N, other)
        assert wrong.verdict == "failed"
        assert between(wrong)["found"].startswith(f"h = {h}")
        k += 2
    assert seen == set(range(1, (N + 1) // 2))
