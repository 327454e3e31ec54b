"""Computes the half model of the clevis: run `python demo_cases/clevis/compute.py`."""

import sys
from collections.abc import Callable
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
    holed_square,
    join,
    moment,
    solve,
    solve_temperature,
    surface_load,
    write_vtu,
)

# Metres, newtons, pascals, kelvin. The base lies in z = 0 .. BASE and the ear stands on it; the
# pin runs along y, and the cut plane y = CUT is midway between the two ears.
CUT = 0.04
BASE = 0.016
PIN_HEIGHT = 0.082
PIN_RADIUS, EAR_RADIUS = 0.0125, 0.026
BOLT_X, BOLT_Y, BOLT_RADIUS = 0.066, 0.067, 0.0075
SQUARE = 0.016  # half the side of the square that is meshed round a bolt
FOOT = 0.042  # half the length of the ear's foot
RIM = 0.005  # from that square to the edge of the base
PULL = 20e3  # N on each ear
WARMTH = 60.0  # K, the pin above the bolts
STEEL = Material(young=210e9, poisson=0.3, expansion=12e-6)
CONDUCTIVITY = 45.0  # W/(m K)
ABOUT = (0.0, CUT, 0.0)  # moments are taken about this point of the cut plane


def base() -> Mesh:
    """The base plate with its two bolt holes."""
    y = np.linspace(BOLT_Y - SQUARE, BOLT_Y + SQUARE, 9)
    y = np.concatenate([np.linspace(CUT, y[0], 4)[:-1], y, [y[-1] + RIM]])
    x = np.linspace(BOLT_X - SQUARE, BOLT_X + SQUARE, 9)
    x = np.concatenate([np.linspace(0.0, FOOT, 8), x, [x[-1] + RIM]])
    x = np.concatenate([-x[:0:-1], x])
    z = np.linspace(0.0, BASE, 4)
    plate = block(x, y, z)
    off = np.abs(np.abs(plate.centroids()[:, :2]) - (BOLT_X, BOLT_Y))
    plate = plate.keep((off > SQUARE).any(axis=1))
    return join(
        plate,
        *(holed_square((side * BOLT_X, BOLT_Y), SQUARE, BOLT_RADIUS, z, 8, 3) for side in (-1, 1)),
    )


def ear() -> Mesh:
    """The upright ear with the pin's hole."""
    depth = BOLT_Y + SQUARE * np.linspace(-0.5, 0.5, 5)

    def standing(u: int, v: int, place: Callable) -> Mesh:
        # Drawn in x, z and depth -y, which are right-handed in this order.
        def mapping(a, b, w):
            x, z = place(a, b)
            return x, -w, z

        return block(u, v, -depth[::-1]).mapped(mapping)

    def ring(first: float, last: float, rim: Callable) -> Callable:
        def place(u, v):
            angle = np.radians(first + (last - first) * v)
            circle = np.stack([np.cos(angle), np.sin(angle)])
            x, z = (1 - u) * PIN_RADIUS * circle + u * EAR_RADIUS * rim(v, circle)
            return x, PIN_HEIGHT + z

        return place

    def chord(start: tuple[float, float], end: tuple[float, float]) -> Callable:
        return lambda v, circle: np.outer(start, 1 - v) + np.outer(end, v)

    def leg(u, v):
        width = EAR_RADIUS + (FOOT - EAR_RADIUS) * (1 - v) ** 2
        return (2 * u - 1) * width, BASE + v * (PIN_HEIGHT - EAR_RADIUS - BASE)

    return join(
        standing(14, 5, leg),
        standing(5, 14, ring(-135, -45, chord((-1, -1), (1, -1)))),
        standing(5, 7, ring(-45, 0, chord((1, -1), (1, 0)))),
        standing(5, 22, ring(0, 180, lambda v, circle: circle)),
        standing(5, 7, ring(180, 225, chord((-1, 0), (-1, -1)))),
    )


def model(parity: int) -> tuple[Solution, Mesh]:
    """Each ear pulled up by its warm pin (parity 1), or the image ear pulled down and cold (-1)."""
    mesh = join(base().of_part(1), ear().of_part(2))
    x, y, z = mesh.points.T
    in_bore = np.abs(np.hypot(x, z - PIN_HEIGHT) - PIN_RADIUS) < 1e-6
    in_bolts = np.abs(np.hypot(np.abs(x) - BOLT_X, y - BOLT_Y) - BOLT_RADIUS) < 1e-6
    in_bolts &= z < BASE + 1e-6
    planes = [CutPlane((0, 1, 0), (0, CUT, 0), parity)]

    def bearing(at, normal):  # the pin presses on the upper half only, most at the top
        return -normal * np.maximum(at[..., 2:] - PIN_HEIGHT, 0.0)

    load = surface_load(mesh, in_bore, bearing)
    load *= PULL / load[:, 2].sum()
    temperature = solve_temperature(
        mesh,
        CONDUCTIVITY,
        planes=planes,
        fixed=[Fixed(in_bore, ((1,),), WARMTH), Fixed(in_bolts, ((1,),), 0.0)],
    )
    return solve(
        mesh, STEEL, load, fixed=[Fixed(in_bolts)], planes=planes, temperature=temperature
    ), mesh


def main() -> None:
    for name, parity in (("even", 1), ("odd", -1)):
        solution, mesh = model(parity)
        write_vtu(
            HERE / f"clevis_{name}.vtu",
            mesh,
            {
                "displacement": solution.displacement,
                "rotation": solution.rotation,
                "stress": solution.nodal_stress,
                "von_mises": solution.nodal_von_mises,
                "temperature": solution.temperature,
                "nodal_force": solution.external_force,
                "reaction": solution.reaction,
                "moment_of_reaction": moment(mesh.points, solution.reaction, ABOUT),
            },
            {
                "cell_stress": solution.cell_stress,
                "part": mesh.part,
            },
        )


if __name__ == "__main__":
    main()
