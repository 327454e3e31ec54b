"""Computes one sector of the fan rotor: run `python demo_cases/rotor/compute.py`."""

import sys
from pathlib import Path

import numpy as np

HERE = Path(__file__).parent
sys.path.insert(0, str(HERE.parents[1]))

from demo_cases.solver import (  # noqa: E402
    Cyclic,
    Fixed,
    Floats,
    Material,
    Mesh,
    Solution,
    block,
    body_force,
    full,
    moment,
    pressure_load,
    quadratic,
    six,
    solve,
    write_vtu,
)

# Metres, newtons, pascals. The shaft lies along x at the height z = SHAFT. Blades are twisted and
# swept, and the sector's two cut faces follow them: both are curved, and no mirror plane exists.
BLADES = 8
SECTOR = 2 * np.pi / BLADES
SHAFT = 0.25
BORE, HUB, TIP = 0.025, 0.060, 0.160  # radii
WIDTH = 0.050  # of the hub along the shaft
TWIST = 10.0  # rad per metre along the shaft
SWEEP = 0.60  # rad between bore and tip
ROOT, EDGE = 0.013, 0.012  # blade thickness around the axis, at root and tip
SPEED = 400.0  # rad/s
SWIRL, GUST = 20e3, 30e3  # Pa on the pressure side of the blades
DENSITY = 2700.0  # kg/m^3
ALUMINIUM = Material(young=70e9, poisson=0.33)


def sector() -> tuple[Mesh, dict[str, np.ndarray]]:
    """Part 1 is the hub, 2 the blade; and which nodes lie in the bore and on the pressure side."""
    middle, half = SECTOR / 2, ROOT / HUB / 2
    r = np.concatenate([np.linspace(BORE, HUB, 4), np.linspace(HUB, TIP, 12)[1:]])
    theta = np.concatenate(
        [np.linspace(0.0, middle - half, 4), [middle], np.linspace(middle + half, SECTOR, 4)]
    )
    grid = block(r, theta, np.linspace(0.0, WIDTH, 8))
    radius, angle, _ = grid.centroids().T
    blade = radius > HUB
    grid = grid.keep(~blade | (np.abs(angle - middle) < half))
    grid = quadratic(grid)
    grid = Mesh(grid.points, grid.cells, np.where(grid.centroids()[:, 0] > HUB, 2, 1))
    radius, angle, _ = grid.points.T
    marks = {
        "bore": np.abs(radius - BORE) < 1e-6,
        "pressure side": (radius > HUB - 1e-6) & (np.abs(angle - middle - half) < 1e-6),
    }

    def place(r, t, w):
        out = np.clip((r - HUB) / (TIP - HUB), 0.0, 1.0)
        thin = np.where(r > HUB, (ROOT + (EDGE - ROOT) * out) / ROOT * HUB / r, 1.0)
        w = WIDTH / 2 + (w - WIDTH / 2) * (1 - 0.3 * out**2)
        t = middle + (t - middle) * thin + TWIST * w + SWEEP * ((r - BORE) / (TIP - BORE)) ** 2
        return w, r * np.cos(t), SHAFT + r * np.sin(t)

    return grid.mapped(place), marks


def model(parity: int) -> tuple[Solution, Mesh]:
    """Running in swirling air (parity 1), or a gust that changes sign from blade to blade (-1)."""
    mesh, marks = sector()
    cyclic = Cyclic(BLADES, axis=(1, 0, 0), point=(0, 0, SHAFT), parity=parity)

    def centrifugal(x):
        return DENSITY * SPEED**2 * (x - (0, 0, SHAFT)) * (0, 1, 1)

    load = pressure_load(mesh, marks["pressure side"], SWIRL if parity == 1 else GUST)
    if parity == 1:
        load = load + body_force(mesh, centrifugal)
    return solve(mesh, ALUMINIUM, load, fixed=[Fixed(marks["bore"])], cyclic=cyclic), mesh


def cylindrical(points: Floats) -> Floats:
    """(n, 3, 3) rows: unit vectors outwards, around and along the shaft."""
    out = (points - (0, 0, SHAFT)) * (0, 1, 1)
    out = out / np.linalg.norm(out, axis=1, keepdims=True)
    along = np.broadcast_to([1.0, 0.0, 0.0], out.shape)
    return np.stack([out, np.cross(along, out), along], axis=1)


def main() -> None:
    for name, parity in (("spin", 1), ("gust", -1)):
        solution, mesh = model(parity)
        E = cylindrical(mesh.points)
        turned = np.einsum("nia,nab,njb->nij", E, full(solution.nodal_stress), E)
        write_vtu(
            HERE / f"rotor_{name}.vtu",
            mesh,
            {
                "displacement": solution.displacement,
                "displacement_polar": np.einsum("nia,na->ni", E, solution.displacement),
                "rotation": solution.rotation,
                "stress": solution.nodal_stress,
                "stress_polar": six(turned),
                "von_mises": solution.nodal_von_mises,
                "nodal_force": solution.external_force,
                "reaction": solution.reaction,
                "moment_of_reaction": moment(mesh.points, solution.reaction, (0, 0, SHAFT)),
            },
            {
                "part": mesh.part,
            },
        )


if __name__ == "__main__":
    main()
