"""The summary of an expansion: plain data, for the table on the terminal and for JSON."""

from __future__ import annotations

from pathlib import Path
from typing import Any

import numpy as np

from expander.body import WholeBody
from expander.fields import Field
from expander.frames import Cylindrical
from expander.images import component_names, left_out_of
from expander.loadcases import Result, direction_words
from expander.quantities import sign_words

SCHEMA = 1

CAUTIONS = (
    "Geometry, material, supports, contact, preload, gravity and temperature must share the "
    "symmetry.",
    "Symmetric seam conditions hide antisymmetric buckling and vibration modes, and the reverse; "
    "a nonlinear response can break the symmetry.",
    "Half the thickness of a web in a cut plane is right for membrane action only; an "
    "antisymmetric load needs half the bending stiffness.",
    "Local codes and a licensed engineer decide.",
)


def summary(
    body: WholeBody,
    files: list[tuple[Result, Path, float | None]],
    index: Path | None,
    program: str,
) -> dict[str, Any]:
    """Everything a reviewer needs to follow what was done.

    Keys: schema, program, source, unit, copies, planes, axis, seams, points, cells, fields,
    results, notes, cautions; all values are plain data. Extended with new keys only; `schema`
    counts changes that are not extensions.
    """
    group, seams = body.group, body.seams
    points, cells = body.point_numbering, body.cell_numbering
    axis = group.axis
    return {
        "schema": SCHEMA,
        "program": f"seamfold {program}",
        "source": str(body.case.source or body.cases[0].model.source),
        "unit": body.case.model.unit,
        "time_factor": body.case.model.time_factor,
        "copies": [{"copy": g, "made": group.words(g)} for g in body.copies],
        "whole_body_copies": len(group),
        "planes": [
            {"name": p.name, "normal": p.normal.tolist(), "point": p.point.tolist()}
            for p in group.planes
        ],
        "axis": None
        if axis is None
        else {
            "sectors": axis.sectors, "axis": axis.axis.tolist(), "point": axis.point.tolist()
        },
        "cases": [
            {
                "name": c.name,
                "file": str(c.model.source),
                "behaviour": c.behaviour.words(),
                "factor": c.factor,
            }
            for c in body.cases
        ],
        "seams": [
            {"made": group.words(g), "nodes": pairs} for g, pairs in sorted(seams.pairs.items())
        ],
        "seam_nodes": len(seams.nodes.items),
        "worst_distance": seams.worst_distance,
        "worst_node": seams.worst_node,
        "tolerance": [t if np.isfinite(t) else None for t in seams.tolerance],
        "points": {
            "sector": body.mesh.point_count, "body": points.total, "merged": points.merged
        },
        "cells": {
            "sector": body.mesh.cell_count, "body": cells.total, "merged": cells.merged
        },
        "fields": [_field(body, f) for f in body.fields],
        "not_finite": body.invalid_numbers,
        "openings": [
            {"field": o.field, "case": o.case, "nodes": list(o.nodes), "jump": o.worst}
            for o in body.openings
        ],
        "results": [
            {
                "name": r.name,
                "terms": {body.cases[k].name: _plain(a) for k, a in r.terms},
                "file": str(file),
                "left_out": left_out_of(body, r, moment),
                "phase_degrees": moment,
                "wave": direction_words(r, body.cases) or None,
            }
            for r, file, moment in files
        ],
        "index": str(index) if index else None,
        "notes": list(body.notes),
        "cautions": list(CAUTIONS),
    }  # fmt: skip


def _plain(a: complex) -> float | list[float]:
    """A factor as JSON can hold it: a complex one as [re, im]."""
    return [a.real, a.imag] if np.iscomplexobj(a) else float(a.real)


def _field(body: WholeBody, f: Field) -> dict[str, Any]:
    return {
        "name": f.name,
        "on": f.on,
        "kind": f.kind,
        "decided": f.decided,
        "components": list(f.quantity.components),
        "shear": "engineering" if f.quantity.engineering else "tensor"
        if f.kind == "symmetric tensor" else None,
        "follows": f.follows if f.quantity.kind.response != "even" else "nothing"
        if f.follows == "load" else "body",
        "seam": f.seam,
        "frame": f.frame.name,
        "unit": f.unit,
        "changes_sign": {c.name: changed_signs(body, f, c.chi) for c in body.cases},
    }  # fmt: skip


def changed_signs(body: WholeBody, f: Field, chi: np.ndarray) -> dict[str, str]:
    """Components that change sign across each cut plane, with the load behaviour applied.

    "mixed" where the plane's normal is not along an axis and components are combined.
    """
    found = {}
    for plane in body.group.planes:
        copy = next(
            g for g, p in enumerate(body.group.placements)
            if np.abs(p.Q - plane.placement.Q).max() < 1e-9 and p.mirrored
        )  # fmt: skip
        Q = plane.placement.Q
        if isinstance(f.frame, Cylindrical):
            local = f.frame.local_action(plane.placement)
            if local is None:
                found[plane.name] = "mixed"
                continue
            Q = local
        A = f.quantity.matrix(Q)
        if chi[copy].real < 0 and f.follows == "load":
            A = f.quantity.odd @ A
        words = sign_words(f.quantity, A)
        names = component_names(f)
        if names and words not in ("mixed", "none", "sign"):
            flipped = [n for n, a in zip(names, np.diag(A), strict=True) if a < 0]
            words = " ".join(flipped)
        if f.kind == "principal values" and chi[copy].real < 0:
            words = "order and sign"
        found[plane.name] = words
    return found
