"""Elastic sectors solved with seam conditions and expanded, against whole bodies solved directly.

Source: the finite element method on scikit-fem's reference shapes (`demo_cases.solver`). The whole
body is solved without any symmetry, so every expanded field is compared with one that knows
nothing of copies: displacement, its half curl, recovered nodal stress and strain (engineering
shear), nodal force, reaction and moment, and the cell values.

Tolerance: 1e-10 of the field's maximum, away from the seams and at them (see `elastic.SOLVED`).
"""

from __future__ import annotations

import numpy as np
import pytest

from demo_cases.solver import (
    CutPlane,
    Cyclic,
    Fixed,
    Solution,
    block,
    body_force,
    quadratic,
    six,
    solve_temperature,
    surface_load,
    tetrahedra,
)
from demo_cases.solver import full as full_tensor
from tests.against_outside.bodies import (
    SHIFT,
    SIX,
    SKEW,
    Floats,
    miss,
    polar_basis,
    stored,
    turned,
)
from tests.against_outside.elastic import (
    KINDS,
    SOLVED,
    Body,
    compare,
    declare,
    fields_of,
    rows,
)

X, Y, Z = SKEW.T


def placed(x: Floats) -> Floats:
    """From the sector's own coordinates into the skew system."""
    return x @ SKEW.T + SHIFT


def own(x: Floats) -> Floats:
    return (x - SHIFT) @ SKEW


def moved(mesh, mapping):
    """A mesh of the unit block moved by a mapping, then into the skew system."""
    mesh = mesh.mapped(mapping)
    return mesh.mapped(lambda *x: placed(np.stack(x, axis=1)).T)


def brick(kind: str = "hexahedra", n=(3, 3, 3)):
    """Unequal brick with one corner at the origin; bulged, with its three planes kept plane."""
    mesh = block(*n)
    if kind == "tetrahedra":
        mesh = quadratic(tetrahedra(block(2, 2, 2)))
    elif kind == "quadratic":
        mesh = quadratic(block(2, 2, 2))
    return moved(
        mesh,
        lambda u, v, w: (
            1.3 * u * (1 + 0.2 * v - 0.1 * w),
            v * (1 - 0.2 * u * w),
            0.8 * w * (1 + 0.15 * u * v),
        ),
    )


def far_corner(mesh):
    """Nodes to clamp: of the brick's far face in its own y."""
    x = own(mesh.points)
    return np.flatnonzero((x[:, 1] > 0.75) & (x[:, 0] > 0.5))


def push(mesh) -> Floats:
    """A load of no symmetry, the sector's own share: a body force that varies in space."""
    return body_force(
        mesh,
        lambda x: np.stack(
            [3.0 + np.sin(2 * x[..., 1]), -1.0 + x[..., 0] * x[..., 2], 2.0 * np.cos(x[..., 0])],
            axis=-1,
        ),
    )


def run(body: Body, tmp_path, load: Floats) -> None:
    """Expand one load case with all fields and compare with the whole body."""
    solution = body.solve(load)
    points, cells = fields_of(solution, body.about)
    whole = declare(body.model(tmp_path)).values(points=points, cells=cells).expand()
    merged = body.whole()
    oracle = body.solve_whole(merged, body.whole_load(merged, load))
    compare(whole, merged, oracle, body.about)


def half(kind="hexahedra") -> Body:
    mesh = brick(kind)
    return Body(mesh, far_corner(mesh), [CutPlane(X, SHIFT)], about=SHIFT)


def quarter(kind="hexahedra") -> Body:
    mesh = brick(kind)
    return Body(mesh, far_corner(mesh), [CutPlane(X, SHIFT), CutPlane(Z, SHIFT)], about=SHIFT)


@pytest.mark.parametrize("kind", ["hexahedra", "quadratic", "tetrahedra"])
@pytest.mark.parametrize("parity", [1, -1], ids=["even", "odd"])
def test_half(tmp_path, kind, parity):
    """A half behind a skew plane off the origin, three kinds of cells."""
    body = half(kind).with_parities(parity)
    run(body, tmp_path, push(body.mesh))


def test_half_load_on_one_side_only(tmp_path):
    """Even and odd halves of gravity at an angle and of a traction on the modelled part alone.

    The whole load is put on the whole body directly: nothing of it is copied.
    """
    body = half("quadratic")
    gravity = np.array([2.0, -1.0, 3.0])
    across = (gravity @ X) * X
    side = own(body.mesh.points)[:, 1] < 1e-9
    pull = surface_load(body.mesh, side, lambda x, n: 20 * x[..., :1] * np.array([1.0, 2.0, -1.0]))
    model = declare(body.model(tmp_path))
    for name, parity, force in (("even", 1, gravity - across), ("odd", -1, across)):
        case = body.with_parities(parity)
        load = body_force(body.mesh, force) + 0.5 * pull
        points, cells = fields_of(case.solve(load), body.about)
        model.values(name, points=points, cells=cells)
    model.table(
        case=[{"name": "even"}, {"name": "odd", "load": {"p0": "antisymmetric"}}],
        sum=[{"name": "all", "terms": {"even": 1.0, "odd": 1.0}}],
    )
    whole = model.expand("all")

    merged = body.whole()
    load = body_force(merged.mesh, gravity)
    load[merged.node[0]] += pull
    oracle = body.solve_whole(merged, load)
    linear = [name for name, words in KINDS.items() if words["kind"] != "invariant"]
    compare(whole, merged, oracle, body.about, names=linear)
    assert "von_mises" not in whole.array_names  # not linear: left out of a sum
    assert "energy_density" not in whole.array_names


@pytest.mark.parametrize("parities", [(1, 1), (1, -1), (-1, 1), (-1, -1)], ids=str)
def test_quarter(tmp_path, parities):
    """A quarter between two skew planes with every mix of parities."""
    body = quarter().with_parities(*parities)
    run(body, tmp_path, push(body.mesh))


def test_quarter_under_gravity_at_an_angle(tmp_path):
    """Three load cases of a quarter make the gravity that is at an angle to both planes.

    Across one plane gravity is antisymmetric there and symmetric in the other; along both it is
    symmetric. The whole body gets the whole gravity directly.
    """
    body = quarter("tetrahedra")
    gravity = np.array([2.0, -1.0, 3.0])
    model = declare(body.model(tmp_path))
    cases = {"across p0": (-1, 1, X), "across p1": (1, -1, Z), "along": (1, 1, Y)}
    for name, (first, second, direction) in cases.items():
        case = body.with_parities(first, second)
        load = body_force(body.mesh, (gravity @ direction) * direction)
        points, cells = fields_of(case.solve(load), body.about)
        model.values(name.replace(" ", "_"), points=points, cells=cells)
    model.table(
        case=[
            {
                "name": name,
                "file": name.replace(" ", "_") + ".vtu",
                "load": body.with_parities(*words[:2]).loads(),
            }
            for name, words in cases.items()
        ],
        sum=[{"name": "gravity", "terms": dict.fromkeys(cases, 1.0)}],
    )
    whole = model.expand("gravity")
    merged = body.whole()
    oracle = body.solve_whole(merged, body_force(merged.mesh, gravity))
    linear = [name for name, words in KINDS.items() if words["kind"] != "invariant"]
    compare(whole, merged, oracle, body.about, names=linear)


@pytest.mark.parametrize("parities", [(1, 1, 1), (-1, 1, 1), (1, -1, -1), (-1, -1, -1)], ids=str)
def test_eighth(tmp_path, parities):
    """An eighth between three skew planes."""
    mesh = brick("quadratic")
    planes = [CutPlane(n, SHIFT, s) for n, s in zip((X, Y, Z), parities, strict=True)]
    body = Body(mesh, far_corner(mesh), planes, about=SHIFT)
    run(body, tmp_path, push(mesh))


def wedge(m: int, to_axis: bool) -> Body:
    """Between two planes at pi/m, reaching the line where they meet or not."""
    n = (3, 3, 2)
    if to_axis:
        # Two sides of a skewed square lie in the planes, so its corner cells meet the axis.
        a, b = np.array([1.0, 0.0]), np.array([np.cos(np.pi / m), np.sin(np.pi / m)])
        mesh = moved(
            block(*n),
            lambda u, v, w: (
                a[0] * u * (1 + 0.2 * v) + b[0] * v,
                a[1] * u * (1 + 0.2 * v) + b[1] * v,
                0.7 * w,
            ),
        )
    else:
        mesh = moved(
            quadratic(block(2, 2, 2)),
            lambda u, v, w: (
                (0.5 + u + 0.1 * v * w) * np.cos(np.pi / m * v),
                (0.5 + u + 0.1 * v * w) * np.sin(np.pi / m * v),
                0.7 * w,
            ),
        )
    x = own(mesh.points)
    fixed = np.flatnonzero((x[:, 2] < 1e-9) & (np.hypot(x[:, 0], x[:, 1]) > 0.8))
    other = -np.sin(np.pi / m) * X + np.cos(np.pi / m) * Y
    return Body(mesh, fixed, [CutPlane(Y, SHIFT), CutPlane(other, SHIFT + 0.4 * Z)], about=SHIFT)


@pytest.mark.parametrize("to_axis", [False, True], ids=["ring", "axis"])
@pytest.mark.parametrize(
    ("m", "parities"), [(3, (1, 1)), (3, (-1, -1)), (4, (1, -1)), (4, (-1, 1))], ids=str
)
def test_wedge(tmp_path, m, parities, to_axis):
    """A wedge of 60 or 45 degrees between skew planes; at 45 degrees the parities may differ."""
    body = wedge(m, to_axis).with_parities(*parities)
    run(body, tmp_path, push(body.mesh))


def ring(sectors: int, parity: int = 1) -> Body:
    """A sector with swept and twisted faces around a skew axis off the origin."""
    mesh = moved(
        quadratic(block(2, 2, 2)),
        lambda u, v, w: (
            (0.6 + u) * np.cos(2 * np.pi / sectors * v + 0.4 * u * u + 0.3 * w),
            (0.6 + u) * np.sin(2 * np.pi / sectors * v + 0.4 * u * u + 0.3 * w),
            0.9 * w + 0.1 * u,
        ),
    )
    bore = np.flatnonzero(np.hypot(*own(mesh.points)[:, :2].T) < 0.6 + 1e-9)
    cyclic = Cyclic(sectors, Z, SHIFT - 2.0 * Z, parity)
    return Body(mesh, bore, cyclic=cyclic, about=SHIFT)


def swirl(mesh) -> Floats:
    """Around the axis, outwards and along, with a body force that varies within the sector."""

    def density(x):
        out, around, along = np.moveaxis(
            polar_basis(x.reshape(-1, 3), Z, SHIFT).reshape(*x.shape, 3), -2, 0
        )
        return (3 + x[..., :1]) * around + 2.0 * out + (1 + x[..., 1:2]) * along

    return body_force(mesh, density)


@pytest.mark.parametrize(("sectors", "parity"), [(5, 1), (6, 1), (6, -1), (2, 1), (2, -1), (3, 1)])
def test_ring(tmp_path, sectors, parity):
    """A cyclic sector under a swirl, h = 0 and h = N/2; curved seams, skew axis."""
    body = ring(sectors, parity)
    run(body, tmp_path, swirl(body.mesh))


def test_ring_with_every_second_sector_loaded(tmp_path):
    """h = 0 and h = N/2 in halves: the load of every second sector, put on directly."""
    model, cases = None, [("all", 1), ("alternating", -1)]
    for name, parity in cases:
        body = ring(6, parity)
        load = swirl(body.mesh)
        model = model or declare(body.model(tmp_path))
        points, cells = fields_of(body.solve(0.5 * load), body.about)
        model.values(name, points=points, cells=cells)
    model.table(
        case=[{"name": "all", "nodal_diameters": 0}, {"name": "alternating", "nodal_diameters": 3}],
        sum=[{"name": "every second", "terms": {"all": 1.0, "alternating": 1.0}}],
    )
    whole = model.expand("every second")
    body = ring(6)
    merged = body.whole()
    total = np.zeros_like(merged.mesh.points)
    alone = swirl(body.mesh)
    for (Q, _, _), node in zip(body.copies[::2], merged.node[::2], strict=True):
        total[node] += alone @ Q.T
    oracle = body.solve_whole(merged, total)
    linear = [name for name, words in KINDS.items() if words["kind"] != "invariant"]
    compare(whole, merged, oracle, body.about, names=linear)


@pytest.mark.parametrize(("sectors", "parity"), [(4, 1), (4, -1), (2, 1), (2, -1)])
def test_sector_that_reaches_its_axis(tmp_path, sectors, parity):
    """Nodes on the axis belong to all copies; a twisted block cut by its seams at the axis."""
    wide = {4: (0.0, 1.0), 2: (-1.0, 2.0)}[sectors]
    n = (3, 3, 2) if sectors == 4 else (4, 2, 2)
    mesh = moved(
        block(*n),
        lambda u, v, w: (
            (wide[0] + wide[1] * u) * np.cos(0.5 * w) - v * np.sin(0.5 * w),
            (wide[0] + wide[1] * u) * np.sin(0.5 * w) + v * np.cos(0.5 * w),
            0.8 * w,
        ),
    )
    low = np.flatnonzero(
        (own(mesh.points)[:, 2] < 1e-9) & (np.hypot(*own(mesh.points)[:, :2].T) > 0.6)
    )
    body = Body(mesh, low, cyclic=Cyclic(sectors, Z, SHIFT, parity), about=SHIFT)
    run(body, tmp_path, push(mesh))


@pytest.mark.parametrize(
    ("sectors", "plane", "turn"), [(5, 1, 1), (5, -1, 1), (4, 1, 1), (4, 1, -1), (4, -1, -1)]
)
def test_half_sectors(tmp_path, sectors, plane, turn):
    """A sector halved by a plane through its axis, h = 0 and h = N/2: 2 N copies."""
    mesh = wedge(sectors, False).mesh
    x = own(mesh.points)
    fixed = np.flatnonzero((x[:, 2] < 1e-9) & (np.hypot(x[:, 0], x[:, 1]) > 0.8))
    other = -np.sin(np.pi / sectors) * X + np.cos(np.pi / sectors) * Y
    body = Body(
        mesh,
        fixed,
        [CutPlane(Y, SHIFT, plane), CutPlane(other, SHIFT, plane * turn)],
        Cyclic(sectors, Z, SHIFT, turn),
        SHIFT,
        halves=True,
    )
    assert len(body.copies) == 2 * sectors
    run(body, tmp_path, push(mesh))


@pytest.mark.parametrize(("turn", "plane"), [(1, 1), (1, -1), (-1, 1), (-1, -1)])
def test_ring_cut_across_its_axis(tmp_path, turn, plane):
    """A cyclic sector and a plane normal to the axis: the ring is doubled."""
    sectors = 4
    mesh = moved(
        quadratic(block(2, 2, 2)),
        lambda u, v, w: (
            (0.6 + u) * np.cos(2 * np.pi / sectors * v + 0.4 * u * u + 0.3 * w),
            (0.6 + u) * np.sin(2 * np.pi / sectors * v + 0.4 * u * u + 0.3 * w),
            0.9 * w,
        ),
    )
    bore = np.flatnonzero(np.hypot(*own(mesh.points)[:, :2].T) < 0.6 + 1e-9)
    body = Body(mesh, bore, [CutPlane(Z, SHIFT, plane)], Cyclic(sectors, Z, SHIFT, turn), SHIFT)
    run(body, tmp_path, swirl(mesh))


@pytest.mark.parametrize("parity", [1, -1], ids=["even", "odd"])
def test_heat(tmp_path, parity):
    """Temperature (scalar), its gradient (polar vector) and thermal stress of a half."""
    body = half("quadratic").with_parities(parity)
    body.material = type(body.material)(body.material.young, 0.3, 1.2e-5)
    heat = np.abs(push(body.mesh)[:, 0])
    solution_T = solve_temperature(
        body.mesh, 45.0, heat, planes=body.planes, fixed=[_cold(body.fixed)]
    )
    load = push(body.mesh)
    solution = body.solve(load, solution_T)
    points, cells = fields_of(solution, body.about)
    model = declare(body.model(tmp_path))
    model.field("T", "scalar").field("slope", "polar vector")
    whole = model.values(
        points={**points, "T": solution_T}, cells={**cells, "slope": _slope(body.mesh, solution_T)}
    ).expand()

    merged = body.whole()
    all_heat = np.zeros(len(merged.mesh.points))
    for (_, _, chi), node in zip(body.copies, merged.node, strict=True):
        np.add.at(all_heat, node, chi * heat)
    everywhere = solve_temperature(
        merged.mesh, 45.0, all_heat, fixed=[_cold(merged.node[:, body.fixed].ravel())]
    )
    oracle = body.solve_whole(merged, body.whole_load(merged, load), everywhere)
    compare(whole, merged, oracle, body.about)
    node, cell = rows(whole, merged)
    assert miss(whole["T"].reshape(-1), everywhere[node]) < SOLVED
    assert miss(whole["slope"], _slope(merged.mesh, everywhere)[cell]) < SOLVED


def _cold(nodes):
    return Fixed(nodes, ((1.0,),))


def _slope(mesh, temperature) -> Floats:
    """Gradient of a scalar at the cells' centres."""
    as_motion = np.stack([temperature, 0 * temperature, 0 * temperature], axis=1)
    return Solution(mesh, None, as_motion, 0 * as_motion).cell_gradient[:, 0]


# --- storage ------------------------------------------------------------------------------------


def ring_and_oracle(parity: int = 1):
    body = ring(6, parity)
    load = swirl(body.mesh)
    merged = body.whole()
    return (body, body.solve(load), merged, body.solve_whole(merged, body.whole_load(merged, load)))


def test_shuffled_components(tmp_path):
    """Stress and engineering strain in another order, and spread over arrays of one component."""
    order = "zz yz xx zx xy yy"
    body, solution, merged, oracle = ring_and_oracle()

    def shuffled(s: Solution):
        strain = full_tensor(s.nodal_strain * [1, 1, 1, 0.5, 0.5, 0.5])
        return stored(full_tensor(s.nodal_stress), order), stored(strain, order, shear=2.0)

    stress, strain = shuffled(solution)
    u, w = solution.displacement, solution.rotation
    model = body.model(tmp_path)
    model.field("stress", "symmetric tensor", components=order, seam="recovered")
    model.field(
        "strain", "symmetric tensor", components=order, shear="engineering", seam="recovered"
    )
    model.field(
        "parts",
        "symmetric tensor",
        components=order,
        seam="recovered",
        arrays=[f"S_{name}" for name in order.split()],
    )
    model.field("u", "polar vector", arrays=["UX", "UY", "UZ"])
    model.field("turn", "axial vector", arrays=["RX", "RY", "RZ"], seam="recovered")
    model.field(
        "cells",
        "symmetric tensor",
        components=order,
        arrays=[f"C_{name}" for name in order.split()],
    )
    cell_stress = stored(full_tensor(solution.cell_stress), order)
    model.values(
        points={
            "stress": stress,
            "strain": strain,
            **{f"S_{name}": stress[:, i].copy() for i, name in enumerate(order.split())},
            **{f"U{name}": u[:, i].copy() for i, name in enumerate("XYZ")},
            **{f"R{name}": w[:, i].copy() for i, name in enumerate("XYZ")},
        },
        cells={f"C_{name}": cell_stress[:, i].copy() for i, name in enumerate(order.split())},
    )
    whole = model.expand()
    node, cell = rows(whole, merged)
    expected_stress, expected_strain = shuffled(oracle)
    assert miss(whole["stress"], expected_stress[node]) < SOLVED
    assert miss(whole["strain"], expected_strain[node]) < SOLVED
    assert miss(whole["parts"], expected_stress[node]) < SOLVED
    assert miss(whole["u"], oracle.displacement[node]) < SOLVED
    assert miss(whole["turn"], oracle.rotation[node]) < SOLVED
    assert miss(whole["cells"], stored(full_tensor(oracle.cell_stress), order)[cell]) < SOLVED


@pytest.mark.parametrize(
    "body", [half("quadratic"), ring(6, -1), wedge(3, True)], ids=["half", "ring", "wedge"]
)
def test_single_precision(tmp_path, body):
    """Coordinates and results in single precision, and they stay so.

    Tolerance 1e-6 of the maximum: values carry 6e-8, coordinates 6e-8 of their largest; a
    recovered or summed seam value adds up to a dozen of them.
    """
    load = swirl(body.mesh) if body.cyclic else push(body.mesh)
    points, cells = fields_of(body.solve(load), body.about)
    model = declare(body.model(tmp_path))
    model.points = body.mesh.points.astype(np.float32)
    model.values(
        points={name: v.astype(np.float32) for name, v in points.items()},
        cells={name: v.astype(np.float32) for name, v in cells.items()},
    )
    whole = model.expand()
    assert whole.points.dtype == np.float32
    assert all(whole[name].dtype == np.float32 for name in KINDS)
    merged = body.whole()
    oracle = body.solve_whole(merged, body.whole_load(merged, load))
    compare(whole, merged, oracle, body.about, tolerance=1e-6)


FRAMES = {"shaft": (Z, SHIFT), "elsewhere": (np.array([1.0, 2.0, -0.5]), np.array([4.0, 1.0, 9.0]))}


def in_frame(points: Floats, axis, point, vectors=None, six_components=None):
    basis = polar_basis(points, axis, point)
    if vectors is not None:
        return np.einsum("nia,na->ni", basis, vectors)
    return six(basis @ full_tensor(six_components) @ basis.swapaxes(1, 2))


@pytest.mark.parametrize("frame", list(FRAMES))
@pytest.mark.parametrize("which", ["ring", "alternating ring", "half sectors", "half"])
def test_cylindrical_frames(tmp_path, which, frame):
    """All kinds of nodal fields in polar components, about the body's axis and about another.

    About another axis the components of a seam node change from copy to copy, so values must be
    turned to global before they are compared, averaged or added; the oracle turns the whole body's
    global fields into the frame at each node.
    """
    if which == "half sectors":
        mesh = wedge(5, False).mesh
        fixed = wedge(5, False).fixed
        other = -np.sin(np.pi / 5) * X + np.cos(np.pi / 5) * Y
        body = Body(
            mesh,
            fixed,
            [CutPlane(Y, SHIFT, -1), CutPlane(other, SHIFT, -1)],
            Cyclic(5, Z, SHIFT),
            SHIFT,
            halves=True,
        )
    elif which == "half":
        mesh = wedge(2, False).mesh
        body = Body(mesh, wedge(2, False).fixed, [CutPlane(Y, SHIFT, -1)], about=SHIFT)
    else:
        body = ring(6, -1 if which == "alternating ring" else 1)
    load = swirl(body.mesh)
    solution = body.solve(load)
    axis, point = FRAMES[frame]

    def polar(s: Solution):
        x = s.mesh.points
        return {
            "u": in_frame(x, axis, point, s.displacement),
            "w": in_frame(x, axis, point, s.rotation),
            "s": in_frame(x, axis, point, six_components=s.nodal_stress),
            "e": in_frame(x, axis, point, six_components=s.nodal_strain * [1, 1, 1, 0.5, 0.5, 0.5])
            * [1, 1, 1, 2, 2, 2],
            "f": in_frame(x, axis, point, s.external_force),
            "r": in_frame(x, axis, point, s.reaction),
        }

    model = body.model(tmp_path)
    words = {"frame": "F"}
    model.field("u", "polar vector", **words)
    model.field("w", "axial vector", seam="recovered", **words)
    model.field("s", "symmetric tensor", components=SIX, seam="recovered", **words)
    model.field(
        "e", "symmetric tensor", components=SIX, shear="engineering", seam="recovered", **words
    )
    model.field("f", "polar vector", seam="sum", **words)
    model.field("r", "polar vector", seam="sum", **words)
    model.table(frames={"F": {"type": "cylindrical", "axis": axis, "point": point}})
    whole = model.values(points=polar(solution)).expand()
    merged = body.whole()
    oracle = polar(body.solve_whole(merged, body.whole_load(merged, load)))
    node, _ = rows(whole, merged)
    for name, expected in oracle.items():
        assert miss(whole[name], expected[node]) < SOLVED, name


def test_turned_is_not_trivial():
    """The skew system is no mere permutation of axes: every entry of its matrix counts."""
    assert np.abs(SKEW).min() > 0.05
    assert miss(turned(SKEW, turned(SKEW.T, np.eye(3)[:, :2].T)), np.eye(3)[:, :2].T) < 1e-15
