"""Computes a mode of the thruster's ring: run `python demo_cases/thruster/compute.py`."""

import sys
from pathlib import Path

import numpy as np

HERE = Path(__file__).parent
sys.path.insert(0, str(HERE.parents[1]))

from demo_cases.solver import (  # noqa: E402
    Cyclic,
    Material,
    Mesh,
    block,
    quadratic,
    stiffness,
    write_vtu,
)
from demo_cases.waves import Wave, mass, modes, two_arrays, wave_elimination  # noqa: E402

# Metres, newtons, pascals. The axis is y. The blades wind along the ring as a screw does, and the
# sector's two cut faces follow them: both are curved, and no mirror plane exists.
BLADES = 9
DIAMETERS = 2  # nodal diameters of the mode
SECTOR = 2 * np.pi / BLADES
TIP, INSIDE, OUTSIDE = 0.045, 0.150, 0.162  # radii: blade tips, inside and outside of the ring
WIDTH = 0.060  # along the axis
TWIST = 8.0  # rad per metre along the axis
SKEW = 0.35  # rad by which a blade's tip runs ahead of its root
ROOT, EDGE = 0.010, 0.006  # blade thickness around the axis, at root and tip
DENSITY = 7600.0  # kg/m^3
BRONZE = Material(young=120e9, poisson=0.32)
AXIS = Cyclic(BLADES, axis=(0, 1, 0))


def sector() -> Mesh:
    """Part 1 is the ring, 2 the blade."""
    middle, half = SECTOR / 2, ROOT / INSIDE / 2
    r = np.concatenate([np.linspace(TIP, INSIDE, 10), [OUTSIDE]])
    theta = np.concatenate(
        [np.linspace(0.0, middle - half, 6), np.linspace(middle + half, SECTOR, 6)]
    )
    grid = block(r, theta, np.linspace(0.0, WIDTH, 10))
    radius, angle, _ = grid.centroids().T
    grid = grid.keep((radius > INSIDE) | (np.abs(angle - middle) < half))
    grid = quadratic(grid)
    grid = Mesh(grid.points, grid.cells, np.where(grid.centroids()[:, 0] > INSIDE, 1, 2))

    def place(r, t, w):
        inwards = np.clip((INSIDE - r) / (INSIDE - TIP), 0.0, 1.0)
        thin = np.where(r < INSIDE, (ROOT + (EDGE - ROOT) * inwards) / ROOT * INSIDE / r, 1.0)
        w = WIDTH / 2 + (w - WIDTH / 2) * (1 - 0.35 * inwards**2)
        t = middle + (t - middle) * thin + TWIST * w + SKEW * inwards**2
        return r * np.sin(t), w, r * np.cos(t)

    return grid.mapped(place)


def model() -> tuple[float, Wave]:
    """Frequency in Hz and the mode, of modal mass 1 on the sector.

    The ring floats: nothing holds it. With two nodal diameters no motion is that of a rigid body.
    """
    mesh = sector()
    T = wave_elimination(mesh, cyclic=AXIS, h=DIAMETERS)
    omega, shapes = modes(stiffness(mesh, BRONZE), mass(mesh, DENSITY), T, 2)
    shape = shapes[0]
    # Any complex factor of magnitude 1 is as good; the largest component is made real
    largest = shape.flat[np.abs(shape).argmax()]
    return omega[0] / (2 * np.pi), Wave(mesh, BRONZE, shape * abs(largest) / largest)


def main() -> None:
    frequency, wave = model()
    print(f"{DIAMETERS} nodal diameters: {frequency:.2f} Hz")
    write_vtu(
        HERE / "thruster_mode.vtu",
        wave.mesh,
        two_arrays(shape=wave.displacement, stress=wave.nodal_stress),
        {
            "part": wave.mesh.part,
        },
    )


if __name__ == "__main__":
    main()
