"""Declared against found: what the data on a seam say of the load, beside what the case says.

On a cut plane a polar field with vanishing normal part is symmetric, with vanishing tangential
part antisymmetric; where both vanish the seam closes under either word and the slope across it
decides, or shows that the plane was clamped. On the faces of a sector the second face is the
turned first one times ``exp(i h alpha)``: the ratio of the two gives the nodal diameters, modulo
the number of sectors, and the direction in which the wave runs.
"""

from __future__ import annotations

import json
from dataclasses import dataclass, field, replace

import numpy as np

from expander.behaviours import Factors
from expander.checking.jumps import Jump, jump_at
from expander.checking.seamlist import Seam
from expander.checking.smoothness import Near, is_stress, kink, recovered
from expander.checking.verdicts import CLOSED, DOUBTFUL, OPEN, TOLD, worst_of
from expander.closing import largest_value, scale_of
from expander.fields import Field
from expander.loadcases import LoadCase
from expander.placements import Floats
from expander.resolve import Numbers
from expander.sector import Sector

# RMS of the slope's jumps over that of the scatter around, where all values vanish on a plane: at
# most 0.66 in right solutions of half models, over 0.8 in 95 of 100 planes clamped by mistake.
TYPICAL = 0.75
MOST = 0.9  # of the nodes: as many closing under a word say that it is the word
CLAMPED, NEITHER, ZERO, UNTOLD = "looks clamped", "neither", "zero field", "not told"


@dataclass(frozen=True)
class Found:
    """What the data say of the load on one seam in one case.

    Attributes
    ----------
    declared, found : words of the case file, or "looks clamped", "neither", "zero field",
        "not told".
    result : "closed" if they agree, else "open"; "doubtful" or "not judged" where it is not told.
    residual : largest jump under the declared word, as part of the field's largest value.
    alternative, alternative_residual : the best other word, and the jump under it.
    kink, alternative_kink : jump of the slope under both words in multiples of the mesh's scatter,
        where the values alone do not decide.
    line : the line of the case file that would agree with the data.
    nodes : where the declared word fails, the worst first.
    fields : what was looked at.
    """

    seam: str
    case: str
    declared: str
    found: str
    result: str
    residual: float
    alternative: str = ""
    alternative_residual: float = float("nan")
    kink: float | None = None
    alternative_kink: float | None = None
    line: str = ""
    words: str = ""
    nodes: tuple[int, ...] = ()
    fields: tuple[str, ...] = field(default=())

    @property
    def ratio(self) -> float:
        """Residual of the declared word over that of the best other one."""
        if not self.alternative_residual > 0.0:
            return float("inf") if self.residual > 0.0 else float("nan")
        return self.residual / self.alternative_residual


@dataclass(frozen=True)
class _Word:
    """A word of the case file, its factor, and the line that says it."""

    name: str
    chi: complex
    line: str


@dataclass(frozen=True, eq=False)
class _Sides:
    """A field on both sides of a seam, the copy's without its factor, and its largest value."""

    field: Field
    plain: Jump
    scale: float

    def relative(self, chi: complex) -> Floats:
        """(k,) jumps under a factor, as part of the field's largest value.

        What interpolation may be wrong by is taken off.
        """
        seam = self.plain.seam
        # Rows that look the other way through the seam take the factor of the inverse.
        factor = np.where(seam.via == seam.copy, chi, chi.conjugate())[:, None]
        with np.errstate(invalid="ignore"):
            gap = self.plain.own - (factor if chi.imag else factor.real) * self.plain.other
        gap[~np.isfinite(gap)] = 0.0
        length = np.linalg.norm(gap, axis=1) - self.plain.allowance
        return np.asarray(np.maximum(length, 0.0) / self.scale)

    def vanishes(self, limit: float) -> bool:
        """Whether the values on both sides are no more than what a jump may be."""
        sides = (np.nan_to_num(side, posinf=0.0, neginf=0.0)
                 for side in (self.plain.own, self.plain.other))  # fmt: skip
        most = max(float(np.linalg.norm(s, axis=1).max(initial=0.0)) for s in sides)
        return most <= limit * self.scale


def _held(sector: Sector, seam: Seam) -> bool:
    """Whether a plane is declared as held."""
    both = zip(sector.case.mirror, sector.group.planes, strict=True)
    return any(m.held and p.name == seam.plane for m, p in both)


def primary(f: Field) -> bool:
    """Whether a field must agree at seams and follows the load, so that it tells the load."""
    return (
        f.on == "points" and f.seam == "agree" and f.follows == "load"
        and f.quantity.linear and f.kind != "label"
    )  # fmt: skip


def declared_against_found(
    sector: Sector,
    near: Near,
    case: LoadCase,
    chi: Factors,
    values: dict[str, Numbers],
) -> Found | None:
    """Compare the load word of a seam with what the fields say; None for lines and points.

    Parameters
    ----------
    chi : the factors of the case, with the direction of a wave decided.
    values : (n, c) of every field by name.
    """
    seam = near.seam
    words = _words(sector, seam, case, chi)
    if not words or not seam.touches:
        return None
    own, *others = words
    sides = _sides(sector, seam, case, values)
    if not sides:
        return _by_recovered(sector, near, case, values, own, others)
    moving = [s for s in sides if s.scale > 0.0]
    names = tuple(s.field.name for s in sides)
    if not moving:
        return Found(seam.name, case.name, own.name, ZERO, TOLD, 0.0, fields=names)
    limit = sector.case.seam.limit
    if not others:  # turned: what the data say is the other word
        others = [_wave(sector, seam, case, moving, own)]
    jumps = {w.name: np.max([s.relative(w.chi) for s in moving], axis=0) for w in (own, *others)}
    worst = {name: float(j.max(initial=0.0)) for name, j in jumps.items()}
    best = min(others, key=lambda w: worst[w.name])
    bad = np.flatnonzero(jumps[own.name] > limit)
    order = bad[np.argsort(-jumps[own.name][bad], kind="stable")]
    nodes = tuple(dict.fromkeys(seam.nodes[order].tolist()))
    same = abs(best.chi - own.chi) < 1e-9
    told = Found(
        seam.name, case.name, own.name, own.name, CLOSED, worst[own.name],
        "" if same else best.name, float("nan") if same else worst[best.name], nodes=nodes,
        fields=names,
    )  # fmt: skip
    closing = [w for w in (own, best) if worst[w.name] <= limit]
    at_rest = [s for s in moving if s.vanishes(limit)]
    if seam.kind == "sector faces" and len(at_rest) == len(moving):
        return replace(told, result=TOLD, found=UNTOLD, alternative="",
                       words="the values vanish on both faces, which go with any h")  # fmt: skip
    if own in closing and (same or best not in closing):
        # A plane may be clamped though some other field, such as a temperature, is not.
        slope = None
        if at_rest and not same and seam.kind == "cut plane":
            slope = _by_slope(sector, near, case, values, at_rest, told, own, best)
        if slope is not None and slope.found == CLAMPED:
            return slope
        if _held(sector, seam) and not at_rest:
            return replace(told, result=DOUBTFUL, words="declared as held, but it moves")
        return told
    if own in closing:
        return _by_slope(sector, near, case, values, moving, told, own, best)
    share = float((jumps[own.name] <= limit).mean())
    if not same and best in closing:
        return replace(told, result=OPEN, found=best.name, line=best.line,
                        words=f"it closes as {best.name}")  # fmt: skip
    if share >= MOST:
        return replace(told, result=OPEN, words=f"but for {len(nodes)} nodes")
    if not same and float((jumps[best.name] <= limit).mean()) >= MOST:
        return replace(told, result=OPEN, found=best.name, line=best.line,
                        words=f"most nodes close as {best.name}")  # fmt: skip
    return replace(told, result=OPEN, found=NEITHER, words=_ratio_words(seam, moving))


def _sides(sector: Sector, seam: Seam, case: LoadCase, values: dict[str, Numbers]) -> list[_Sides]:
    found = []
    plain = np.ones(len(sector.group))
    for f in sector.fields:
        if not primary(f):
            continue
        jump = jump_at(sector.mesh, sector.group, seam, f, case, values[f.name], plain)
        scale = scale_of(f, case, sector.cases)
        # Round-off beside the other cases says nothing of the load.
        found.append(_Sides(f, jump, scale if scale == largest_value(values[f.name]) else 0.0))
    return found


def _words(sector: Sector, seam: Seam, case: LoadCase, chi: Factors) -> list[_Word]:
    """The declared word, then the others that a plane can have; a turn has none beforehand."""
    if seam.kind == "lines and points":
        return []
    declared = complex(chi[seam.copy])
    several = bool(sector.case.case)
    if seam.kind == "cut plane":
        words = {1: "symmetric", -1: "antisymmetric"}
        sign = 1 if declared.real > 0 else -1
        lines = {}
        for s, word in words.items():
            if seam.plane is None:
                lines[s] = f"the load words and nodal_diameters must make this plane {word}"
            elif several:
                key = json.dumps(seam.plane, ensure_ascii=False)
                lines[s] = f'[[case]] {case.name!r}: load = {{ {key} = "{word}" }}'
            else:
                lines[s] = f'[[mirror]] {seam.plane!r}: load = "{word}"'
        return [_Word(words[s], complex(s), lines[s]) for s in (sign, -sign)]
    return [_Word(_wave_words(case.behaviour.nodal_diameters), declared, "")]


def _wave_words(h: int) -> str:
    return f"h = {h}"


def _wave(sector: Sector, seam: Seam, case: LoadCase, sides: list[_Sides], own: _Word) -> _Word:
    """The nodal diameters that fit best to the ratio of the two faces."""
    axis = sector.group.axis
    if axis is None or seam.copy not in (1, axis.sectors - 1):
        return own
    ratio = face_ratio(sides)
    steps = 1 if seam.copy == 1 else -1
    N = axis.sectors
    complex_fields = any(s.field.complex_values for s in sides)
    if not complex_fields and ratio.real < 0.0 and N % 2:
        return own  # opposite faces of an odd ring: no number of nodal diameters does that
    if complex_fields:
        h = round(float(steps * np.angle(ratio)) * N / (2 * np.pi))
    else:
        h = 0 if ratio.real >= 0.0 else N // 2
    factor = np.exp(2j * np.pi * steps * h / N)
    factor = complex(round(factor.real, 15), round(factor.imag, 15))
    where = f"[[case]] {case.name!r}" if sector.case.case else "[cyclic]"
    name, line = f"h = {h}", f"{where}: nodal_diameters = {h % N}"
    declared = case.behaviour.nodal_diameters
    if 0 < h <= N // 2 or h == 0:
        name = f"h = {h}" + (' with phase "+"' if complex_fields and 0 < 2 * h < N else "")
        line = f"{where}: nodal_diameters = {h}"
        if 0 < 2 * h < N:
            line += ', phase = "+"'
    else:
        name = f'h = {-h} with phase "-"'
        line = f'{where}: nodal_diameters = {-h}, phase = "-"'
    if abs(h) == declared and abs(factor - own.chi.conjugate()) < 1e-9 and abs(own.chi.imag) > 1e-9:
        name += ": conjugated"
    return _Word(name, factor, line)


def face_ratio(sides: list[_Sides]) -> complex:
    """Second face over turned first face, by least squares over the fields; nodes of the axis,
    which are their own partners, left out."""
    above, below = 0.0 + 0.0j, 0.0
    for s in sides:
        seam = s.plain.seam
        off = (seam.via == seam.copy) & (seam.nodes != seam.partners[:, 0])
        first, second = s.plain.other[off], s.plain.own[off]
        good = np.isfinite(first).all(axis=1) & np.isfinite(second).all(axis=1)
        above += complex(np.vdot(first[good], second[good])) / s.scale**2
        below += float(np.vdot(first[good], first[good]).real) / s.scale**2
    return above / below if below > 0.0 else 0.0 + 0.0j


def _ratio_words(seam: Seam, sides: list[_Sides]) -> str:
    if seam.kind == "cut plane":
        return "neither word closes it"
    ratio = face_ratio(sides)
    return (
        f"the second face is {abs(ratio):.4g} times the turned first one, at "
        f"{np.rad2deg(np.angle(ratio)):.4g} degrees, on average"
    )


def _by_slope(
    sector: Sector,
    near: Near,
    case: LoadCase,
    values: dict[str, Numbers],
    sides: list[_Sides],
    told: Found,
    own: _Word,
    best: _Word,
) -> Found:
    """Both words close since the values vanish on the seam: the slope across it decides."""
    scatter = sector.case.seam.scatter
    if _held(sector, near.seam):
        return replace(told, found=CLAMPED, words="the values vanish there under both words, as "
                       "declared (held = true)")  # fmt: skip
    slopes = {}
    for word in (own, best):
        chi = np.full(len(sector.group), word.chi if word.chi.imag else word.chi.real)
        found = [kink(near, s.field, case, values[s.field.name], chi, scatter) for s in sides]
        slopes[word.name] = [
            replace(v, result=OPEN) if v.result == CLOSED and (v.typical or 0.0) > TYPICAL else v
            for v in found
            if v is not None
        ]
    if not slopes[own.name]:
        return replace(told, result=TOLD, found=UNTOLD, words="the values vanish on the seam, and "
                        "no faces meet there whose slope could tell")  # fmt: skip
    mine, other = (worst_of([v.result for v in slopes[w.name]]) for w in (own, best))
    times = [max(v.times or 0.0 for v in slopes[w.name]) for w in (own, best)]
    told = replace(told, kink=times[0], alternative_kink=times[1])
    if mine == CLOSED:
        return replace(told, words="the values vanish there; the slope agrees")
    if DOUBTFUL in (mine, other):
        return replace(told, result=DOUBTFUL, found=UNTOLD, words="the values vanish there, and "
                       "the mesh is too coarse for the slope to tell")  # fmt: skip
    if other == CLOSED:
        return replace(told, result=OPEN, found=best.name, line=best.line,
                       words=f"the values vanish there; the slope says {best.name}")  # fmt: skip
    words = "the values vanish there under both words, the slope does not"
    line = (
        f"[[mirror]] {near.seam.plane!r}: held = true, if the body is really held along this plane"
    )
    return replace(told, result=OPEN, found=CLAMPED, words=words, line=line)


def _by_recovered(
    sector: Sector,
    near: Near,
    case: LoadCase,
    values: dict[str, Numbers],
    own: _Word,
    others: list[_Word],
) -> Found | None:
    """Without a field that must agree, the traction of a stress tells, as far as the mesh does."""
    stresses = [f for f in sector.fields if is_stress(f) and f.follows == "load"]
    if not stresses or not others:
        return None
    scatter = sector.case.seam.scatter
    times, results = {}, {}
    for word in (own, *others):
        chi = np.full(len(sector.group), word.chi.real)
        found = [recovered(near, f, case, values[f.name], chi, scatter) for f in stresses]
        known = [v for v in found if v is not None and v.times is not None]
        times[word.name] = max((v.times or 0.0 for v in known), default=0.0)
        results[word.name] = worst_of([v.result for v in known])
    best = min(others, key=lambda w: times[w.name])
    told = Found(
        near.seam.name, case.name, own.name, own.name, CLOSED, float("nan"), best.name,
        kink=times[own.name], alternative_kink=times[best.name],
        fields=tuple(f.name for f in stresses), words="told by the traction alone",
    )  # fmt: skip
    mine, other = results[own.name], results[best.name]
    if mine not in (CLOSED, OPEN) or other not in (CLOSED, OPEN):
        return replace(told, result=DOUBTFUL, found=UNTOLD, words="there is no displacement, and "
                       "no layer of cells beside the seam whose traction could tell")  # fmt: skip
    if mine == other == CLOSED:
        return replace(told, result=DOUBTFUL, found=UNTOLD, words="the traction closes under both "
                       "words, and there is no displacement that could tell")  # fmt: skip
    if mine == CLOSED:
        return told
    if other == CLOSED:
        return replace(told, result=OPEN, found=best.name, line=best.line)
    return replace(told, result=DOUBTFUL, found=UNTOLD)
