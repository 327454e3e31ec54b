"""Connected pieces of the whole body, against the pieces of the body built in full."""

from __future__ import annotations

from pathlib import Path

import numpy as np
import pytest
from meshes import VERTEX, Sector, box, case_of, cell_nodes, ring
from scipy.sparse import coo_matrix
from scipy.sparse.csgraph import connected_components

import expander
from expander.audit.connected import Pieces, connected
from expander.groups import CutPlane, CyclicAxis, Group, make_group
from expander.placements import unit
from expander.seams import Classes, find_seams

ORIGIN = np.zeros(3)
EIGHTH = [{"normal": "x"}, {"normal": "y"}, {"normal": "z"}]


def planes(*normals: str) -> Group:
    return make_group([CutPlane(n, unit(np.eye(3)["xyz".index(n)]), ORIGIN) for n in normals], None)


def cyclic(sectors: int) -> Group:
    return make_group([], CyclicAxis(sectors, unit([0, 0, 1]), ORIGIN))


def pieces_of(sector: Sector, group: Group, labels: np.ndarray | None = None) -> Pieces:
    return connected(sector.mesh(), group, find_seams(sector.mesh(), group, None).nodes, labels)


def hub_and_blades(sectors: int) -> tuple[Sector, np.ndarray]:
    """A hub of whole sectors and a blade that touches neither the hub nor its neighbours."""
    hub = ring(sectors, inner=1.0, outer=1.5)
    blade = ring(sectors, (1, 1, 1), inner=1.7, outer=2.5, part=0.4)
    both = hub.beside(blade)
    return both, np.array([1] * len(hub.cells) + [2] * len(blade.cells))


@pytest.mark.parametrize("sectors", [2, 3, 8, 45])
def test_ring_of_separate_blades_and_a_hub(sectors: int) -> None:
    sector, part = hub_and_blades(sectors)
    found = pieces_of(sector, cyclic(sectors), part)
    assert (found.in_sector, found.before, found.after) == (2, 2 * sectors, 1 + sectors)
    hub, blade = found.pieces
    assert (hub.times, hub.copies, hub.loose) == (1, tuple(range(sectors)), False)
    # 3 radii, 3 heights, 3 hoop cells per sector closing on themselves
    assert hub.nodes == 3 * 3 * 3 * sectors
    assert (blade.times, blade.copies, blade.nodes, blade.loose) == (sectors, (0,), 8, True)
    assert hub.words.startswith("part 1 around")
    assert blade.words.startswith("part 2 around")
    assert f"{sectors} times; it touches no other copy" in blade.words
    assert found.loose == (blade,)


def test_loose_bolt_beside_a_half() -> None:
    """Half a block becomes one; a bolt clear of the plane stays two, one cut by it becomes one."""
    sector = (
        box((2, 2, 2))
        .beside(box((1, 1, 1), size=(0.2, 0.2, 0.4), corner=(0.5, 0.5, 2.0)))
        .beside(box((1, 1, 1), size=(0.2, 0.2, 0.4), corner=(0.0, 0.5, 3.0)))
    )
    found = pieces_of(sector, planes("x"))
    assert (found.before, found.after) == (6, 4)
    block, cut, clear = (found.pieces[k] for k in (0, 1, 2))
    assert (block.nodes, block.loose) == (5 * 3 * 3, False)
    assert (cut.nodes, cut.copies, cut.loose) == (12, (0, 1), False)
    assert (clear.nodes, clear.copies, clear.times, clear.loose) == (8, (0,), 2, True)
    assert "around (0.6, 0.6, 2.2), 0.2 x 0.2 x 0.4 as modelled" in clear.words


def test_eighth_is_one_piece() -> None:
    found = pieces_of(box((2, 2, 2)), planes("x", "y", "z"))
    assert (found.before, found.after, len(found.pieces)) == (8, 1, 1)
    assert found.pieces[0].nodes == 5**3
    assert found.loose == ()


def test_bars_across_the_planes_of_an_eighth() -> None:
    """Four posts, each cut by one plane only, from a pair of bars in the quarter."""
    sector = box((1, 1, 1), corner=(0, 3, 0)).beside(box((1, 1, 1), corner=(3, 0, 5)))
    found = pieces_of(sector, planes("x", "y"))
    assert found.after == 4
    assert sorted((p.times, p.nodes, p.copies) for p in found.pieces) == [
        (2, 12, (0, 1)),
        (2, 12, (0, 2)),
    ]


def test_nothing_merged_is_all_apart() -> None:
    found = connected(box((1, 1, 1)).mesh(), planes("x"), Classes.none())
    assert (found.before, found.after) == (2, 2)
    assert found.pieces[0].loose


def test_a_helical_strip_joins_far_sectors() -> None:
    """Two strips per sector: the end of each meets the other's beginning in the next sector, so
    with N odd they make one closed piece, with N even two."""
    for sectors, after in ((5, 1), (6, 2)):
        low = ring(sectors, (1, 2, 1), height=0.2)
        lift = low.points.copy()
        # Linear in the hoop angle over the sector: rises by one, or falls by one.
        turn = np.arctan2(lift[:, 1], lift[:, 0]) / (2 * np.pi / sectors)
        up = Sector(lift + np.outer(turn, [0, 0, 1.0]), low.cells)
        down = Sector(lift + np.outer(1.0 - turn, [0, 0, 1.0]), low.cells)
        apart = Sector(down.points + 0.0, down.cells)
        apart.points[:, :2] *= 1.0 + 0.6 * (turn * (1 - turn))[:, None] * 4
        found = pieces_of(up.beside(apart), cyclic(sectors))
        assert found.after == after
        assert found.pieces[0].times * len(found.pieces) == after


def test_loose_nodes_and_lone_masses() -> None:
    sector = box((1, 1, 1))
    points = np.concatenate([sector.points, [[0.5, 0.5, 0.5], [0.5, 0.5, 9.0]]])
    found = pieces_of(Sector(points, [*sector.cells, (VERTEX, [9])]), planes("x"))
    assert found.loose_nodes == 1
    assert found.of_node[8] == -1
    assert (found.in_sector, found.after) == (2, 3)


@pytest.mark.parametrize(
    ("tables", "sector"),
    [
        ({"mirror": EIGHTH}, box((2, 1, 1)).beside(box((1, 1, 1), corner=(2, 0, 2)))),
        ({"cyclic": {"sectors": 6}}, hub_and_blades(6)[0]),
        ({"cyclic": {"sectors": 4}}, ring(4, inner=0.0)),
        ({"cyclic": {"sectors": 5}, "mirror": [{"normal": "y"}]},
         ring(5, inner=0.0, part=0.5).beside(box((1, 1, 1), size=(0.2, 0.1, 0.1),
                                                 corner=(2.5, 0, 0)))),
    ],
)  # fmt: skip
def test_against_the_expanded_body(tables: dict, sector: Sector, tmp_path: Path) -> None:
    """Count and node numbers by the graph of the expanded grid's cells."""
    case = case_of(tmp_path, sector, tables)
    body = expander.plan(case).body
    grid = expander.expand(case)
    cells = cell_nodes(grid)
    flat, first = np.concatenate(cells), np.repeat([c[0] for c in cells], [len(c) for c in cells])
    graph = coo_matrix((np.ones(len(flat)), (first, flat)), shape=(grid.n_points,) * 2)
    count, label = connected_components(graph, directed=False)
    found = connected(body.mesh, body.group, body.nodes)
    assert found.after == count
    sizes = sorted(np.bincount(label).tolist())
    assert sorted(p.nodes for p in found.pieces for _ in range(p.times)) == sizes


@pytest.mark.parametrize(("sectors", "inner"), [(4096, 1.0), (1000, 0.0)])
def test_many_copies(sectors: int, inner: float) -> None:
    """With the inner radius 0 every sector shares the nodes of the axis."""
    slice_ = ring(sectors, (1, 1, 1), inner=inner)
    bolt = box((1, 1, 1), size=(0.1, 0.0001, 0.1), corner=(1.5, 0.001, 5.0))
    found = pieces_of(slice_.beside(bolt), cyclic(sectors))
    assert (found.before, found.after) == (2 * sectors, 1 + sectors)
    body = 4 * sectors if inner else 2 * sectors + 2
    assert [p.nodes for p in found.pieces] == [body, 8]
