"""The legend: title, captions, colour scale, and what the lines mean."""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np

from viewer.colours import (
    BORDER,
    INK,
    MISSING,
    OUTLINE,
    SOFT_INK,
    UNDEFORMED,
    Colour,
    Table,
    count_words,
    for_labels,
    number,
    power_of_ten,
    power_words,
    rising,
    scale_numbers,
    ticks,
    two_sided,
)
from viewer.layout import Arrangement, Sheet
from viewer.lettering import Pen
from viewer.scene import VALUE, Scene

if TYPE_CHECKING:
    import pyvista

MOST_BORDERED = 120  # copies; the borders of more would darken the body
_MOST_LABELS = 24
_SCALE_PART = 0.4  # of the width between the margins


@dataclass(frozen=True, eq=False)
class Scale:
    """The colour scale of a scene.

    Attributes
    ----------
    limits : values at the two ends.
    table : colours from one end to the other.
    labels : the values themselves where they only name something.
    """

    limits: tuple[float, float]
    table: Table
    labels: tuple[float, ...] = ()

    @property
    def continuous(self) -> bool:
        return not self.labels

    @staticmethod
    def of(scene: Scene) -> Scale:
        """Symmetric about zero for signed numbers; from zero for magnitudes."""
        if scene.shown is None or scene.span is None:
            return Scale((0.0, 1.0), rising())
        low, high = scene.span
        if scene.shown.is_label:
            data = scene.body.cell_data if VALUE in scene.body.cell_data else scene.body.point_data
            labels = np.unique(np.asarray(data[VALUE]))
            if len(labels) <= _MOST_LABELS:
                count = len(labels)
                return Scale((-0.5, count - 0.5), for_labels(count), tuple(labels.tolist()))
        measure = scene.shown.measure
        # A temperature is signed only if it is: 20 to 80 degrees need no middle
        if measure.signed and (measure.name or low < 0 < high):
            end = max(abs(low), abs(high)) or 1.0
            return Scale((-end, end), two_sided())
        if low >= 0.0 and measure.name:
            low = 0.0
        if not high > low:
            high = low + (abs(low) or 1.0)
        return Scale((low, high), rising())

    def prepared(self, mesh: pyvista.PolyData, name: str) -> pyvista.PolyData:
        """Labels as their place in the scale."""
        if self.labels:
            for data in (mesh.point_data, mesh.cell_data):
                if name in data:
                    data[name] = np.searchsorted(self.labels, np.asarray(data[name])).astype(float)
        return mesh

    def lookup_table(self, missing: tuple[int, int, int]) -> pyvista.LookupTable:
        import pyvista

        table = pyvista.LookupTable()
        opaque = np.full((len(self.table), 1), 255, dtype=np.uint8)
        table.values = np.hstack([self.table, opaque])
        table.scalar_range = self.limits
        table.nan_color = missing
        return table


def write_legend(
    pen: Pen, sheet: Sheet, scene: Scene, scale: Scale, arrangement: Arrangement
) -> None:
    """All text of a picture."""
    u, margin = sheet.unit, sheet.margin
    room = sheet.width - 2 * margin
    source = pen.fitted(scene.source, 14, 0.35 * room)
    pen.write((sheet.width - margin, 56 * u), source, 14, SOFT_INK, anchor="rs")
    title = pen.fitted(scene.title, 26, room - pen.width(source, 14) - 30 * u, bold=True)
    pen.write((margin, 56 * u), title, 26, bold=True, anchor="ls")
    for k, line in enumerate(pen.wrapped(scene.words, 15, room, 2)):
        pen.write((margin, (84 + 22 * k) * u), line, 15, SOFT_INK, anchor="ls")
    copies, whole = scene.copies
    body = "whole body" if copies == whole else f"{copies} of {whole} copies"
    for name, (middle, top) in zip(("modelled sector", body), arrangement.captions, strict=True):
        half = pen.width(name, 15) / 2
        at = min(max(middle, margin + half), sheet.width - margin - half)
        pen.write((at, sheet.drawing[0] + top), name, 15, INK, anchor="ma")
    if scene.shown is not None:
        _write_scale(pen, sheet, scene, scale)
    _write_lines(pen, sheet, scene)
    corner = (sheet.width - margin - 46 * u, sheet.height - 92 * u)
    ends = scene.view.flat(np.eye(3)).tolist()
    pen.directions(corner, 34 * u, [(right, up) for right, up in ends])


def _write_scale(pen: Pen, sheet: Sheet, scene: Scene, scale: Scale) -> None:
    assert scene.shown is not None
    u, left, bottom = sheet.unit, sheet.margin, sheet.height
    width, height = _SCALE_PART * (sheet.width - 2 * left), 14 * u
    low, high = scale.limits
    exponent = 0 if scale.labels else power_of_ten(max(abs(low), abs(high)))
    words = scene.shown.words(power_words(exponent))
    if scene.shown.field.on == "cells" and not scale.labels:
        words += "  one value for each cell"
    pen.write((left, bottom - 142 * u), pen.fitted(words, 16, width), 16, anchor="ls")
    top = bottom - 128 * u
    if scale.labels:
        _write_labels(pen, (left, top), width, height, scale)
        return
    pen.ramp(left, top, width, height, scale.table)
    places = ticks(low, high)
    for value, text in zip(places, scale_numbers(places, exponent), strict=True):
        x = left + (value - low) / (high - low) * width
        pen.line((x, top + height + 2 * u), (x, top + height + 7 * u), 1.0, SOFT_INK)
        half = pen.width(text, 13) / 2
        at = min(max(x, left + half), left + width - half)
        pen.write((at, top + height + 10 * u), text, 13, anchor="ma")
    if scene.span is None:
        found = "no values"
    else:
        # Beside the other end, round-off is zero
        least = 1e-9 * max(abs(v) for v in scene.span)
        ends = [number(v / 10.0**exponent if abs(v) > least else 0.0) for v in scene.span]
        found = f"smallest {ends[0]}, largest {ends[1]}"
    pen.write((left, bottom - 56 * u), found, 13, SOFT_INK, anchor="ls")
    if scene.missing:
        x = left + pen.width(found, 13) + 28 * u
        pen.patch(x, bottom - 67 * u, 16 * u, 11 * u, MISSING)
        pen.write((x + 24 * u, bottom - 56 * u), "no value", 13, SOFT_INK, anchor="ls")


def _write_labels(
    pen: Pen, at: tuple[float, float], width: float, height: float, scale: Scale
) -> None:
    """A patch for each label, as many as there is room for."""
    x, top = at
    for value, colour in zip(scale.labels, scale.table, strict=True):
        text = f"{value:g}"
        need = height * 1.4 + pen.width(text, 13) + 3.2 * height
        if x + need > at[0] + width:
            pen.write((x, top + height), "…", 13, anchor="ls")
            return
        pen.patch(x, top, height * 1.4, height, (int(colour[0]), int(colour[1]), int(colour[2])))
        pen.write((x + 2.0 * height, top + height * 0.9), text, 13, anchor="ls")
        x += need - height * 0.6


def _write_lines(pen: Pen, sheet: Sheet, scene: Scene) -> None:
    """What the lines mean, the deformation, and how much there is."""
    u, bottom = sheet.unit, sheet.height
    # In a small picture the words need more room than the scale
    part = _SCALE_PART + (0.1 if sheet.width > 1000 else 0.02)
    left = sheet.margin + part * (sheet.width - 2 * sheet.margin)
    room = sheet.width - sheet.margin - 92 * u - left
    copies, whole = scene.copies
    of = "" if copies == whole else f" of {whole}"
    count = f"{copies}{of} {'copy' if copies == 1 else 'copies'}"
    rows: list[tuple[Colour | None, float, str]] = [
        (OUTLINE, 2.6, f"{count}, modelled sector outlined")
        if scene.outlined
        else (None, 0.0, f"{count}, without the modelled sector")
    ]
    if 1 < copies <= MOST_BORDERED:
        rows.append((BORDER, 0.8, "where copies meet"))
    if scene.largest is not None:
        if scene.factor:
            factor = number(scene.factor)
            rows.append((UNDEFORMED, 1.2, f"undeformed outline, deformation × {factor}"))
        else:
            rows.append((None, 0.0, "drawn undeformed"))
        words = (number(scene.largest[0]), scene.largest[1])
        longest = " ".join(w for w in words if w)
        rows.append((None, 0.0, f"largest displacement {longest}"))
    nodes, cells = scene.body.n_points, scene.body.n_cells
    rows.append((None, 0.0, f"{count_words(nodes)} nodes, {count_words(cells)} cells"))
    for k, (colour, thick, text) in enumerate(rows):
        y = bottom - (142 - 23 * k) * u
        if colour is not None:
            pen.line((left, y - 5 * u), (left + 26 * u, y - 5 * u), thick, colour)
        pen.write((left + 38 * u, y), pen.fitted(text, 13, room - 38 * u), 13, anchor="ls")
