"""Small cases for tests of the check, each with something awkward about it."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass, field
from pathlib import Path
from typing import Any

import numpy as np
from meshes import QUAD, Sector, box, case_of, ring
from rigid_cases import Case, equivariant, waves

from expander.casefile import CaseFile

HALF: dict[str, Any] = {"mirror": [{"name": "mid", "normal": "x"}]}


@dataclass
class Given:
    """A sector, the tables of its case and its arrays."""

    sector: Sector
    tables: dict[str, Any]
    points: dict[str, np.ndarray] = field(default_factory=dict)
    cells: dict[str, np.ndarray] = field(default_factory=dict)
    allow_nan: bool = False

    def case(self, folder: Path) -> CaseFile:
        return case_of(folder, self.sector, self.tables, self.points, self.cells)


def even(points: np.ndarray) -> np.ndarray:
    """A smooth displacement that is symmetric about the plane x = 0."""
    x, y, z = points.T
    return 1e-3 * np.stack([x * (1.0 + y), y + x * x * z, z * y + 0.5 * x * x], axis=1)


def half() -> Given:
    """Half a block that moves as its plane says."""
    sector = box((3, 2, 2))
    return Given(sector, HALF, {"displacement": even(sector.points)})


def open_seam() -> Given:
    """Two nodes of the plane move through it."""
    given = half()
    given.points["displacement"][[0, 4], 0] = [2e-4, -1e-4]
    return given


def clamped() -> Given:
    """All that moves at the plane is the slope."""
    sector = box((4, 2, 2))
    x = sector.points[:, :1]
    return Given(sector, HALF, {"displacement": 1e-3 * x * [1.0, 2.0, 3.0]})


def no_forces() -> Given:
    """A temperature alone, which is all that is known."""
    sector = box((3, 2, 2))
    warm = 20.0 + sector.points[:, 0] ** 2 + sector.points[:, 1]
    tables = {**HALF, "fields": {"warmth": {"kind": "scalar"}}}
    return Given(sector, tables, {"warmth": warm})


def shells() -> Given:
    """A quarter of a plate of two pieces that bends, with a thickness and a loose node."""
    ticks = np.linspace(0.0, 1.0, 4)
    points = [[x, y, 0.0] for x in ticks for y in ticks] + [[0.2, 0.2, 0.7]]
    cells = [
        (QUAD, [4 * i + j, 4 * i + 4 + j, 4 * i + 5 + j, 4 * i + 1 + j])
        for i in range(3) for j in range(3) if i != 1
    ]  # fmt: skip
    sector = Sector(np.array(points), cells)
    x, y, _ = sector.points.T
    w = 1e-3 * (1.0 - x * x) * (1.0 - y * y)
    slope = 1e-3 * np.stack([-2 * y * (1 - x * x), 2 * x * (1 - y * y), 0 * x], axis=1)
    tables = {"mirror": [{"normal": "x"}, {"normal": "y"}], "fields": {
        "displacement": {"kind": "polar vector"}, "rotation": {"kind": "axial vector"},
    }}  # fmt: skip
    return Given(
        sector,
        tables,
        {"displacement": np.stack([0 * w, 0 * w, w], axis=1), "rotation": slope},
        {"thickness": np.full(len(cells), 0.02), "part": np.arange(len(cells)) // 3},
    )


def without_a_value(on_seam: float, off_seam: float) -> Given:
    """A displacement that is not finite at a node of the seam and at one off it."""
    given = half()
    given.points["displacement"][0] = on_seam
    given.points["displacement"][-1, 1] = off_seam
    given.allow_nan = True
    return given


def forces_not_finite() -> Given:
    """Loads that are not finite at a node."""
    given = half()
    force = np.ones((len(given.sector.points), 3))
    force[20] = [np.nan, np.inf, -np.inf]
    given.points["applied_force"] = force
    given.allow_nan = True
    return given


def stress_not_finite(value: float = np.nan) -> Given:
    """A stress that is missing at a node of the seam and at one off it."""
    given = half()
    stress = np.ones((len(given.sector.points), 6)) * [1, 2, 3, 0, 1, 0]
    stress[[0, 30]] = value
    given.points["stress"] = stress
    given.allow_nan = True
    return given


def sections() -> Given:
    """A bar under tension and two planes across it, in two cases and their sum."""
    sector = box((3, 2, 2))
    stress = np.zeros((len(sector.cells), 6))
    stress[:, 0] = 5.0
    tables = {
        **HALF,
        "case": [{"name": "pull"}, {"name": "more", "factor": 2.0}],
        "sum": [{"name": "both", "terms": {"pull": 1.0, "more": 1.0}}],
        "section": [
            {"name": "near", "normal": "x", "point": [0.3, 0.0, 0.0]},
            {"normal": [-1.0, 0.0, 0.0], "point": [-0.4, 0, 0], "about": [0.0, 1.0, 0.0]},
        ],
    }
    return Given(sector, tables, {"displacement": even(sector.points)}, {"stress": stress})


def expected() -> Given:
    """Loads and reactions of a bar, with totals that are as expected and others that are not."""
    given = half()
    n = len(given.sector.points)
    load, reaction = np.zeros((n, 3)), np.zeros((n, 3))
    load[-1], reaction[5] = [0.0, 0.0, 3.0], [0.0, 0.0, -2.9]
    given.points |= {"applied_force": load, "reaction": reaction, "rotation": np.full((n, 3), 9.0)}
    given.points["rotation"][given.sector.points[:, 0] == 0.0, 1:] = 0.0
    given.tables = {
        **HALF,
        "expect": [
            {"force": [0.0, 0.0, 6.0], "moment": [0.0, 1.0, 0.0], "about": [0.1, 0.2, 0.3],
             "mass": 7.0, "pieces": 2},
            {"force": [0.0, 0.0, 5.8], "field": "reaction"},
        ],
    }  # fmt: skip
    return given


def other_mesh() -> Given:
    """A sector whose second face has its inner nodes elsewhere than the first."""
    sector = ring(4, (2, 4, 2))
    x, y, z = sector.points.T
    radius, part = np.hypot(x, y), np.arctan2(y, x) / (np.pi / 2)
    further = 1.0 + 0.2 * part * ((radius > 1.01) & (radius < 1.99)) / radius
    higher = z + 0.15 * part * ((z > 0.01) & (z < 0.79))
    sector = Sector(np.stack([x * further, y * further, higher], axis=1), sector.cells)
    x, y, z = sector.points.T
    outwards = 1e-3 * np.stack([x, y, z], axis=1)
    tables = {"cyclic": {"sectors": 4}, "fields": {"displacement": {"kind": "polar vector"}}}
    return Given(sector, tables, {"displacement": outwards})


def wave(phase: str = "auto", h: int = 1, sectors: int = 6) -> Given:
    """A pie with a wave of one nodal diameter, so that the axis moves across itself."""
    sector = ring(sectors, (2, 3, 2), inner=0.0)
    group, chi = Case([], (), sectors, h).build()
    u = 1e-3 * equivariant(group, chi, waves(4, True))(sector.points)
    tables = {
        "cyclic": {"sectors": sectors, "nodal_diameters": h, "phase": phase},
        "fields": {"displacement": {"kind": "polar vector", "real": "u_re", "imaginary": "u_im"}},
    }
    return Given(sector, tables, {"u_re": u.real, "u_im": u.imag})


def apart() -> Given:
    """A block that stands clear of the plane."""
    sector = box((2, 2, 2), corner=(3.0, 0.0, 0.0))
    return Given(sector, HALF, {"displacement": even(sector.points)})


AWKWARD: dict[str, Callable[[], Given]] = {
    "as declared": half, "open seam": open_seam, "clamped": clamped, "no forces": no_forces,
    "shells": shells, "sections": sections, "expected": expected, "other mesh": other_mesh,
    "wave": wave, "apart": apart,
    "no displacement at a node": lambda: without_a_value(np.nan, np.nan),
    "infinite displacement": lambda: without_a_value(np.inf, -np.inf),
    "neither at two nodes": lambda: without_a_value(np.nan, np.inf),
    "forces that are not finite": forces_not_finite, "no stress at a node": stress_not_finite,
    "infinite stress": lambda: stress_not_finite(np.inf),
}  # fmt: skip
