"""The report of a check as plain data, for the table on the terminal and for JSON.

Extended with new keys only; `schema` counts changes that are not extensions. Complex numbers are
pairs ``[re, im]``; what is not known is null.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any

import numpy as np

from expander.audit.mass import Properties
from expander.audit.section import Section
from expander.audit.statics import CaseAudit, Total
from expander.audit.totals import Resultant
from expander.auditing import Audit
from expander.casefile import section_names
from expander.checking.continuity import Continuity
from expander.checking.declared import Found
from expander.checking.findings import Finding, overall
from expander.checking.seamlist import Seam
from expander.checking.verdicts import Verdict, worst_of
from expander.sector import Sector
from expander.summary import CAUTIONS

SCHEMA = 1


@dataclass(frozen=True, eq=False)
class CheckUp:
    """Everything that `seamfold check` found.

    Attributes
    ----------
    audit : None if only the seams were looked at.
    """

    continuity: Continuity
    audit: Audit | None
    findings: tuple[Finding, ...]

    @property
    def verdict(self) -> str:
        """ "passed", "doubtful" or "failed"."""
        return overall(list(self.findings))


def report(check: CheckUp, program: str) -> dict[str, Any]:
    """The check as plain data.

    Keys: schema, program, source, verdict, limits, cases, seams, fields, loads, audit, findings,
    notes, cautions.
    """
    sector = check.continuity.sector
    return {
        "schema": SCHEMA,
        "program": f"seamfold {program}",
        "source": str(sector.case.source or sector.model.source),
        "verdict": check.verdict,
        "limits": {"value": sector.case.seam.limit, "scatter": sector.case.seam.scatter},
        "copies": len(sector.group),
        "nodes": sector.mesh.point_count,
        "cells": sector.mesh.cell_count,
        "cases": [
            {"name": c.case.name, "behaviour": c.case.behaviour.words(), "phase": c.phase or None}
            for c in check.continuity.cases
        ],
        "seams": [_seam(s) for s in check.continuity.seams],
        "fields": _fields(check.continuity),
        "loads": [_found(f) for f in check.continuity.found],
        "audit": None if check.audit is None else _audit(sector, check.audit),
        "findings": [
            {"weight": f.weight, "about": f.about, "words": f.words, "line": f.line or None}
            for f in check.findings
        ],
        "notes": list(sector.notes),
        "cautions": list(CAUTIONS),
    }


def plain(value: Any) -> Any:
    """Numbers and arrays as JSON can hold them.

    >>> plain(np.array([1.0, np.nan])), plain(2 + 1j)
    ([1.0, None], [2.0, 1.0])
    """
    if isinstance(value, np.ndarray | list | tuple):
        return [plain(v) for v in (value.tolist() if isinstance(value, np.ndarray) else value)]
    if isinstance(value, complex):
        return [plain(value.real), plain(value.imag)]
    if isinstance(value, float | np.floating):
        return float(value) if np.isfinite(value) else None
    if isinstance(value, np.integer):
        return int(value)
    return value


def _seam(s: Seam) -> dict[str, Any]:
    worst = int(np.argmax(s.distance)) if len(s.distance) else None
    return {
        "name": s.name,
        "kind": s.kind,
        "copy": s.copy,
        "nodes": len(np.unique(s.nodes)),
        "pairing": s.pairing,
        "area": s.measure,
        "area_other_mesh": None if s.against is None else s.against.against_area,
        "area_apart": None if s.against is None else s.against.apart_area,
        "worst_distance": None if worst is None else float(s.distance[worst]),
        "worst_node": None if worst is None else int(s.nodes[worst]),
    }


def _fields(continuity: Continuity) -> list[dict[str, Any]]:
    """One entry for each field of each case, with a measure for each seam."""
    found = []
    for case in continuity.cases:
        for name in dict.fromkeys(v.field for v in case.verdicts):
            verdicts = [v for v in case.verdicts if v.field == name]
            found.append(
                {
                    "field": name,
                    "case": case.case.name,
                    "verdict": worst_of([v.result for v in verdicts]),
                    "seams": [_verdict(v) for v in verdicts],
                }
            )
    return found


def _verdict(v: Verdict) -> dict[str, Any]:
    return {
        "seam": v.seam,
        "measure": v.measure,
        "verdict": v.result,
        "jump": plain(v.jump),
        "rms": plain(v.rms),
        "largest_value": plain(v.scale),
        "relative": plain(v.relative),
        "relative_rms": plain(v.relative_rms),
        "times_scatter": plain(v.times),
        "limit": v.limit,
        "components": plain_dict(v.components),
        "node": v.node if v.node >= 0 else None,
        "position": plain(v.position),
        "own": plain(v.own),
        "other": plain(v.other),
        "open_nodes": v.open_nodes,
        "worst_nodes": list(v.worst_nodes),
        "words": v.words or None,
    }


def plain_dict(values: dict[str, Any]) -> dict[str, Any]:
    return {k: plain(v) for k, v in values.items()}


def _found(f: Found) -> dict[str, Any]:
    return {
        "seam": f.seam,
        "case": f.case,
        "declared": f.declared,
        "found": f.found,
        "verdict": f.result,
        "residual": plain(f.residual),
        "best_other": f.alternative or None,
        "best_other_residual": plain(f.alternative_residual),
        "ratio": plain(f.ratio),
        "slope_times_scatter": plain(f.kink),
        "best_other_slope_times_scatter": plain(f.alternative_kink),
        "nodes": list(f.nodes[:20]),
        "fields": list(f.fields),
        "line": f.line or None,
        "words": f.words or None,
    }


def _audit(sector: Sector, audit: Audit) -> dict[str, Any]:
    return {
        "about": plain(audit.about),
        "cases": [_case(c) for c in audit.cases],
        "mass": {
            "from": audit.mass_from,
            "sector": _properties(audit.sector_mass),
            "whole": _properties(audit.carried_mass),
            "whole_by_cells": _properties(audit.body_mass),
        },
        "pieces": {
            "sector": audit.pieces.in_sector,
            "before": audit.pieces.before,
            "after": audit.pieces.after,
            "loose_nodes": audit.pieces.loose_nodes,
            "list": [
                {"nodes": p.nodes, "copies": list(p.copies), "times": p.times, "loose": p.loose,
                 "words": p.words}
                for p in audit.pieces.pieces
            ],
        },
        "overlaps": [
            {"copy": o.copy, "nodes": o.nodes, "node": o.node, "at": plain(o.at),
             "depth": plain(o.depth), "words": o.words}
            for o in audit.overlaps.found
        ],
        "sections": [
            {"name": name, "result": result, "stress": audit.section_stress,
             "force": plain(s.force), "moment": plain(s.moment),
             "about": plain(_about(sector, name, s)), "centroid": plain(s.centroid),
             "area": plain(s.area), "copies": list(s.copies)}
            for name, result, s in audit.sections
        ],
    }  # fmt: skip


def _about(sector: Sector, name: str, section: Section) -> Any:
    """The point that a section's moment is about: the one asked for, or the centroid."""
    table = sector.case.section[section_names(sector.case).index(name)]
    return section.centroid if table.about is None else table.about


def _resultant(r: Resultant) -> dict[str, Any]:
    return {"force": plain(r.force), "moment": plain(r.moment)}


def _total(t: Total) -> dict[str, Any]:
    return {
        "role": t.role,
        "fields": list(t.fields),
        "sector": _resultant(t.sector),
        "copies": [_resultant(r) for r in t.copies],
        "whole": _resultant(t.body),
        "sum_of_magnitudes": {"force": plain(t.scale[0]), "moment": plain(t.scale[1])},
        "supports": [
            {"name": s.name, "nodes": len(s.nodes), "sector": _resultant(own),
             "whole": _resultant(whole)}
            for s, own, whole in t.supports
        ],
    }  # fmt: skip


def _case(c: CaseAudit) -> dict[str, Any]:
    balance = None
    if c.balanced is not None:
        fields, b = c.balanced
        balance = {
            "fields": list(fields), "force": plain(b.force), "moment": plain(b.moment),
            "relative": plain(b.relative), "loads_over_reactions": plain(b.ratio),
            "at_seam_nodes": None if c.in_plane is None else c.in_plane.words,
        }  # fmt: skip
    return {
        "name": c.case.name,
        "vanish_by_symmetry": c.vanishing.words,
        "vanish_about": plain(c.vanishing.about),
        "totals": [_total(t) for t in c.totals],
        "balance": balance,
        "not_balanced": c.not_balanced or None,
        "rigid_motions": [
            {"words": w, "amount": plain(a), "reactions_work": plain(h)}
            for w, a, h in zip(
                c.motions.words, c.coefficients.tolist(),
                [None] * c.motions.count if c.held is None else c.held.tolist(), strict=True,
            )
        ],
        "rigid_share": plain(c.share),
        "magnitudes": [
            {"of": m.field, "largest": plain(m.largest), "node": m.node, "verdict": m.verdict}
            for m in c.magnitudes
        ],
    }  # fmt: skip


def _properties(p: Properties) -> dict[str, Any]:
    return {
        "volume": plain(p.volume), "area": plain(p.area), "length": plain(p.length),
        "mass": plain(p.mass), "centre": plain(p.centre), "inertia": plain(p.inertia),
        "inside_out": p.inverted[:20].tolist(),
    }  # fmt: skip
