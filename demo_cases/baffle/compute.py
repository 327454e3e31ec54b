"""Computes the quarter model of the baffle: run `python demo_cases/baffle/compute.py`."""

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
    holed_square,
    join,
    pressure_load,
    quadratic,
    solve,
    write_vtu,
)

# Millimetres, newtons, megapascals (and tonnes). The plate lies in z = 0 .. PLATE; its rim and
# the rib under its long middle line reach down to z = -DEPTH. Cut planes: x = 0 and y = 0, the
# second along the middle of the rib.
PITCH, HOLE = 60.0, 17.0  # of the holes, and their radius
RIB, RIM = 5.0, 10.0  # half the rib's thickness (its other half is the image), rim's
PLATE, DEPTH = 5.0, 20.0
PRESSURE = 0.10  # MPa on one end; the same suction on the other
ALUMINIUM = Material(young=70e3, poisson=0.33)
DENSITY = 2.7e-9  # t/mm^3


def mesh() -> Mesh:
    """Part 1 is the perforated plate, 2 the rib, 3 the rim."""
    x = np.linspace(0.0, 3 * PITCH, 13)
    y = RIB + np.linspace(0.0, 2 * PITCH, 9)
    x_rim, y_rim = [x[-1], x[-1] + RIM], [y[-1], y[-1] + RIM]
    z, below = [0.0, PLATE], [-DEPTH, -DEPTH / 2, 0.0]
    flat = join(
        *(
            holed_square(
                (PITCH * (i + 0.5), RIB + PITCH * (j + 0.5)), PITCH / 2, HOLE, z, 4, 2, quadratic
            )
            for i in range(3)
            for j in range(2)
        )
    )
    whole_x, whole_y = [*x, x_rim[1]], [0.0, *y, y_rim[1]]
    rib = [quadratic(block(x, [0.0, RIB], w)) for w in (z, below)]
    rim = [
        quadratic(block(*lines, w))
        for w in (z, below)
        for lines in ((x_rim, whole_y), (whole_x[:-1], y_rim))
    ]
    return join(flat.of_part(1), *(b.of_part(2) for b in rib), *(b.of_part(3) for b in rim))


def model() -> tuple[Solution, Mesh]:
    """Pressure on the end x > 0, suction on the other; the rim is held at both ends."""
    sector = mesh()
    x, _, z = sector.points.T
    load = pressure_load(sector, np.abs(z - PLATE) < 1e-6, PRESSURE)
    held = Fixed(np.abs(x - x.max()) < 1e-6)
    planes = [CutPlane((1, 0, 0), parity=-1), CutPlane((0, 1, 0), parity=1)]
    return solve(sector, ALUMINIUM, load, fixed=[held], planes=planes), sector


def main() -> None:
    solution, sector = model()
    gradient = solution.cell_gradient
    energy = 0.5 * np.sum(solution.cell_stress * solution.cell_strain, axis=1)
    write_vtu(
        HERE / "baffle.vtu",
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
            "displacement_gradient": gradient.reshape(-1, 9),
            "cell_stress": solution.cell_stress,
            "energy_density": energy,
            "density": np.full(len(sector.cells), DENSITY),
            "part": sector.part,
        },
    )


if __name__ == "__main__":
    main()
