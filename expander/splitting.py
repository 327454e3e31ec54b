"""A load on the whole body split into load behaviours: which cases to run, and with which loads.

Each part is what the sector's model has to be loaded with, its own share, so that the sum of the
expanded results is that of the whole body under the whole load. Nodal loads on the whole body are
split here; how many times each copy carries the load of the sector's model, in `waves.patterns`.
"""

from __future__ import annotations

from collections.abc import Callable, Mapping
from dataclasses import dataclass
from functools import cached_property
from pathlib import Path
from typing import Any

import numpy as np

from expander.admission import check_mesh
from expander.casefile import CaseFile, plane_names
from expander.errors import InputError
from expander.groups import CutPlane, CyclicAxis, Group, make_group
from expander.model import Mesh, Model
from expander.placements import Floats
from expander.resolve import Numbers
from expander.seams import find_seams
from expander.sector import direction
from expander.tiling import check_sides, check_touch, check_turns
from expander.waves.fourier import Character, characters, complete, component
from expander.waves.wholeloads import LOADS, locate, read_loads, turned_shares

LEAST = 1e-12  # of the load's norm: a part below it is none
ROUND_OFF = 8 * np.finfo(float).eps
Step = Callable[[str], None]


def group_of(case: CaseFile) -> Group:
    """The group of a case's planes and axis.

    Raises
    ------
    InputError
        If there are neither, or they do not close.

    Examples
    --------
    >>> from expander.casefile import validate_case
    >>> tables = {"cyclic": {"sectors": 5}, "mirror": [{"normal": "z"}]}
    >>> len(group_of(validate_case(tables, Path())))
    10
    """
    planes = [
        CutPlane(n, direction(m.normal, f"mirror {n!r}: normal"), np.array(m.point, dtype=float))
        for n, m in zip(plane_names(case), case.mirror, strict=True)
    ]
    axis = None
    if case.cyclic is not None:
        axis = CyclicAxis(case.cyclic.sectors, direction(case.cyclic.axis, "cyclic.axis"),
                          np.array(case.cyclic.point, dtype=float))  # fmt: skip
    return make_group(planes, axis)


def model_file(case: CaseFile) -> Path:
    """The sector's model: that of [model], or of the first case."""
    names = [case.model.file, *(c.file for c in case.case)]
    name = next((n for n in names if n is not None), None)
    if name is None:
        raise InputError("[model] names no file.", 'Add file = "sector.vtu" under [model].')
    return case.folder / name


@dataclass(frozen=True, eq=False)
class Part:
    """What one load behaviour has of the load: a case to run.

    Attributes
    ----------
    share : of the load's square, by load ("force", "moment", "heat flow", or "factor"); the shares
        of all parts add up to 1.
    """

    character: Character
    share: Mapping[str, float]

    @property
    def name(self) -> str:
        return self.character.name

    @property
    def norm(self) -> float:
        """The largest of its loads' norms, as a part of the whole load's."""
        return float(np.sqrt(max(self.share.values())))


@dataclass(frozen=True, eq=False)
class Split:
    """Nodal loads on the whole body in parts.

    Attributes
    ----------
    turned : sparse (copies, n * components) by load: each copy's share in turned components.
    points : loaded points of the whole body.
    parts : the cases to run; `left_out` are those that have nothing of the load.
    notes : what was found, each a sentence.
    """

    group: Group
    mesh: Mesh
    source: Path
    turned: Mapping[str, Any]
    points: int
    parts: tuple[Part, ...]
    left_out: tuple[Part, ...]
    notes: tuple[str, ...]

    @cached_property
    def _largest(self) -> dict[str, float]:
        return {name: float(np.abs(t.data).max()) for name, t in self.turned.items()}

    def loads(self, part: Part) -> dict[str, Numbers]:
        """The part on the sector's model, (n, components) by load, in the unit of the loads."""
        out = {}
        for name, turned in self.turned.items():
            found = component(part.character.chi, turned).reshape(-1, LOADS[name][0].size)
            noise = ROUND_OFF * self._largest[name]
            found.real[np.abs(found.real) < noise] = 0.0
            if np.iscomplexobj(found):
                found.imag[np.abs(found.imag) < noise] = 0.0
            out[name] = found
        return out

    def resultant(self, part: Part) -> dict[str, Numbers]:
        """Sum of the part over the sector's model, (components,) by load."""
        return {name: f.sum(axis=0) for name, f in self.loads(part).items()}

    @cached_property
    def _turns(self) -> dict[str, Floats]:
        """rho(Q) of every copy by load, (copies, components, components)."""
        return {
            name: np.stack([LOADS[name][0].matrix(g.Q) for g in self.group.placements])
            for name in self.turned
        }

    def total(self, part: Part) -> dict[str, Floats]:
        """Sum of the part over the whole body, (components,) by load."""
        c = part.character
        return {
            name: c.weight * np.einsum("g,gab,b->a", c.chi, self._turns[name], r).real
            for name, r in self.resultant(part).items()
        }


def split_loads(
    case: CaseFile,
    path: Path,
    arrays: Mapping[str, str] | None = None,
    least: float = LEAST,
    step: Step = lambda words: None,
) -> Split:
    """Split nodal loads on the whole body.

    Parameters
    ----------
    case : its [model], planes and axis; nothing else is read.
    path, arrays : see `expander.waves.wholeloads.read_loads`.
    least : parts whose norm is less than this part of the load's are left out.
    step : called with a few words before each slow part.

    Raises
    ------
    InputError
        If points of the load are no nodes, or the load is no sum of these behaviours.
    """
    from expander.readers import read_model

    check_linear(case)
    group = group_of(case)
    step("reading")
    model: Model = read_model(model_file(case))
    check_mesh(model)
    mesh = model.mesh
    load = read_loads(path, arrays)
    given = case.seam.tolerance
    step("finding seams")
    check_sides(mesh, group, given)
    seams = find_seams(mesh, group, given)
    notes = [*model.notes, *check_touch(mesh, group, seams, case.seam.open == "keep apart"),
             *check_turns(mesh, group, seams, given)]  # fmt: skip
    step("bringing the loads back")
    copy, node = locate(load, mesh, group, given)
    turned = turned_shares(load, copy, node, seams.nodes, group, mesh.point_count)
    step("splitting")
    squares = {name: float((t.data**2).sum()) for name, t in turned.items()}
    shares = [
        Part(c, {n: share_of(c, component(c.chi, t), squares[n]) for n, t in turned.items()})
        for c in characters(group)
    ]
    check_complete(group, shares, str(path))
    parts, left = sifted(shares, least)
    return Split(group, mesh, path, turned, len(load.points), parts, left, tuple(notes))


def share_of(character: Character, found: Any, square: float) -> float:
    """What a part, counted with its weight on all copies, has of the load's square."""
    size = character.weight * float(np.sum(np.abs(found) ** 2)) * len(character.chi)
    return size / square


def sifted(parts: list[Part], least: float) -> tuple[tuple[Part, ...], tuple[Part, ...]]:
    """The parts that count, and those that have nothing of the load."""
    kept = tuple(p for p in parts if p.norm >= least)
    return kept, tuple(p for p in parts if p.norm < least)


def check_linear(case: CaseFile) -> None:
    """Refuse a case whose results do not add up."""
    if not case.model.linear:
        raise InputError("model.linear = false: results of parts of a load do not add up.",
                         "Split loads of linear analyses only.")  # fmt: skip


def check_complete(group: Group, parts: list[Part], what: str) -> None:
    """Refuse a load of which something is in no one-dimensional behaviour."""
    if complete(group, [p.character for p in parts]):
        return
    for load in parts[0].share:
        missing = 1.0 - sum(p.share[load] for p in parts)
        if missing > 1e-12:
            through = group.axis is not None and any(
                abs(float(p.normal @ group.axis.axis)) < 1e-6 for p in group.planes
            )
            raise InputError(
                f"{what}: {100 * np.sqrt(missing):.3g} % of the {load} is in no part that takes "
                "one factor from copy to copy"
                + (": with a plane through the axis waves of 0 < h < N/2 mix there."
                   if through else ": the cut planes meet at less than 90 degrees."),
                "Model a whole sector and leave out the plane through the axis." if through else
                "Model more of the body, so that the cut planes are perpendicular, or take an "
                "axis with sectors in place of the planes.",
            )  # fmt: skip
