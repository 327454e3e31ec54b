"""Computes the wedge of the six-lobed flange: run `python demo_cases/flange/compute.py`."""

import sys
from pathlib import Path

import numpy as np

HERE = Path(__file__).parent
sys.path.insert(0, str(HERE.parents[1]))

from demo_cases.solver import (  # noqa: E402
    CutPlane,
    Fixed,
    Material,
    Mesh,
    Solution,
    block,
    join,
    pressure_load,
    solve,
    surface_load,
    write_vtu,
)

# Metres, newtons, pascals. The axis is none of x, y, z: the flange sits on a pipe that runs
# through CENTRE along AXIS. SIDE points to the middle of a lobe, where the first cut plane lies;
# the second lies 30 degrees further, between two lobes.
AXIS = np.array([1.0, 2.0, 2.0]) / 3
SIDE = np.array([2.0, 1.0, -2.0]) / 3
ACROSS = np.cross(AXIS, SIDE)
CENTRE = np.array([0.30, 0.10, -0.05])
WEDGE = np.pi / 6
BORE, NECK, WALL = 0.030, 0.045, 0.037  # radii: bore, neck at the disc, neck at its end
THICK, HEIGHT = 0.016, 0.075  # of the disc, of the whole
BOLT_AT, BOLT_RADIUS = 0.080, 0.0065
SQUARE = 0.0115  # half the side of the patch that is meshed round a bolt
PRESSURE = 8e6  # Pa in the bore, with its thrust on the neck
STEEL = Material(young=205e9, poisson=0.29)
NORMALS = (ACROSS, ACROSS * np.cos(WEDGE) - SIDE * np.sin(WEDGE))


def contour(theta):
    """Radius of the lobed edge at an angle from the middle of a lobe."""
    return 0.0835 + 0.0125 * np.cos(6 * theta)


def wedge() -> Mesh:
    """Part 1 is the neck, 2 the disc; x, y, z lead to the lobe, across it, along the axis."""
    first = SQUARE / BOLT_AT  # angle of the patch round the bolt
    disc = np.linspace(0.0, THICK, 4)
    theta = np.concatenate([np.linspace(0.0, first, 5)[:-1], np.linspace(first, WEDGE, 9)])
    level = np.array([BOLT_AT - SQUARE, BOLT_AT + SQUARE])
    level = (level - NECK) / (contour(0.0) - NECK)  # the grid follows the edge by fractions

    def spot(s, t):
        r = NECK + s * (contour(t) - NECK)
        return r * np.cos(t), r * np.sin(t)

    def plain(s, t) -> Mesh:
        return block(s, t, disc).mapped(lambda u, v, w: (*spot(u, v), w))

    def around(n: int, start: float, end: float, side) -> Mesh:
        def place(u, v, w):
            angle = np.radians(start + (end - start) * v)
            x, y = spot(*side(v))
            return (
                u * x + (1 - u) * (BOLT_AT + BOLT_RADIUS * np.cos(angle)),
                u * y + (1 - u) * BOLT_RADIUS * np.sin(angle),
                w,
            )

        return block(4, n, disc).mapped(place)

    def neck(u, v, w):
        rise = np.clip((w - THICK) / (HEIGHT - THICK), 0.0, 1.0)
        r = BORE + u * (NECK + (WALL - NECK) * rise**0.6 - BORE)
        return r * np.cos(v), r * np.sin(v), w

    inner, outer = level
    flat = join(
        plain(np.linspace(0.0, inner, 5), theta),
        around(4, 0, 45, lambda v: (outer + 0 * v, first * v)),
        around(8, 45, 135, lambda v: (outer + (inner - outer) * v, first + 0 * v)),
        around(4, 135, 180, lambda v: (inner + 0 * v, first * (1 - v))),
        plain(np.linspace(inner, outer, 9), theta[4:]),
        plain(np.linspace(outer, 1.0, 3), theta),
    )
    rise = np.concatenate([disc[:-1], np.linspace(THICK, HEIGHT, 13)])
    return join(block(3, theta, rise).mapped(neck).of_part(1), flat.of_part(2))


def model() -> tuple[Solution, Mesh]:
    """Pressure in the bore and its thrust on the neck's end, held at the bolts."""
    local = wedge()
    x, y, z = local.points.T
    bore = np.abs(np.hypot(x, y) - BORE) < 1e-6
    bolt = np.abs(np.hypot(x - BOLT_AT, y) - BOLT_RADIUS) < 1e-6
    end = np.abs(z - HEIGHT) < 1e-6
    sector = local.mapped(
        lambda a, b, c: (
            CENTRE[:, None] + np.outer(SIDE, a) + np.outer(ACROSS, b) + np.outer(AXIS, c)
        )
    )
    thrust = surface_load(sector, end, AXIS)
    thrust *= PRESSURE * np.pi * BORE**2 / 12 / (thrust.sum(axis=0) @ AXIS)
    load = pressure_load(sector, bore, PRESSURE) + thrust
    planes = [CutPlane(n, CENTRE) for n in NORMALS]
    return solve(sector, STEEL, load, fixed=[Fixed(bolt)], planes=planes), sector


def main() -> None:
    solution, sector = model()
    write_vtu(
        HERE / "flange.vtu",
        sector,
        {
            "displacement": solution.displacement,
            "rotation": solution.rotation,
            "stress": solution.nodal_stress,
            "strain": solution.nodal_strain,
            "von_mises": solution.nodal_von_mises,
            "nodal_force": solution.external_force,
            "reaction": solution.reaction,
        },
        {
            "cell_strain": solution.cell_strain,
            "part": sector.part,
        },
    )


if __name__ == "__main__":
    main()
