"""Computes one sector of the turntable: run `python demo_cases/turntable/compute.py`."""

import sys
from pathlib import Path

import numpy as np

HERE = Path(__file__).parent
sys.path.insert(0, str(HERE.parents[1]))

from demo_cases.solver import (  # noqa: E402
    Bools,
    Cyclic,
    Fixed,
    Floats,
    Material,
    Mesh,
    block,
    placements,
    quadratic,
    stiffness,
    surface_load,
    write_vtu,
)
from demo_cases.waves import Complex, Wave, respond, two_arrays, wave_elimination  # noqa: E402
from expander.waves.fourier import amplitudes  # noqa: E402

# Metres, newtons, pascals. The axis is z. The ring's plate stands on a curved rib in each sector.
SECTORS = 6
SECTOR = 2 * np.pi / SECTORS
INNER, FOOT, OUTER = 0.45, 1.00, 1.20  # radii; the ribs stand on feet beyond FOOT
PLATE, DEEP = 0.030, 0.130  # thickness of the plate, depth of plate and rib
RIB = 0.040  # width of a rib around the axis, at FOOT
SWEEP = 0.45  # rad between INNER and OUTER
WEIGHT = np.array([900.0, -300.0, -12000.0])  # N, a load that is also pushed sideways
AT, REACH = np.array([0.25, 0.80]), 0.26  # centre and radius of the patch that carries it
STEEL = Material(young=205e9, poisson=0.29)
AXIS = Cyclic(SECTORS)
HELD = "feet"


def sector() -> tuple[Mesh, dict[str, Bools]]:
    """Part 1 is the plate, 2 the rib; and which nodes lie on top and in the feet."""
    middle, half = SECTOR / 2, RIB / FOOT / 2
    r = np.concatenate([np.linspace(INNER, FOOT, 9), np.linspace(FOOT, OUTER, 4)[1:]])
    theta = np.concatenate(
        [np.linspace(0.0, middle - half, 5), np.linspace(middle + half, SECTOR, 5)]
    )
    grid = block(r, theta, np.concatenate([np.linspace(-DEEP, -PLATE, 3), [0.0]]))
    _, angle, height = grid.centroids().T
    grid = grid.keep((height > -PLATE) | (np.abs(angle - middle) < half))
    grid = quadratic(grid)
    grid = Mesh(grid.points, grid.cells, np.where(grid.centroids()[:, 2] > -PLATE, 1, 2))
    radius, _, height = grid.points.T
    marks = {
        "top": height > -1e-6,
        "feet": (radius > FOOT - 1e-6) & (height < -DEEP + 1e-6),
    }

    def place(r, t, w):
        out = (r - INNER) / (OUTER - INNER)
        t = t + SWEEP * out**2
        return r * np.cos(t), r * np.sin(t), w * np.where(w < -PLATE, 0.7 + 0.3 * out, 1.0)

    return grid.mapped(place), marks


def share(x: Floats) -> Floats:
    """Part of the weight per area at points (..., 3), fading towards the patch's rim."""
    square = np.sum((x[..., :2] - AT) ** 2, axis=-1) / REACH**2
    return np.clip(1 - square, 0.0, 1.0) ** 2 * 3 / (np.pi * REACH**2)


def sector_loads(mesh: Mesh, top: Bools) -> Floats:
    """(SECTORS, n, 3) nodal forces on each sector, turned back to the one that is modelled."""
    return np.stack(
        [
            surface_load(mesh, top, lambda x, n, Q=Q: share(x @ Q.T)[..., None] * (WEIGHT @ Q))
            for Q, _, _ in placements(cyclic=AXIS)
        ]
    )


def model() -> list[tuple[Wave, Complex]]:
    """The response and the load for each number of nodal diameters, 0 to SECTORS/2."""
    mesh, marks = sector()
    K = stiffness(mesh, STEEL)
    loads = amplitudes(sector_loads(mesh, marks["top"]))
    return [
        (Wave(mesh, STEEL, respond(K, wave_elimination(mesh, [Fixed(marks[HELD])], AXIS, h), F)), F)
        for h, F in enumerate(loads)
    ]


def main() -> None:
    for h, (wave, load) in enumerate(model()):
        write_vtu(
            HERE / f"turntable_h{h}.vtu",
            wave.mesh,
            two_arrays(
                displacement=wave.displacement,
                stress=wave.nodal_stress,
                applied_force=load,
                reaction=wave.internal_force - load,
            ),
            {
                "part": wave.mesh.part,
            },
        )


if __name__ == "__main__":
    main()
