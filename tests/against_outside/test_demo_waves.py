"""The demo cases of waves around a ring, expanded, against the whole ring solved directly.

Source: the finite element method on scikit-fem's reference shapes (`demo_cases.solver`) on the
whole ring, without any condition between sectors; modes by scipy (ARPACK).

Tolerance: 1e-8 of the largest value. The files are rounded to 2**-40, 1e-12, of it; strains of
such noise are larger than it by size over edge length, and solutions of the same equations differ
by round-off times the condition of their matrix (1e3 to 1e5 here).
"""

from __future__ import annotations

from functools import cache
from pathlib import Path

import numpy as np
import pytest
import pyvista as pv

import demo_cases
from demo_cases.impeller import compute as impeller
from demo_cases.solver import (
    Cyclic,
    Fixed,
    Mesh,
    Solution,
    WholeBody,
    body_force,
    elimination,
    merge_copies,
    placements,
    solve,
    stiffness,
    surface_load,
    von_mises,
)
from demo_cases.thruster import compute as thruster
from demo_cases.turntable import compute as turntable
from demo_cases.waves import Wave, mass, modes, respond
from expander import expand
from expander.casefile import read_case
from expander.commandline import main
from tests.against_outside.elastic import rows

CLOSE = 1e-8
NAMES = ("thruster", "impeller", "turntable")


def case_of(name: str) -> Path:
    return demo_cases.available()[name] / "case.toml"


def whole(mesh: Mesh, axis: Cyclic) -> WholeBody:
    return merge_copies(mesh.points, mesh.cells, placements(cyclic=axis), mesh.part)


def everywhere(body: WholeBody, chosen: np.ndarray) -> np.ndarray:
    """Nodes of all copies of the nodes that are chosen on the sector."""
    marks = np.zeros(len(body.mesh.points), dtype=bool)
    marks[body.node[:, chosen]] = True
    return marks


def amplitude(grid: pv.UnstructuredGrid, name: str) -> np.ndarray:
    return grid[f"{name}_real"] + 1j * grid[f"{name}_imag"]


def far(found: np.ndarray, expected: np.ndarray) -> float:
    """The largest difference as part of the largest value."""
    assert found.shape == expected.shape
    return float(np.abs(found - expected).max() / np.abs(expected).max())


@pytest.mark.parametrize("name", NAMES)
def test_check_passes(name, monkeypatch, capsys):
    monkeypatch.setattr("sys.argv", ["seamfold", "check", str(case_of(name))])
    code = 0
    try:
        main()
    except SystemExit as stop:
        code = int(stop.code or 0)
    said = capsys.readouterr().out
    assert code == 0, said
    assert "verdict: passed" in said


# --- the thruster's mode ------------------------------------------------------------------------


def test_mode_is_one_of_the_whole_ring():
    """Both parts lie in the plane of the ring's own pair of that frequency, are orthogonal there
    and have the modal mass 1 that mode_mass = "sector, real pair" promises; stresses follow."""
    frequency, _ = thruster.model()
    body = whole(thruster.sector(), thruster.AXIS)
    K = stiffness(body.mesh, thruster.BRONZE)
    M = mass(body.mesh, thruster.DENSITY)
    omega, pair = modes(K, M, elimination(body.mesh)[0], 2, near=0.99 * 2 * np.pi * frequency)
    np.testing.assert_allclose(omega / (2 * np.pi), frequency, rtol=1e-8)
    grid = expand(read_case(case_of("thruster")))
    node, _ = rows(grid, body)
    found = np.zeros(body.mesh.points.shape, dtype=complex)
    found[node] = amplitude(grid, "displacement")
    pair = pair.reshape(2, -1)
    in_plane = (pair.T @ (pair @ (M @ found.ravel()))).reshape(found.shape)
    assert far(found, in_plane) < CLOSE
    two = np.stack([found.real.ravel(), found.imag.ravel()])
    np.testing.assert_allclose(two @ (M @ two.T), np.eye(2), atol=CLOSE)
    stress = Wave(body.mesh, thruster.BRONZE, in_plane).nodal_stress
    assert far(amplitude(grid, "stress"), stress[node]) < CLOSE


def test_mode_is_oval():
    """Two waves around the ring: Fourier analysis of the radial motion of the edge's circle."""
    grid = expand(read_case(case_of("thruster")))
    z, x = grid.points[:, 2], grid.points[:, 0]
    edge = (np.hypot(x, z) > thruster.OUTSIDE - 1e-6) & (grid.points[:, 1] < 1e-6)
    angle = np.arctan2(x[edge], z[edge])
    u = amplitude(grid, "displacement")[edge]
    radial = u[:, 2] * np.cos(angle) + u[:, 0] * np.sin(angle)
    size = [abs(np.mean(radial * np.exp(-1j * n * angle))) for n in range(-6, 7)]
    assert abs(int(np.argmax(size)) - 6) == thruster.DIAMETERS
    assert np.sort(size)[-1] > 5 * np.sort(size)[-2]


# --- the impeller's forced response ---------------------------------------------------------------


@cache
def shaken() -> tuple[WholeBody, Wave, Wave]:
    """The whole impeller, its damped response, and its spin."""
    sector, marks = impeller.sector()
    body = whole(sector, impeller.AXIS)
    mesh, material = body.mesh, impeller.ALUMINIUM
    K, M = stiffness(mesh, material), mass(mesh, impeller.DENSITY)
    T, _ = elimination(mesh, [Fixed(everywhere(body, marks["bore"]))])
    omega = impeller.GUIDES * impeller.SPEED

    def pressure(part):
        def push(x, n):
            waves = part(impeller.GUIDES * np.arctan2(x[..., 1], x[..., 0]))
            return -impeller.PRESSURE * waves[..., None] * n

        return surface_load(mesh, everywhere(body, marks["pressure side"]), push)

    load = pressure(np.cos) + 1j * pressure(np.sin)
    wakes = respond((1 + 1j * impeller.LOSS) * K - omega**2 * M, T, load)
    density = impeller.DENSITY * impeller.SPEED**2
    outward = body_force(mesh, lambda x: density * x * (1, 1, 0))
    spin = respond(K, T, outward)
    return body, Wave(mesh, material, wakes), Wave(mesh, material, spin)


def test_damped_response_of_the_whole_impeller():
    body, wakes, _ = shaken()
    grid = expand(read_case(case_of("impeller")))
    node, _ = rows(grid, body)
    assert far(amplitude(grid, "displacement"), wakes.displacement[node]) < CLOSE
    assert far(amplitude(grid, "stress"), wakes.nodal_stress[node]) < CLOSE


@pytest.mark.parametrize("moment", [0.0, 210.0])
def test_moment_of_the_cycle_with_the_spin(moment):
    body, wakes, spin = shaken()
    grid = expand(read_case(case_of("impeller")), moment=moment)
    node, _ = rows(grid, body)
    turn = np.exp(1j * np.deg2rad(moment))
    u = (wakes.displacement * turn).real + spin.displacement
    assert far(grid["displacement"], u[node]) < CLOSE
    stress = (wakes.nodal_stress * turn).real + spin.nodal_stress.real
    assert far(grid["stress"], stress[node]) < CLOSE


def test_peaks_with_the_spin():
    """No less than at 720 moments of the cycle, and no more than those can have missed: a function
    with the period of the cycle falls by at most its range times (step/2)^2 between them."""
    body, wakes, spin = shaken()
    grid = expand(read_case(case_of("impeller")))
    node, _ = rows(grid, body)
    u, mean = wakes.displacement[node], spin.displacement[node]
    s, still = wakes.nodal_stress[node], spin.nodal_stress.real[node]
    mises, moved = np.zeros(len(u)), np.zeros(len(u))
    for turn in np.exp(2j * np.pi * np.arange(720) / 720):
        moved = np.maximum(moved, np.linalg.norm((u * turn).real + mean, axis=1))
        mises = np.maximum(mises, von_mises((s * turn).real + still))
    missed = np.deg2rad(0.25) ** 2
    for name, seen in (("displacement_magnitude_peak", moved), ("stress_von_mises_peak", mises)):
        more = (grid[name] - seen) / seen.max()
        assert more.min() > -CLOSE
        assert more.max() < 2 * missed
    assert mises.max() > 1.2 * von_mises(still).max()


def test_runs_against_the_turning():
    """The pressure stands still in the housing; seen from the impeller it runs backward."""
    words = expand(read_case(case_of("impeller"))).field_data["time"]
    assert any("backward" in w for w in words)


# --- the turntable's load off its centre ----------------------------------------------------------


@cache
def loaded() -> tuple[WholeBody, Solution]:
    """The whole turntable under the whole weight."""
    sector, marks = turntable.sector()
    body = whole(sector, turntable.AXIS)
    load = surface_load(
        body.mesh,
        everywhere(body, marks["top"]),
        lambda x, _: turntable.share(x)[..., None] * turntable.WEIGHT,
    )
    held = [Fixed(everywhere(body, marks["feet"]))]
    return body, solve(body.mesh, turntable.STEEL, load, fixed=held)


def test_weight_on_the_whole_turntable():
    body, direct = loaded()
    grid = expand(read_case(case_of("turntable")))
    node, _ = rows(grid, body)
    for name, expected in (
        ("displacement", direct.displacement),
        ("stress", direct.nodal_stress),
        ("applied_force", direct.external_force),
        ("reaction", direct.reaction),
        ("stress_von_mises", von_mises(direct.nodal_stress)),
    ):
        assert far(grid[name], expected[node]) < CLOSE, name


def test_weight_is_all_there():
    """Its sum is the weight, to the error of the quadrature; reactions balance it."""
    grid = expand(read_case(case_of("turntable")))
    total = grid["applied_force"].sum(axis=0)
    np.testing.assert_allclose(total, turntable.WEIGHT, rtol=1e-4)
    np.testing.assert_allclose(grid["reaction"].sum(axis=0), -total, atol=1e-5)


def test_each_wave_counts():
    """Without the factors 2 the sum is another load."""
    body, direct = loaded()
    case = read_case(case_of("turntable"), {"sum.0.terms.h1": 1.0})
    grid = expand(case)
    node, _ = rows(grid, body)
    assert far(grid["displacement"], direct.displacement[node]) > 0.1
