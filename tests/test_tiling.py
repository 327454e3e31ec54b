"""Copies that fill the body once: parts that stand clear, parts modelled twice, wrong angles."""

from __future__ import annotations

from pathlib import Path

import numpy as np
import pytest
from meshes import box, case_of, ring
from scipy.spatial.transform import Rotation

from expander import expand
from expander.errors import InputError


def test_a_part_with_parallel_sides_may_stand_clear(tmp_path: Path) -> None:
    """The corner rows of a bolt's head lie at some angle about the axis, its faces do not."""
    block = box((2, 2, 2), size=(0.4, 0.3, 0.5), corner=(1.0, -0.15, 0.0))
    body = expand(case_of(tmp_path, block, {"cyclic": {"sectors": 8}}))
    assert body.n_points == 8 * len(block.points)
    assert "do not touch" in " ".join(body.field_data["assumptions"])


def test_a_part_modelled_whole_on_both_faces_is_refused(tmp_path: Path) -> None:
    """It would stand twice at the same place, with twice its mass."""
    turn = Rotation.from_euler("z", 60, degrees=True).as_matrix()
    block = box((2, 2, 2), size=(0.4, 0.3, 0.5), corner=(1.2, -0.15, 0.8))
    sector = ring(6).beside(block).beside(block.moved(turn))
    with pytest.raises(InputError, match="overlap"):
        expand(case_of(tmp_path, sector, {"cyclic": {"sectors": 6}}))


@pytest.mark.parametrize("sectors", [700, 950, 1700, 3001])
def test_narrow_sectors_are_told_from_wrong_ones(sectors: int, tmp_path: Path) -> None:
    narrow = ring(sectors, (1, 1, 1))
    body = expand(
        case_of(tmp_path, narrow, {"cyclic": {"sectors": sectors}, "output": {"copies": [0, 1]}})
    )
    assert body.n_points == 12
    with pytest.raises(InputError, match=f"sectors = {sectors} would fit"):
        expand(case_of(tmp_path, narrow, {"cyclic": {"sectors": sectors - 1}}, name="wrong"))


@pytest.mark.parametrize("tables", [
    {"mirror": [{"normal": "y"},
                {"normal": [np.sin(np.pi / 4), -np.cos(np.pi / 4), 0.0]}]},
    {"mirror": [{"normal": "y"}], "cyclic": {"sectors": 4}},
], ids=["planes", "half-sector"])  # fmt: skip
def test_a_model_narrower_than_its_planes_is_refused(tables, tmp_path: Path) -> None:
    """22.5 degrees between plane faces where the planes ask for 45: half the body would be
    missing."""
    with pytest.raises(InputError, match=r"22\.5 degrees apart"):
        expand(case_of(tmp_path, ring(8, (2, 12, 2), part=0.5), tables))


def test_the_same_input_gives_the_same_field_data(tmp_path: Path) -> None:
    """Notes on several frames come in the order of the case, not of the memory."""
    sector = ring(4, inner=0.0)
    names = [f"F{k}" for k in range(6)]
    zero = np.zeros((len(sector.points), 3))
    tables = {
        "cyclic": {"sectors": 4},
        "frames": {n: {"type": "cylindrical"} for n in names},
        "fields": {n.lower(): {"kind": "polar vector", "frame": n} for n in names},
    }
    body = expand(case_of(tmp_path, sector, tables, {n.lower(): zero for n in names}))
    told = [note for note in body.field_data["assumptions"] if note.startswith("frame")]
    assert [note.split("'")[1] for note in told] == names
