"""Computes one sector of the pump impeller: run `python demo_cases/impeller/compute.py`."""

import sys
from pathlib import Path

import numpy as np

HERE = Path(__file__).parent
sys.path.insert(0, str(HERE.parents[1]))

from demo_cases.solver import (  # noqa: E402
    Bools,
    Cyclic,
    Fixed,
    Material,
    Mesh,
    block,
    body_force,
    quadratic,
    stiffness,
    surface_load,
    write_vtu,
)
from demo_cases.waves import (  # noqa: E402
    Complex,
    Wave,
    mass,
    modes,
    respond,
    two_arrays,
    wave_elimination,
)

# Millimetres, newtons, megapascals, tonnes, seconds. The shaft is the z axis. Vanes and cut faces
# are wound backwards: the cut faces are curved, and no mirror plane exists.
VANES = 10
GUIDES = 13  # guide vanes in the housing
DIAMETERS = GUIDES - VANES  # nodal diameters that their pressure meets
SECTOR = 2 * np.pi / VANES
BORE, HUB, EYE, RIM = 15.0, 26.0, 45.0, 110.0  # radii; the vanes reach from EYE to RIM
PLATE, HEIGHT = 6.0, 30.0  # of the plate, of the whole
VANE = 5.0  # thickness of a vane around the shaft
WRAP = -0.55  # rad per e-fold of the radius
SPEED = 745.0  # rad/s about +z
LOSS = 0.02  # loss factor of the structure
PRESSURE = 0.15  # MPa, amplitude of the pressure behind the guide vanes
DENSITY = 2.7e-9
ALUMINIUM = Material(young=70e3, poisson=0.33)
AXIS = Cyclic(VANES)


def sector() -> tuple[Mesh, dict[str, Bools]]:
    """Part 1 is the hub, 2 the plate, 3 the vane; and which nodes are held and wetted."""
    middle, half = SECTOR / 2, VANE / EYE / 2
    r = np.concatenate(
        [np.linspace(BORE, HUB, 3), np.linspace(HUB, EYE, 3)[1:], np.linspace(EYE, RIM, 9)[1:]]
    )
    theta = np.concatenate(
        [np.linspace(0.0, middle - half, 4), np.linspace(middle + half, SECTOR, 4)]
    )
    grid = block(r, theta, np.concatenate([[0.0], np.linspace(PLATE, HEIGHT, 4)]))
    radius, angle, along = grid.centroids().T
    vane = (radius > EYE) & (np.abs(angle - middle) < half)
    grid = grid.keep((along < PLATE) | (radius < HUB) | vane)
    grid = quadratic(grid)
    radius, angle, along = grid.centroids().T
    part = np.select([radius < HUB, along < PLATE], [1, 2], 3)
    grid = Mesh(grid.points, grid.cells, part)
    radius, angle, along = grid.points.T
    marks = {
        "bore": radius < BORE + 1e-6,
        "pressure side": (np.abs(angle - middle - half) < 1e-6)
        & (along > PLATE - 1e-6)
        & (radius > EYE - 1e-6),
    }

    def place(r, t, w):
        thin = np.where(r > EYE, EYE / r, 1.0)  # the same thickness everywhere
        lower = np.where(w > PLATE, np.clip((r - EYE) / (RIM - EYE), 0.0, 1.0), 0.0)
        w = w - 0.4 * lower * (w - PLATE)
        t = middle + (t - middle) * np.where(np.abs(t - middle) < half + 1e-9, thin, 1.0)
        t = t + WRAP * np.log(r / BORE)
        return r * np.cos(t), r * np.sin(t), w

    return grid.mapped(place), marks


def wakes(mesh: Mesh, wet: Bools) -> Complex:
    """(n, 3) nodal forces of the pressure PRESSURE cos(GUIDES (theta + SPEED t)).

    It stands still in the housing. The impeller turns towards higher theta, and what it meets runs
    round it towards lower theta, with the frequency GUIDES * SPEED. Vanes are SECTOR apart and see
    it shifted by GUIDES * SECTOR, as they would see DIAMETERS * SECTOR.
    """

    def traction(part):
        def push(x, normal):
            angle = GUIDES * np.arctan2(x[..., 1], x[..., 0])
            return -PRESSURE * part(angle)[..., None] * normal

        return surface_load(mesh, wet, push)

    return traction(np.cos) + 1j * traction(np.sin)


def model(name: str) -> Wave:
    """The impeller spinning, or its damped response to the pressure behind the guide vanes."""
    mesh, marks = sector()
    K = stiffness(mesh, ALUMINIUM)
    held = [Fixed(marks["bore"])]
    if name == "spin":
        load = body_force(mesh, lambda x: DENSITY * SPEED**2 * x * (1, 1, 0))
        return Wave(mesh, ALUMINIUM, respond(K, wave_elimination(mesh, held, AXIS, 0), load))
    dynamic = (1 + 1j * LOSS) * K - (GUIDES * SPEED) ** 2 * mass(mesh, DENSITY)
    T = wave_elimination(mesh, held, AXIS, DIAMETERS)
    return Wave(mesh, ALUMINIUM, respond(dynamic, T, wakes(mesh, marks["pressure side"])))


def first_speed() -> float:
    """rad/s at which the pressure meets the lowest mode of DIAMETERS nodal diameters."""
    mesh, marks = sector()
    T = wave_elimination(mesh, [Fixed(marks["bore"])], AXIS, DIAMETERS)
    return modes(stiffness(mesh, ALUMINIUM), mass(mesh, DENSITY), T, 1)[0][0] / GUIDES


def main() -> None:
    print(f"speed {SPEED} rad/s; resonance at {first_speed():.1f} rad/s")
    for name in ("spin", "wakes"):
        wave = model(name)
        fields = {"displacement": wave.displacement, "stress": wave.nodal_stress}
        if name == "spin":
            fields = {key: np.ascontiguousarray(values.real) for key, values in fields.items()}
        else:
            fields = two_arrays(**fields)
        write_vtu(
            HERE / f"impeller_{name}.vtu",
            wave.mesh,
            fields,
            {
                "part": wave.mesh.part,
            },
        )


if __name__ == "__main__":
    main()
