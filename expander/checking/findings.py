"""Findings: what a check has to say, each with its weight and the line that would help.

A finding *fails* the check where the data contradict the case, *doubts* where they cannot be told
from a mistake, and is a *note* where a reviewer should know.
"""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass

import numpy as np

from expander.audit.equilibrium import BALANCED, against_expected
from expander.audit.statics import CaseAudit, Total
from expander.audit.totals import Resultant
from expander.auditing import Audit
from expander.casefile import ExpectTable
from expander.checking.continuity import OPPOSITE, Continuity
from expander.checking.declared import CLAMPED, Found
from expander.checking.seamlist import Seam
from expander.checking.verdicts import DOUBTFUL, OPEN, TOLD, Verdict
from expander.errors import InputError
from expander.loadcases import Result, results_of
from expander.seams import MOST_OF_EDGE
from expander.sector import Sector
from expander.topology import local_edges

FAILS, DOUBTS, NOTE = "fails", "doubts", "note"
SAME_VOLUME = 1e-9  # carried around against integrated: round-off only
_GAP_SHOWN = 1e-3  # of a seam's area: less is the rim of a mesh


@dataclass(frozen=True)
class Finding:
    """One thing that was found.

    Attributes
    ----------
    weight : "fails", "doubts" or "note".
    about : what it is about: a seam, a field, the balance, the mass, ..
    words : one or two sentences. line : what would help, or "".
    """

    weight: str
    about: str
    words: str
    line: str = ""


def findings(continuity: Continuity, audit: Audit | None) -> list[Finding]:
    """Everything that a check found, the gravest first."""
    found = [f for s in continuity.seams for f in _of_seam(continuity.sector, s)]
    told = {(x.seam, x.case) for x in continuity.found if x.result == OPEN}
    apart = continuity.sector.case.seam.open == "keep apart"
    found += [f for x in continuity.found for f in _of_declared(x, apart)]
    found += [f for v in continuity.verdicts for f in _of_verdict(v, told, apart)]
    found += _of_near_misses(continuity.sector)
    found += _of_nothing(continuity)
    found += [
        Finding(
            NOTE,
            name,
            f"{count} values are not finite numbers; they were not compared, and "
            "count as zero in totals",
        )
        for name, count in continuity.sector.invalid_numbers.items()
    ]
    if audit is not None:
        found += list(_of_audit(continuity.sector, audit))
    order = (FAILS, DOUBTS, NOTE)
    return sorted(found, key=lambda f: order.index(f.weight))


def overall(found: list[Finding]) -> str:
    """ "failed", "doubtful" or "passed"."""
    weights = {f.weight for f in found}
    return "failed" if FAILS in weights else "doubtful" if DOUBTS in weights else "passed"


def _of_nothing(continuity: Continuity) -> Iterator[Finding]:
    """A case of which nothing was compared anywhere has not passed anything."""
    for c in continuity.cases:
        if not any(v.result != TOLD and v.scale > 0.0 for v in c.verdicts):
            yield Finding(DOUBTS, "seams", f"case {c.case.name!r}: nothing was compared at any "
                          "seam: no field with values there, or no copies that touch")  # fmt: skip
    for s in continuity.seams:
        if not s.touches or s.paired.all():
            continue
        names = [x.name for x in continuity.sector.fields if x.follows == "load"
                 and (x.on == "cells" or x.seam == "recovered") and x.kind != "label"]  # fmt: skip
        if names:
            yield Finding(DOUBTS, s.name, f"{', '.join(map(repr, names))} and the slope of the "
                          "others were not compared where the meshes differ",
                          "Look at both sides: --plot, --csv.")  # fmt: skip


def _of_seam(sector: Sector, seam: Seam) -> Iterator[Finding]:
    against = seam.against
    if against is None:
        return
    total = seam.measure + against.against_area + against.apart_area
    if against.against_area > _GAP_SHOWN * total:
        part = 100 * against.against_area / total
        yield Finding(
            DOUBTS if seam.measure else NOTE, seam.name,
            f"{part:.3g} % of the area lies against the copy with another mesh: fields that must "
            "agree are compared by interpolation there, and not merged",
            "Mesh both faces alike if the body is to be joined there.",
        )  # fmt: skip
    if against.apart_area > _GAP_SHOWN * total:
        gap, node = against.largest_gap
        edge = float(local_edges(sector.mesh, np.array([node]))[0])
        yield Finding(
            DOUBTS if gap < MOST_OF_EDGE * edge and not seam.measure else NOTE, seam.name,
            f"{100 * against.apart_area / total:.3g} % of the area stands off from the copy, by up "
            f"to {gap:.4g} (node {node}): a gap or a contact, not joined",
        )  # fmt: skip
    if not seam.touches:
        yield Finding(NOTE, seam.name, "the copies do not touch here: nothing to compare")


def _of_near_misses(sector: Sector) -> Iterator[Finding]:
    misses = sector.seams.near_misses
    if misses:
        node, distance = max(misses, key=lambda m: m[1])
        nodes = sorted({n for n, _ in misses})
        yield Finding(
            DOUBTS, "seam nodes",
            f"{len(nodes)} nodes lie close to a seam but outside the tolerance, the farthest "
            f"{distance:.3g} from its partner (node {node}): the body has a slit there",
            f"seam.tolerance = {1.05 * distance:.2g} joins them, if they are only inaccurate",
        )  # fmt: skip


def _of_declared(x: Found, apart: bool) -> Iterator[Finding]:
    if x.result not in (OPEN, DOUBTFUL):
        if x.found == CLAMPED:
            yield Finding(NOTE, x.seam, f"case {x.case!r}: {x.words}")
        return
    nodes = ""
    if x.nodes:
        more = ", .." if len(x.nodes) > 5 else ""
        nodes = (
            f"; worst at node{'s' * (len(x.nodes) > 1)} {', '.join(map(str, x.nodes[:5]))}{more}"
        )
    best = ""
    if x.alternative and np.isfinite(x.alternative_residual):
        best = f", as {x.alternative} {100 * x.alternative_residual:.3g} %"
    measured = f" ({100 * x.residual:.3g} %{best})" if np.isfinite(x.residual) else ""
    weight = FAILS if x.result == OPEN else DOUBTS
    if apart and not x.line:  # no word closes it: an open seam, as the case says
        weight = NOTE
    yield Finding(
        weight, x.seam,
        f"case {x.case!r} is declared {x.declared}, "
        + (f"and so it is found{measured}" if x.found == x.declared else
           f"found: {x.found}{measured}") + (f"; {x.words}" if x.words else "") + nodes,
        x.line,
    )  # fmt: skip


def _of_verdict(v: Verdict, told: set[tuple[str, str]], apart: bool) -> Iterator[Finding]:
    if v.result not in (OPEN, DOUBTFUL):
        return
    at = ", ".join(f"{c:.5g}" for c in v.position)
    size = (
        f"{v.times:.3g} times the scatter of the cells around"
        if v.times
        else f"{100 * v.relative:.3g} % of its largest value, limit {100 * v.limit:.3g} %"
    )
    what = {"value": "jumps", "traction": "has a jump in its traction", "flux": "jumps in its "
            "normal part", "kink": "has a kink"}[v.measure]  # fmt: skip
    words = f"case {v.case!r}: {v.field!r} {what} by {size}, at node {v.node} ({at})"
    if v.open_nodes > 1:
        words += f", {v.open_nodes} nodes in all"
    if v.words:
        words += f"; {v.words}"
    weight = FAILS if v.result == OPEN else DOUBTS
    if apart and v.result == OPEN and v.words != OPPOSITE:
        weight = DOUBTS if v.measure == "value" else NOTE
        words += (
            '; kept apart (seam.open = "keep apart"): as it should be only at a crack or contact'
        )
    elif (v.seam, v.case) in told:
        words += " (see the load of this seam)"
    yield Finding(weight, v.seam, words)


# --- the whole body -------------------------------------------------------------------------------


def _of_audit(sector: Sector, audit: Audit) -> Iterator[Finding]:
    for case in audit.cases:
        asked = [e for e in sector.case.expect if e.result in (None, case.case.name)]
        yield from _of_case(case, all(e.balance for e in asked), any(e.mode_shape for e in asked))
    for expect in sector.case.expect:
        yield from _of_expected(sector, audit, expect)
    carried, direct = audit.carried_mass, audit.body_mass
    # Merged nodes stand where the lowest copy puts them, rounded to the coordinates' precision.
    size = np.abs(sector.mesh.bounds).max() / sector.mesh.size if sector.mesh.size else 1.0
    rounding = 100.0 * float(np.finfo(sector.mesh.points.dtype).eps) * max(1.0, float(size))
    for name in ("volume", "area", "length"):
        a, b = getattr(carried, name), getattr(direct, name)
        if abs(a - b) > max(SAME_VOLUME, rounding) * max(abs(a), abs(b)):
            yield Finding(FAILS, "volume", f"the whole body's {name} is {b:.8g} by its own cells, "
                          f"{a:.8g} by carrying the sector's around")  # fmt: skip
    inverted = audit.sector_mass.inverted
    if len(inverted):
        shown = ", ".join(map(str, inverted[:5].tolist())) + (", .." if len(inverted) > 5 else "")
        yield Finding(DOUBTS, "cells", f"{len(inverted)} cells of the model are inside out or "
                      f"folded (cell {shown})", "Correct the mesh.")  # fmt: skip
    for piece in audit.pieces.loose:
        yield Finding(NOTE, "pieces", f"loose: {piece.words}")
    if audit.pieces.after > 1:
        yield Finding(NOTE, "pieces", f"the whole body has {audit.pieces.after} connected pieces; "
                      "ties and contacts that join them are not in the file")  # fmt: skip
    if audit.pieces.loose_nodes:
        yield Finding(NOTE, "pieces", f"{audit.pieces.loose_nodes} nodes belong to no cell")
    for overlap in audit.overlaps.found:
        yield Finding(FAILS, "overlap", overlap.words, "Check cyclic.sectors, axis and point, and "
                      "that each part lies on one side of the seam.")  # fmt: skip
    if audit.overlaps.sampled:
        yield Finding(NOTE, "overlap", audit.overlaps.sampled)


def _of_case(case: CaseAudit, balanced: bool, mode_shape: bool) -> Iterator[Finding]:
    name = f"case {case.case.name!r}"
    if case.balanced is not None and case.balanced[1].relative > BALANCED:
        fields, b = case.balanced
        ratio = "" if b.ratio is None else f": the loads are {b.ratio:.4g} times the reactions"
        share = ""
        if case.in_plane is not None and case.in_plane.fraction > 0.0:
            share = f". {case.in_plane.words}"
        reversed_ = b.ratio is not None and abs(b.ratio + 1.0) < 1e-3
        if reversed_:
            ratio = ": the reactions look like forces on the supports, with the sign turned round"
        yield Finding(
            (DOUBTS if reversed_ else FAILS) if balanced else NOTE, "balance",
            f"{name}: {' and '.join(fields)} do not balance in the whole body{ratio} (left over: "
            f"force {_vector(b.force)}, moment {_vector(b.moment)}, {100 * b.relative:.3g} % of "
            f"the loads){share}",
            "Give reactions as forces on the body." if reversed_ else
            "If loads such as gravity or pressure, or some reactions, are not in the file: "
            "expect.balance = false. Thermal loads have no resultant.",
        )  # fmt: skip
    elif case.balanced is None and case.totals:
        yield Finding(NOTE, "balance", f"{name}: not tried, {case.not_balanced}")
    if case.motions.count:
        words = f"{name}: the load behaviour leaves free {'; '.join(case.motions.words)}"
        if case.held is not None:
            work = [
                f"{w} {'is held by reactions' if abs(h) > 1e-6 else 'is held without force'}"
                for w, h in zip(case.motions.words, case.held.tolist(), strict=True)
            ]
            words = f"{name}: free by symmetry: {'; '.join(work)}"
        part = f"; {100 * case.share:.3g} % of the displacement is such a motion"
        yield Finding(NOTE, "rigid body", words + (part if case.share else ""))
    by_force = case.held is not None and bool((np.abs(case.held) > 1e-6).any())
    if case.share > 0.99 and case.motions.count and not by_force:
        yield Finding(
            DOUBTS, "rigid body",
            f"{name}: {100 * case.share:.4g} % of the displacement is a rigid-body motion of the "
            "whole body",
            "[re_reference] method = \"least squares\" takes it out.",
        )  # fmt: skip
    for m in case.magnitudes:
        if m.verdict != "plausible" and not mode_shape:
            unit = " rad" if m.field == "rotation" else ""
            yield Finding(
                FAILS if m.verdict == "absurd" else DOUBTS, "magnitude",
                f"{name}: the largest {m.field} is {m.largest:.4g}{unit} (node {m.node}), over "
                f"{m.limit:.4g}{unit}: "
                + ("a mechanism, or another unit" if m.verdict == "absurd"
                   else "too large for a linear analysis"),
                "expect.mode_shape = true, if it is a mode shape, whose size is free",
            )  # fmt: skip


def _vector(v: np.ndarray) -> str:
    return "(" + ", ".join(f"{c:.5g}" for c in np.asarray(v).tolist()) + ")"


def summed(
    audit: Audit, result: Result, fields: tuple[str, ...]
) -> tuple[Resultant, float, float] | None:
    """A total of the whole body in a result, cases added up, and the scales of force and moment.

    Parameters
    ----------
    fields : names of the fields of nodal forces that make up the total.
    """
    parts = []
    for k, a in result.terms:
        total = next((t for t in audit.cases[k].totals if t.fields == fields), None)
        if total is None:
            return None
        parts.append((a, total))
    first: Total = parts[0][1]
    added = Resultant(
        np.sum([a * t.body.force for a, t in parts], axis=0),
        np.sum([a * t.body.moment for a, t in parts], axis=0), first.body.about,
    )  # fmt: skip
    if result.real:
        added = Resultant(added.force.real, added.moment.real, added.about)
    force, moment = (sum(abs(a) * t.scale[i] for a, t in parts) for i in (0, 1))
    return added, force, moment


def _meant(sector: Sector, audit: Audit, expect: ExpectTable) -> Total | None:
    """The total that is compared: of the field named, else of the loads, else of the reactions."""
    totals = audit.cases[0].totals
    if expect.field is not None:
        found = next((t for t in totals if t.fields[0] == expect.field), None)
        if found is None:
            known = ", ".join(t.fields[0] for t in totals) or "none"
            raise InputError(
                f"expect.field = {expect.field!r} is no field of nodal forces, or is added to "
                "another.",
                f"Expected one of: {known}.",
            )
        return found
    for role in _LOADS:
        listed = [t for t in totals if t.role == role]
        if len(listed) == 1:
            return listed[0]
        if listed:
            names = ", ".join(t.fields[0] for t in listed)
            raise InputError(
                f"[expect]: several fields may be meant: {names}.", 'Add field = "..".'
            )
    return None


_LOADS = ("applied force", "nodal force", "reaction")


def _of_expected(sector: Sector, audit: Audit, expect: ExpectTable) -> Iterator[Finding]:
    """Totals that the user expects, in the results that they are meant for."""
    if expect.mass is not None:
        found = audit.carried_mass.mass
        off = abs(found - expect.mass)
        if off > expect.tolerance * expect.mass:
            times = found / expect.mass
            yield Finding(FAILS, "mass", f"the whole body has a mass of {found:.6g} (from "
                          f"{audit.mass_from}), expected {expect.mass:.6g}: {times:.5g} times",
                          "Check density, thickness, and masses in a cut plane, which the "
                          "modelled part has by half.")  # fmt: skip
        else:
            yield Finding(NOTE, "mass", f"mass {found:.6g} (from {audit.mass_from}), as expected")
    if expect.pieces is not None and expect.pieces != audit.pieces.after:
        yield Finding(FAILS, "pieces", f"the whole body has {audit.pieces.after} connected pieces, "
                      f"expected {expect.pieces}")  # fmt: skip
    if expect.force is None and expect.moment is None:
        return
    results = sector.results
    if expect.result is not None:  # also one that is not written, as a case beside sums
        every = {"output": sector.case.output.model_copy(update={"results": [expect.result]})}
        results = results_of(sector.case.model_copy(update=every), sector.cases)
    for result in results:
        if expect.result not in (None, result.name):
            continue
        yield from _of_expected_total(sector, audit, expect, result)


def _of_expected_total(
    sector: Sector, audit: Audit, expect: ExpectTable, result: Result
) -> Iterator[Finding]:
    meant = _meant(sector, audit, expect)
    if meant is None:
        yield Finding(FAILS, "expected", f"result {result.name!r}: there is no field of forces "
                      "to compare with what is expected",
                      'Declare one with seam = "sum".')  # fmt: skip
        return
    found = summed(audit, result, meant.fields)
    assert found is not None
    role = meant.role
    total, force_scale, moment_scale = found
    total = total.at(expect.about)
    sign = -1.0 if role == "reaction" and expect.field is None else 1.0
    source = f"{'minus the reactions' if sign < 0 else meant.fields[0]}, result {result.name!r}"
    both = (("force", expect.force, total.force, force_scale),
            ("moment", expect.moment, total.moment, moment_scale))  # fmt: skip
    for name, want, have, scale in both:
        if want is None:
            continue
        compared = against_expected(sign * have, want, expect.tolerance, sector.group, name, scale)
        yield Finding(NOTE if compared.ok else FAILS, "expected", f"{source}: {compared.words}")
