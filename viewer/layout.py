"""Layout: where sector and body lie on the sheet, both at one scale, text never across them."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from expander.placements import Floats
from viewer.views import View

Box = tuple[float, float, float, float]  # left, top, right, bottom in pixels


@dataclass(frozen=True)
class Sheet:
    """Places on a picture of `width` x `height` pixels; lengths of text and bars in `unit`s.

    Attributes
    ----------
    unit : pixels of one unit; 1 at 1600 x 900.
    """

    width: int
    height: int

    @property
    def unit(self) -> float:
        # Small pictures keep text that can be read, and give up room for the body instead.
        return max(0.56, min(self.width / 1600.0, self.height / 900.0))

    @property
    def margin(self) -> float:
        return 44.0 * self.unit

    @property
    def drawing(self) -> tuple[int, int]:
        """First and last row of pixels of the strip in which the bodies lie."""
        return round(132.0 * self.unit), round(self.height - 188.0 * self.unit)


@dataclass(frozen=True, eq=False)
class Arrangement:
    """Sector and body in the strip.

    Attributes
    ----------
    scale : pixels for each unit of the model's length.
    sector, body : boxes in pixels of the strip that their projections fill.
    shift : (3,) from the sector's own place to where it is drawn.
    focus : (3,) point that lies in the middle of the strip.
    captions : middle and top of the two captions, in pixels of the strip.
    """

    scale: float
    sector: Box
    body: Box
    shift: Floats
    focus: Floats
    captions: tuple[tuple[float, float], tuple[float, float]]


def arrange(
    sector: Floats, body: Floats, view: View, size: tuple[int, int], unit: float
) -> Arrangement:
    """Side by side, or one above the other where that is clearly larger.

    Parameters
    ----------
    sector, body : all points that are drawn, deformed and undeformed, (n, 3).
    size : width and height of the strip in pixels.
    """
    flat_sector, flat_body = view.flat(sector), view.flat(body)
    (w1, h1), (w2, h2) = (_extent(f) for f in (flat_sector, flat_body))
    margin, gap, caption = 44.0 * unit, 90.0 * unit, 40.0 * unit
    width, height = size[0] - 2.0 * margin, float(size[1])
    tiny = 1e-12 * max(w2, h2, 1e-300)
    beside = min((width - gap) / max(w1 + w2, tiny), (height - caption) / max(h1, h2, tiny))
    above = min(width / max(w1, w2, tiny), (height - 2 * caption - gap / 3) / max(h1 + h2, tiny))
    if above > 1.25 * beside:
        scale = above
        spare = height - 2 * caption - (h1 + h2) * scale
        left1, left2 = (size[0] - w1 * scale) / 2, (size[0] - w2 * scale) / 2
        top1 = spare / 3
        top2 = top1 + h1 * scale + caption + spare / 3
        under = (top1 + h1 * scale, top2 + h2 * scale)
    else:
        scale = beside
        # The spare width goes in equal parts left, between and right
        spare = max(width - gap - (w1 + w2) * scale, 0.0) / 3
        left1 = margin + spare
        left2 = left1 + w1 * scale + gap + spare
        rest = height - caption
        top1, top2 = (rest - h1 * scale) / 2, (rest - h2 * scale) / 2
        bottom = max(top1 + h1 * scale, top2 + h2 * scale)
        under = (bottom, bottom)
    box1 = (left1, top1, left1 + w1 * scale, top1 + h1 * scale)
    box2 = (left2, top2, left2 + w2 * scale, top2 + h2 * scale)
    middle = np.array([size[0] / 2, size[1] / 2])
    # Where the middle of the strip lies in the picture plane of the body
    centre = _middle(flat_body) - _from_middle(box2, middle) / scale
    moved = centre + _from_middle(box1, middle) / scale - _middle(flat_sector)
    axes = np.stack([view.right, view.up])
    depth = float(body.mean(axis=0) @ view.towards) if len(body) else 0.0
    return Arrangement(
        scale=scale,
        sector=box1,
        body=box2,
        shift=moved @ axes,
        focus=centre @ axes + depth * view.towards,
        captions=(
            ((box1[0] + box1[2]) / 2, under[0] + 12 * unit),
            ((box2[0] + box2[2]) / 2, under[1] + 12 * unit),
        ),
    )


def _extent(flat: Floats) -> tuple[float, float]:
    width, height = np.ptp(flat, axis=0)
    return float(width), float(height)


def _middle(flat: Floats) -> Floats:
    return np.asarray((flat.min(axis=0) + flat.max(axis=0)) / 2.0)


def _from_middle(box: Box, middle: Floats) -> Floats:
    """From the middle of the strip to that of a box, upwards positive."""
    at = np.array([(box[0] + box[2]) / 2, (box[1] + box[3]) / 2])
    return (at - middle) * [1.0, -1.0]
