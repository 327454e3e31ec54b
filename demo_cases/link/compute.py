"""Computes the eighth of the chain link: run `python demo_cases/link/compute.py`."""

import sys
from pathlib import Path

import numpy as np

HERE = Path(__file__).parent
sys.path.insert(0, str(HERE.parents[1]))

from demo_cases.solver import (  # noqa: E402
    CutPlane,
    Material,
    Mesh,
    Solution,
    block,
    join,
    quadratic,
    solve,
    surface_load,
    tetrahedra,
    write_vtu,
)

# Millimetres, newtons, megapascals. The link lies in the xy plane about the origin, its long axis
# along x; all three coordinate planes cut it. A straight leg leads from x = 0 to the bend.
LEG, BEND = 17.0, 23.0  # half the leg's length, radius of the bend's middle line
WIRE = 10.0  # radius of the wire
CORE = 0.5  # half the side of the square inside the wire, per radius
PULL = 30e3  # N along x at each end
TWIST = 200e3  # N mm about x at each end, opposite at the two ends
STEEL = Material(young=206e3, poisson=0.3)
PLANES = ((1, 0, 0), (0, 1, 0), (0, 0, 1))


def mesh() -> Mesh:
    """Tetrahedra with curved edges: a quarter of the oval, half of the round wire."""
    bend = BEND * np.pi / 2
    along = np.concatenate([np.linspace(0.0, LEG, 4)[:-1], LEG + np.linspace(0.0, bend, 11)])

    def wire(a, b, s):
        """From (outwards, upwards) in the wire's section and the way along its middle line."""
        turn = np.clip(s - LEG, 0.0, bend) / BEND
        r = BEND + WIRE * a
        return np.minimum(s, LEG) + r * np.sin(turn), r * np.cos(turn), WIRE * b

    def quarter(u: int, v: int, section) -> Mesh:
        cells = quadratic(tetrahedra(block(u, v, along)))
        return cells.mapped(lambda a, b, s: wire(*section(a, b), s))

    def shell(start: float, end: float, inside):
        """Between one side of the square, run through by p, and the circle; q goes outwards."""

        def section(p, q):
            angle = np.radians(start + (end - start) * p)
            a, b = inside(p)
            return ((1 - q) * a + q * np.cos(angle), (1 - q) * b + q * np.sin(angle))

        return section

    right, top, left = (
        shell(0, 45, lambda p: (CORE, CORE * p)),
        shell(135, 45, lambda p: (CORE * (2 * p - 1), CORE)),
        shell(180, 135, lambda p: (-CORE, CORE * p)),
    )
    # Each block's axes point so that the diagonals of the tetrahedra agree where blocks meet.
    return join(
        quarter(4, 2, lambda p, q: (CORE * (2 * p - 1), CORE * q)),
        quarter(2, 2, lambda q, p: right(p, q)),
        quarter(4, 2, top),
        quarter(2, 2, left),
    )


def model(name: str) -> tuple[Solution, Mesh]:
    """The link pulled by its neighbours ("pull"), or twisted by them about its length ("twist")."""
    sector = mesh()
    x, y, z = sector.points.T
    turn = np.arctan2(x - LEG, y)
    inwards = BEND - np.hypot(x - LEG, y)
    seat = (np.abs(np.hypot(inwards, z) - WIRE) < 1e-6) & (inwards > 0.6 * WIRE)
    seat &= turn > np.radians(53)

    def around(at, normal):
        return np.stack([0 * at[..., 0], -at[..., 2], at[..., 1]], axis=-1)

    if name == "pull":
        load = surface_load(sector, seat, (1, 0, 0))
        load *= PULL / 4 / load[:, 0].sum()
    else:
        load = surface_load(sector, seat, around)
        load *= TWIST / 4 / np.cross(sector.points, load)[:, 0].sum()
    parity = 1 if name == "pull" else -1
    planes = [CutPlane(normal, parity=parity) for normal in PLANES]
    return solve(sector, STEEL, load, planes=planes), sector


def main() -> None:
    for name in ("pull", "twist"):
        solution, sector = model(name)
        write_vtu(
            HERE / f"link_{name}.vtu",
            sector,
            {
                "displacement": solution.displacement,
                "rotation": solution.rotation,
                "stress": solution.nodal_stress,
                "von_mises": solution.nodal_von_mises,
                "nodal_force": solution.external_force,
                "reaction": solution.reaction,
            },
            {
                "cell_stress": solution.cell_stress,
            },
        )


if __name__ == "__main__":
    main()
