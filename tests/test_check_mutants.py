"""Rules of the check that only small cases made for them can tell: numbers worked out by hand."""

from __future__ import annotations

from dataclasses import replace
from pathlib import Path
from typing import Any

import numpy as np
import pytest
from meshes import Sector, box, case_of, ring

from expander.checking.continuity import Continuity, continuity
from expander.checking.jumps import Jump
from expander.checking.leaveout import standing_out, without_cells, without_nodes
from expander.checking.neighbours import surroundings
from expander.checking.seamlist import Seam, seams_of
from expander.checking.smoothness import Near, judged
from expander.checking.verdicts import CLOSED, DOUBTFUL, OPEN, Verdict
from expander.fields import Field
from expander.frames import Global
from expander.quantities import quantity
from expander.sector import read_sector

HALF: dict[str, Any] = {"mirror": [{"name": "mid", "normal": "x"}]}


def bricks(*counts: int) -> Sector:
    """Unit cubes, so many along x, y and z from 0."""
    sector = box(counts)
    return replace(sector, points=np.rint(sector.points * counts))


def seen(folder: Path, sector: Sector, tables: dict[str, Any], **arrays: Any) -> Continuity:
    case = case_of(folder, sector, tables, arrays.get("points"), arrays.get("cells"))
    return continuity(read_sector(case))


def the(found: Continuity, measure: str) -> Verdict:
    (verdict,) = (v for v in found.verdicts if v.measure == measure)
    return verdict


def near_plane(sector: Sector, x: float = 0.0) -> tuple[Any, np.ndarray]:
    """The cells near a plane across x, and its nodes."""
    mesh = sector.mesh()
    nodes = np.flatnonzero(np.abs(mesh.points[:, 0] - x) < 1e-9)
    return surroundings(mesh, nodes, np.tile([-1.0, 0.0, 0.0], (len(nodes), 1))), nodes


# --- two sides in one ratio -----------------------------------------------------------------------


def sides(own: Any, other: Any, kind: str = "sector faces") -> Jump:
    rows = np.arange(len(own))
    seam = Seam("s", kind, 1, rows, rows * 0 + 1, rows[:, None], np.ones((len(own), 1)),
                np.zeros(len(own)))  # fmt: skip
    q = quantity("polar vector", 3)
    field = Field("q", q, "load", "recovered", Global(), "points", ("q",), None, "", "")
    case: Any = type("Case", (), {"name": "c"})()
    return Jump(seam, field, case, q, own, other, np.zeros(len(own)))


@pytest.mark.parametrize(
    ("factor", "noise", "kind", "result"),
    [
        (0.8, 0.0, "sector faces", DOUBTFUL),
        (-1.5, 0.0, "sector faces", DOUBTFUL),
        (0.8, 0.0, "cut plane", CLOSED),
        (0.8, 0.5, "sector faces", CLOSED),
        (1.0005, 0.0, "sector faces", CLOSED),
        (np.exp(0.3j), 0.0, "sector faces", CLOSED),
        (1.2 * np.exp(0.3j), 0.0, "sector faces", DOUBTFUL),
    ],
)
def test_one_ratio(factor: complex, noise: float, kind: str, result: str) -> None:
    """A ratio other than 1 in size, near to exact, at turned faces; beside a large scatter."""
    rng = np.random.default_rng(1)
    own = rng.normal(size=(50, 3)) + 1j * rng.normal(size=(50, 3))
    jump = sides(own, factor * own + noise * rng.normal(size=own.shape), kind)
    v = judged(jump, np.zeros((50, 3)), np.full(50, 1e3), 5.0, "value", 4.0)
    assert v.result == result


def test_a_strain_is_compared_as_a_whole(tmp_path: Path) -> None:
    """No equilibrium makes the normal part of a strain continuous, so all of it is shown."""
    strain = np.tile([1.0, 2.0, 3.0, 4.0, 0.0, 0.0], (3, 1)) * [[1], [2], [3]]
    words = {"kind": "symmetric tensor", "shear": "tensor", "seam": "recovered"}
    found = seen(tmp_path, bricks(3, 1, 1), HALF | {"fields": {"strain": words}},
                 cells={"strain": strain})  # fmt: skip
    v = the(found, "value")
    assert v.components == pytest.approx({"xx": 0, "yy": 0, "zz": 0, "xy": 8, "yz": 0, "zx": 0})


# --- yardsticks -----------------------------------------------------------------------------------


def test_a_face_in_the_seam_is_no_neighbour() -> None:
    near, _ = near_plane(bricks(2, 1, 1), 1.0)
    assert near.cells.tolist() == [0, 1]
    assert sum(len(f.first) for f in near.faces) == 0


def test_jumps_between_cells_are_taken_along_their_face() -> None:
    """Between cells along y the column y of T counts: (0, 3, 4) -> 5."""
    near, _ = near_plane(bricks(1, 2, 1))
    T = np.zeros((2, 3, 3))
    T[1, :, 1], T[1, :, 0], T[1, :, 2] = [0.0, 3.0, 4.0], 70.0, 70.0
    np.testing.assert_allclose(near.jumps(T)[0], 5.0)


@pytest.mark.parametrize(("middle", "found"), [(2.9, []), (3.1, [1])])
def test_what_stands_out(middle: float, found: list[int]) -> None:
    """More than three times the largest jump beside it."""
    lengths = np.array([0.2, middle, 1.0])
    rows, keys = np.array([0, 1, 1, 2]), np.array([0, 0, 1, 1])
    assert standing_out(lengths, rows, keys).tolist() == found


def test_a_face_is_measured_without_its_own_cells() -> None:
    """Three cells along the seam with a second layer: jumps 1, 50, 2 between the layers. The
    middle face is left with 2, the others see the 50."""
    near, _ = near_plane(bricks(2, 3, 1))
    y = near.mesh.points[near.mesh.connectivity.reshape(-1, 8)].mean(axis=1)
    value = np.where(y[:, 0] > 1.0, np.choose(y[:, 1].astype(int), [1.0, 50.0, 2.0]), 0.0)
    jumps = near.jumps(value[near.cells][:, None])
    first = np.flatnonzero(y[:, 0] < 1.0)
    first = first[np.argsort(y[first, 1])]
    corners = [c[near.mesh.points[c][:, 0] == 0.0]
               for c in near.mesh.connectivity.reshape(-1, 8)[first]]  # fmt: skip
    own = np.stack([first, first], axis=1)
    found = without_cells(near, jumps, np.array(corners), own)
    np.testing.assert_allclose(found, [50.0, 2.0, 50.0])


def test_a_node_is_measured_without_its_own_value() -> None:
    """Of the seven other nodes of its cell three have 0 and four have 1: 4/7 off the mean, twice."""
    near, nodes = near_plane(bricks(2, 1, 1))
    nodal = near.mesh.points[near.nodes][:, :1]
    nodal[np.searchsorted(near.nodes, nodes[0])] = 100.0
    np.testing.assert_allclose(without_nodes(near, nodal, nodes[:1, None]), 8.0 / 7.0)


def test_a_face_takes_the_largest_of_its_corners(tmp_path: Path) -> None:
    """The layers differ at y = 0 alone, which two cells reach to the fourth row of nodes: the
    fourth face has one corner within."""
    sector = read_sector(case_of(tmp_path, bricks(3, 8, 1), HALF, {"warmth": np.ones(72)}))
    (seam,) = seams_of(sector)
    near = Near(sector.mesh, sector.group, seam)
    centre = near.around.means(sector.mesh.points[near.around.nodes].astype(float))
    values = ((centre[:, 0] > 1.0) & (centre[:, 1] < 1.0)).astype(float)
    faces = centre[near.here][:, 1]
    found, sure = near.face_yardstick(values[:, None], np.zeros(len(faces)))
    assert sure.all()
    np.testing.assert_allclose(found, (faces < 4.0).astype(float))


@pytest.mark.parametrize("on", ["cells", "points"])
def test_one_odd_value_is_not_its_own_measure(tmp_path: Path, on: str) -> None:
    """A shear of 1 in one cell, or at one node, of a seam without any: the jump of 2 is twice what
    that cell (8/7 what that node) differs from its neighbours by, and all the same no scatter."""
    sector = bricks(3, 5, 5)
    mesh = sector.mesh()
    count = len(sector.cells) if on == "cells" else len(sector.points)
    where = mesh.points
    if on == "cells":
        where = mesh.points[mesh.connectivity.reshape(-1, 8)].mean(axis=1)
    stress = np.zeros((count, 6))
    stress[:, 0] = 1.0
    odd = int(np.argmin(np.linalg.norm(where - [0.0, 2.4, 2.4], axis=1)))
    stress[odd, 3] = 1.0
    v = the(seen(tmp_path, sector, HALF, **{on: {"stress": stress}}), "traction")
    assert (v.result, v.jump) == (OPEN, pytest.approx(2.0))
    assert v.times is not None
    assert v.times > 100.0
