"""What a check does not know, it must not call closed; what is right must not be called open."""

from __future__ import annotations

from pathlib import Path
from typing import Any

import numpy as np
import pytest
from meshes import QUAD, Sector, box, case_of, ring

from expander.checking.findings import DOUBTS, FAILS, NOTE, Finding
from expander.checkup import check
from expander.errors import InputError

HALF = {"mirror": [{"name": "mid", "normal": "x"}]}
ORDER = {"components": "xx yy zz xy yz zx"}


def found_in(folder: Path, sector: Sector, tables: dict[str, Any], points: dict[str, Any] | None,
             cells: dict[str, Any] | None = None) -> Any:  # fmt: skip
    return check(case_of(folder, sector, tables, points or {}, cells or {}))


def about(found: Any, word: str) -> list[Finding]:
    return [f for f in found.findings if f.about == word]


def pulled(sector: Sector) -> np.ndarray:
    """Uniform strain: symmetric about x = 0."""
    return sector.points @ np.diag([1e-3, -3e-4, -3e-4])


@pytest.mark.parametrize(
    ("points", "cells"),
    [({}, {}), ({"part_id": 1}, {}), ({}, {"pressure": 1.0}), ({"displacement": 0.0}, {})],
    ids=["no fields", "labels", "scalars in cells only", "zero"],
)
def test_nothing_compared_is_a_doubt(tmp_path: Path, points: Any, cells: Any) -> None:
    sector = box((3, 2, 2))
    n, m = len(sector.points), len(sector.cells)
    values = {k: np.full(n, v) if k != "displacement" else np.zeros((n, 3))
              for k, v in points.items()}  # fmt: skip
    found = found_in(tmp_path, sector, HALF, values, {k: np.full(m, v) for k, v in cells.items()})
    if "pressure" in cells:  # a pressure in cells is even: it is compared after all
        assert found.verdict == "passed"
        return
    assert found.verdict == "doubtful"
    assert "nothing was compared" in about(found, "seams")[0].words


def test_a_model_clear_of_its_plane_has_passed_nothing(tmp_path: Path) -> None:
    sector = box((3, 2, 2), corner=(5.0, 0.0, 0.0))
    found = found_in(tmp_path, sector, HALF, {"displacement": pulled(sector)})
    assert found.verdict == "doubtful"


@pytest.mark.parametrize("force", [(0.0, 0.0, -20.0), (0.0, 0.0, -12345.0)])
def test_expected_of_a_case_beside_a_sum(tmp_path: Path, force: tuple[float, ...]) -> None:
    """Only the sum is written, but what is expected of the case is compared all the same."""
    sector = box((2, 1, 1))
    load = np.zeros((len(sector.points), 3))
    load[-1] = [0.0, 0.0, -10.0]
    tables = {
        **HALF, "case": [{"name": "even"}, {"name": "more", "factor": 2.0}],
        "sum": [{"name": "both", "terms": {"even": 1.0, "more": 1.0}}],
        "expect": {"result": "even", "force": list(force)},
    }  # fmt: skip
    found = found_in(tmp_path, sector, tables,
                     {"displacement": pulled(sector), "applied_force": load})  # fmt: skip
    (told,) = about(found, "expected")
    assert told.weight == (NOTE if force[2] == -20.0 else FAILS)


@pytest.mark.parametrize("load", ["symmetric", "antisymmetric"])
def test_stress_alone_that_closes_under_both_words(tmp_path: Path, load: str) -> None:
    """A stress along z has no traction on the plane x = 0, so it tells nothing of the load."""
    sector = box((4, 2, 2))
    stress = np.zeros((len(sector.cells), 6))
    stress[:, 2] = 5.0
    tables = {"mirror": [{**HALF["mirror"][0], "load": load}], "fields": {"stress": {
        "kind": "symmetric tensor", **ORDER}}}  # fmt: skip
    found = found_in(tmp_path, sector, tables, None, {"stress": stress})
    (told,) = found.continuity.found
    assert (told.found, told.result) == ("not told", "doubtful")


@pytest.mark.parametrize("cells", [1, 2])
def test_a_sector_one_cell_thick_has_a_seam(tmp_path: Path, cells: int) -> None:
    """The stress in cylindrical directions given as if in global ones: the seam must show it."""
    sector = ring(12, (3, cells, 2))
    stress = np.tile([0.0, 9.0, 0.0, 0.0, 0.0, 0.0], (len(sector.points), 1))  # hoop, at angle 0
    field = {"kind": "symmetric tensor", "seam": "recovered", **ORDER}
    tables = {"cyclic": {"sectors": 12}, "fields": {"stress": field}}
    found = found_in(tmp_path, sector, tables, {"stress": stress})
    assert [s.kind for s in found.continuity.seams] == ["sector faces"]
    (v,) = [v for v in found.continuity.verdicts if v.measure == "traction"]
    assert v.result == "open"


@pytest.mark.parametrize("away", [0.0, 1e4])
def test_balance_wherever_the_body_is(tmp_path: Path, away: float) -> None:
    """A reaction at the wrong place: the same couple, far from the origin or near."""
    sector = box((2, 2, 2), corner=(0.0, away, away))
    n = len(sector.points)
    load, reaction = np.zeros((n, 3)), np.zeros((n, 3))
    low, high = np.argmin(sector.points[:, 1]), np.argmax(sector.points[:, 1])
    load[high, 2], reaction[low, 2] = -10.0, 10.0
    tables = {**HALF, "fields": {
        "applied_force": {"kind": "polar vector", "seam": "sum"},
        "reaction": {"kind": "polar vector", "seam": "sum"}}}  # fmt: skip
    found = found_in(tmp_path, sector, tables, {
        "displacement": pulled(sector), "applied_force": load, "reaction": reaction})  # fmt: skip
    assert [f.weight for f in about(found, "balance")] == [FAILS]


def test_loads_that_cancel_do_not_hide_reactions(tmp_path: Path) -> None:
    """Nodal forces that add up to nothing by symmetry, and reactions to a weight not listed."""
    sector = box((2, 2, 2))
    n = len(sector.points)
    load, reaction = np.zeros((n, 3)), np.zeros((n, 3))
    load[np.argmax(sector.points[:, 0]), 0] = 10.0
    reaction[np.argmin(sector.points[:, 2]), 2] = 7.0
    found = found_in(tmp_path, sector, HALF, {
        "displacement": pulled(sector), "nodal_force": load, "reaction": reaction})  # fmt: skip
    assert [f.weight for f in about(found, "balance")] == [FAILS]


@pytest.mark.parametrize(
    ("fields", "words"),
    [(("nodal_force",), "no reactions"), (("reaction",), "no loads"),
     (("nodal_force", "spring_force", "reaction"), "several fields"),
     (("residual_force",), "no nodal forces")],
)  # fmt: skip
def test_balance_that_cannot_be_tried(tmp_path: Path, fields: tuple[str, ...], words: str) -> None:
    sector = box((2, 2, 2))
    force = np.zeros((len(sector.points), 3))
    force[-1] = [0.0, 0.0, 3.0]
    tables = {**HALF, "fields": {f: {"kind": "polar vector", "seam": "sum"} for f in fields}}
    found = found_in(tmp_path, sector, tables,
                     {"displacement": pulled(sector), **dict.fromkeys(fields, force)})  # fmt: skip
    (told,) = about(found, "balance")
    assert told.weight == NOTE
    assert words in told.words


def test_reactions_as_forces_on_the_supports(tmp_path: Path) -> None:
    sector = box((2, 2, 2))
    force = np.zeros((len(sector.points), 3))
    force[-1] = [0.0, 0.0, 3.0]
    found = found_in(tmp_path, sector, HALF, {
        "displacement": pulled(sector), "applied_force": force, "reaction": force})  # fmt: skip
    (told,) = about(found, "balance")
    assert told.weight == DOUBTS
    assert "sign turned round" in told.words


def test_expected_of_one_field(tmp_path: Path) -> None:
    sector = box((2, 2, 2))
    force = np.zeros((len(sector.points), 3))
    force[-1] = [0.0, 0.0, 3.0]
    points = {"displacement": pulled(sector), "nodal_force": force, "spring_force": 5.0 * force}
    kinds = {f: {"kind": "polar vector", "seam": "sum"} for f in ("nodal_force", "spring_force")}
    for name, total in (("nodal_force", 6.0), ("spring_force", 30.0)):
        tables = {**HALF, "fields": kinds, "expect": {"field": name, "force": [0.0, 0.0, total]}}
        (told,) = about(found_in(tmp_path, sector, tables, points), "expected")
        assert told.weight == NOTE, told.words
    for expect, words in (({"field": "spam"}, "spam"), ({}, "several")):
        tables = {**HALF, "fields": kinds, "expect": {"force": [0.0, 0.0, 1.0], **expect}}
        with pytest.raises(InputError, match=words):
            found_in(tmp_path, sector, tables, points)


def test_sections_take_the_stress_that_is_called_so(tmp_path: Path) -> None:
    """An initial stress stands beside it, first in the file."""
    sector = box((4, 2, 2))
    m = len(sector.cells)
    cells = {name: np.tile([size, 0.0, 0.0, 0.0, 0.0, 0.0], (m, 1))
             for name, size in (("initial_stress", 700.0), ("stress", 100.0))}  # fmt: skip
    tables = {**HALF, "section": {"normal": "x", "point": [0.5, 0.0, 0.0]}, "fields": {
        name: {"kind": "symmetric tensor", **ORDER} for name in cells}}  # fmt: skip
    points = {"displacement": pulled(sector)}
    found = found_in(tmp_path, sector, tables, points, cells)
    ((_, _, section),) = found.audit.sections
    assert (found.audit.section_stress, section.force[0]) == ("stress", pytest.approx(100.0))
    tables["section"] |= {"field": "initial_stress"}
    ((_, _, section),) = found_in(tmp_path, sector, tables, points, cells).audit.sections
    assert section.force[0] == pytest.approx(700.0)
    tables["section"] = {"normal": "x", "point": [0.5, 0.0, 0.0]}
    del tables["fields"]["stress"]
    both = {"initial_stress": cells["stress"], "residual_stress": cells["stress"]}
    tables["fields"]["residual_stress"] = tables["fields"]["initial_stress"]
    with pytest.raises(InputError, match="several stresses"):
        found_in(tmp_path, sector, tables, points, both)


def test_a_wrong_kind_is_no_crack(tmp_path: Path) -> None:
    """A rotation declared as a polar vector opens the seam, and would close with the other sign."""
    sector = box((3, 2, 2))
    spin = np.outer(1.0 + sector.points[:, 1], [1e-3, 0.0, 0.0])  # about x: even as an axial one
    tables = {**HALF, "seam": {"open": "keep apart"},
              "fields": {"spin": {"kind": "polar vector"}}}  # fmt: skip
    found = found_in(tmp_path, sector, tables, {"displacement": pulled(sector), "spin": spin})
    assert found.verdict == "failed"
    assert any("opposite sign" in f.words for f in found.findings if f.weight == FAILS)


def gable(slope: float) -> Sector:
    """Half of a roof of shells whose ridge lies in the plane x = 0."""
    points, cells = [], []
    for i in range(5):
        for j in range(4):
            points.append([0.25 * i, j / 3.0, -slope * 0.25 * i])
    number = np.arange(20).reshape(5, 4)
    for i in range(4):
        for j in range(3):
            cells.append((QUAD, [int(number[i + a, j + b]) for a, b in
                                 ((0, 0), (1, 0), (1, 1), (0, 1))]))  # fmt: skip
    return Sector(np.array(points), cells)


@pytest.mark.parametrize("slope", [0.2, 0.8, 3.0])
def test_a_fold_in_the_plane_is_not_judged(tmp_path: Path, slope: float) -> None:
    """Over a ridge the normals of both sides differ, so neither slope nor traction need agree."""
    roof = gable(slope)
    stress = np.tile([3.0, 0.0, 1.0, 0.0, 0.0, -2.0], (len(roof.cells), 1))
    tables = {**HALF, "fields": {"stress": {"kind": "symmetric tensor", **ORDER}}}
    found = found_in(tmp_path, roof, tables, {"displacement": pulled(roof)}, {"stress": stress})
    by = {v.measure: v.result for v in found.continuity.verdicts}
    assert by == {"value": "closed", "kink": "not judged", "traction": "not judged"}
    assert found.verdict == "passed"


def test_a_seam_between_two_materials(tmp_path: Path) -> None:
    """Soft and stiff half of each sector, the seam between them: the strain jumps by right."""
    sector = ring(6, (3, 6, 2))
    centre = np.array([sector.points[n].mean(axis=0) for _, n in sector.cells])
    part = (np.arctan2(centre[:, 1], centre[:, 0]) > np.pi / 6).astype(np.int64)
    theta = np.arctan2(sector.points[:, 1], sector.points[:, 0])
    T = np.where(theta < np.pi / 6, 4.0 * theta, 4.0 * np.pi / 6 + (theta - np.pi / 6) * 1.0)
    T -= T.max() * theta / theta.max()  # the same at both faces, another slope on each
    tables = {"cyclic": {"sectors": 6}, "fields": {"temperature": {"kind": "scalar"}}}
    points = {"temperature": T + 1.0}
    for cells, result in (({"material": part}, "not judged"), ({}, "open")):
        found = found_in(tmp_path, sector, tables, points, cells)
        (v,) = [v for v in found.continuity.verdicts if v.measure == "kink"]
        assert v.result == result


def test_faces_at_rest_tell_no_number_of_diameters(tmp_path: Path) -> None:
    sector = ring(6, (2, 5, 2))
    theta = np.arctan2(sector.points[:, 1], sector.points[:, 0])
    u = np.outer(np.sin(6.0 * theta) ** 2, [0.0, 0.0, 1e-3])
    tables = {"cyclic": {"sectors": 6, "nodal_diameters": 3}}
    (told,) = found_in(tmp_path, sector, tables, {"displacement": u}).continuity.found
    assert (told.found, told.result) == ("not told", "not judged")


def test_a_clamped_plane_beside_a_warm_one(tmp_path: Path) -> None:
    """The temperature closes as symmetric; the displacement was held there all the same."""
    sector = box((6, 3, 3))
    x, y, z = sector.points.T
    u = 1e-3 * np.stack([x * (1 + y), x * (2 + z), x * (1 - y)], axis=1)
    points = {"displacement": u, "temperature": 20.0 + x * x}
    (told,) = found_in(tmp_path, sector, HALF, points).continuity.found
    assert told.found == "looks clamped"
    held = {"mirror": [{**HALF["mirror"][0], "held": True}]}
    assert found_in(tmp_path, sector, held, points).verdict == "passed"


def test_a_held_plane_that_moves(tmp_path: Path) -> None:
    sector = box((3, 2, 2))
    held = {"mirror": [{**HALF["mirror"][0], "held": True}]}
    (told,) = found_in(tmp_path, sector, held, {"displacement": pulled(sector)}).continuity.found
    assert told.result == "doubtful"
    assert "moves" in told.words


def test_both_faces_of_an_unlike_seam_look_at_the_right_copy(tmp_path: Path) -> None:
    """Each row's partners, brought by the row's own placement, lie where its node is."""
    a = np.pi / 6
    turned = np.array([[np.cos(a), -np.sin(a), 0], [np.sin(a), np.cos(a), 0], [0, 0, 1]])
    first = ring(6, (2, 2, 2), part=0.5)
    sector = first.beside(ring(6, (3, 2, 3), part=0.5).moved(turned))
    temperature = {"temperature": np.ones(len(sector.points))}
    found = found_in(tmp_path, sector, {"cyclic": {"sectors": 6}}, temperature)
    (seam,) = [s for s in found.continuity.seams if s.kind == "sector faces"]
    group = found.continuity.sector.group
    assert set(seam.via.tolist()) == {1, 5}, "nodes of both faces are compared"
    brought = np.einsum("km,kmi->ki", seam.weights, sector.points[seam.partners])
    images = np.stack([group.placements[s].apply(x[None])[0]
                       for s, x in zip(seam.via.tolist(), brought, strict=True)])  # fmt: skip
    off = np.linalg.norm(images - sector.points[seam.nodes], axis=1)
    np.testing.assert_allclose(off, seam.distance, atol=1e-9)
    assert off.max() < 1e-9
