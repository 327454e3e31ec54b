"""Continuity of every field at every seam, before anything is merged."""

from __future__ import annotations

from dataclasses import dataclass, replace

import numpy as np

from expander.behaviours import Factors
from expander.checking.declared import CLAMPED, Found, declared_against_found, primary
from expander.checking.jumps import Jump, jump_at
from expander.checking.seamlist import Seam, seams_of
from expander.checking.smoothness import Near, kink, recovered
from expander.checking.verdicts import CLOSED, DOUBTFUL, OPEN, TOLD, Verdict, verdict_of
from expander.closing import scale_of
from expander.errors import CheckFailed
from expander.fields import Field
from expander.loadcases import LoadCase
from expander.resolve import Numbers
from expander.roles import having
from expander.sector import Sector, Step

OPPOSITE = "with the opposite sign it closes: its kind or the load word looks wrong"


@dataclass(frozen=True, eq=False)
class CaseContinuity:
    """One load case at all seams.

    Attributes
    ----------
    chi : the factors used, with the direction of a wave decided.
    phase : "+" or "-" as decided or declared, or "" where it makes no difference.
    """

    case: LoadCase
    chi: Factors
    phase: str
    verdicts: tuple[Verdict, ...]
    found: tuple[Found, ...]


@dataclass(frozen=True, eq=False)
class Continuity:
    """All seams of a sector and how every field meets itself there."""

    sector: Sector
    seams: tuple[Seam, ...]
    cases: tuple[CaseContinuity, ...]

    @property
    def verdicts(self) -> tuple[Verdict, ...]:
        return tuple(v for c in self.cases for v in c.verdicts)

    @property
    def found(self) -> tuple[Found, ...]:
        return tuple(f for c in self.cases for f in c.found)


def continuity(sector: Sector, step: Step = lambda words: None) -> Continuity:
    """Compare both sides of every seam for every field of every case."""
    step("listing seams")
    seams = seams_of(sector)
    named = having(sector.fields, "part")
    parts = named[0].values(sector.model)[:, 0].astype(np.int64) if named else None
    nears = [Near(sector.mesh, sector.group, s, parts) for s in seams]
    cases = []
    for case in sector.cases:
        step(f"comparing the sides, case {case.name}")
        values = {f.name: f.values(case.model) for f in sector.fields if _numeric(f)}
        chi = case.chi
        found = [declared_against_found(sector, n, case, chi, values) for n in nears]
        verdicts = [v for n in nears for v in _verdicts(sector, n, case, chi, values)]
        phase = case.behaviour.phase if case.complex_factors else ""
        held = {f.seam for f in found if f is not None and f.found == CLAMPED and f.result != OPEN}
        verdicts = [
            replace(v, result=TOLD, words="the plane is held, as declared")
            if v.seam in held and v.times is not None else v
            for v in verdicts
        ]  # fmt: skip
        cases.append(CaseContinuity(case, chi, phase, tuple(verdicts),
                                    tuple(f for f in found if f is not None)))  # fmt: skip
    return Continuity(sector, tuple(seams), tuple(cases))


def _numeric(f: Field) -> bool:
    return f.kind != "label"


def _verdicts(
    sector: Sector,
    near: Near,
    case: LoadCase,
    chi: Factors,
    values: dict[str, Numbers],
) -> list[Verdict]:
    """All fields at one seam, in their order."""
    if not near.seam.touches:
        return []
    there = [f for f in sector.fields if f.name in values]
    return [v for f in there for v in _of_field(sector, near, case, chi, f, values[f.name])]


def _of_field(
    sector: Sector, near: Near, case: LoadCase, chi: Factors, f: Field, here: Numbers
) -> list[Verdict]:
    mesh, group, seam = sector.mesh, sector.group, near.seam
    limit, scatter = sector.case.seam.limit, sector.case.seam.scatter
    if f.on == "points" and f.seam in ("agree", "lowest copy"):
        jump = jump_at(mesh, group, seam, f, case, here, chi)
        found = [value_verdict(jump, mesh.points, scale_of(f, case, sector.cases), limit)]
        slope = kink(near, f, case, here, chi, scatter) if primary(f) else None
        return found + ([slope] if slope is not None else [])
    if f.on == "points" and f.seam == "sum":
        return []  # shares of both sides add up; the audit looks at their totals
    if f.follows == "load" and np.issubdtype(here.dtype, np.inexact):
        judged = recovered(near, f, case, here, chi, scatter)
        return [judged] if judged is not None else []
    return []


def value_verdict(jump: Jump, points: np.ndarray, scale: float, limit: float) -> Verdict:
    """A field that must agree: jumps against ``limit`` times its largest value.

    Rows that are compared by interpolation may differ by its error as well; then they are doubtful.
    """
    beyond = jump.lengths > limit * scale
    sure = jump.lengths - jump.allowance > limit * scale
    words = ""
    result = OPEN if sure.any() else CLOSED
    known = np.isfinite(jump.own).any() and np.isfinite(jump.other).any()
    if scale == 0.0 or not known:
        result, words = TOLD, "the field is zero" if known else "there is nothing to compare"
    elif sure.any() and jump.field.follows == "load" and jump.quantity.linear:
        both = np.nan_to_num(jump.own + jump.other, posinf=0.0, neginf=0.0)
        gap = np.linalg.norm(both, axis=1)
        if (gap[sure] <= limit * scale).all():
            words = OPPOSITE
    elif beyond.any() and not sure.any():
        result, words = DOUBTFUL, "within the error of interpolating between nodes"
    over = sure if sure.any() else beyond
    return verdict_of(jump, points, scale, limit, "value", result, over, words=words)


def check_interpolated(sector: Sector) -> list[str]:
    """Whether fields that must agree do so at faces that do not pair; notes on what was compared.

    Raises
    ------
    CheckFailed
        Naming seam, field and node, unless open seams are to be kept apart.
    """
    notes = []
    for seam in seams_of(sector):
        if not seam.interpolated or not seam.touches:
            continue
        for case in sector.cases:
            for f in sector.fields:
                if not primary(f):
                    continue
                jump = jump_at(sector.mesh, sector.group, seam, f, case, f.values(case.model),
                               case.chi)  # fmt: skip
                scale = scale_of(f, case, sector.cases)
                found = value_verdict(jump, sector.mesh.points, scale, sector.case.seam.limit)
                words = (
                    f"{f.name!r} in case {case.name!r}, {seam.name}, compared by interpolation: "
                    f"the sides differ by up to {100 * found.relative:.3g} % of its largest value "
                    f"(node {found.node})"
                )
                if found.result == OPEN and sector.case.seam.open == "refuse":
                    raise CheckFailed(
                        words + ", which is more than interpolation explains.",
                        "Check load word, kind and components; seamfold check shows both sides. To "
                        'go on, seam.open = "keep apart" under [seam].',
                    )
                notes.append(words)
    return notes
