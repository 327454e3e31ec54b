"""Lettering: text, the colour scale and the legend on the sheet."""

from __future__ import annotations

from collections.abc import Sequence
from functools import lru_cache
from importlib.util import find_spec
from pathlib import Path

import numpy as np
from PIL import Image, ImageDraw, ImageFont

from viewer.colours import INK, PAPER, SOFT_INK, Colour, Table

Font = ImageFont.FreeTypeFont | ImageFont.ImageFont

_ELLIPSIS = "…"


@lru_cache(maxsize=32)
def _font(size: int, bold: bool) -> Font:
    """DejaVu Sans, which comes with the plotting library under pyvista and has the signs of units
    and powers; Pillow's own font if it is not there."""
    spec = find_spec("matplotlib")
    if spec is not None and spec.origin is not None:
        folder = Path(spec.origin).parent / "mpl-data" / "fonts" / "ttf"
        file = folder / ("DejaVuSans-Bold.ttf" if bold else "DejaVuSans.ttf")
        if file.is_file():
            return ImageFont.truetype(str(file), size)
    return ImageFont.load_default(size)


class Pen:
    """Writes on a sheet; places are in pixels, sizes of letters in units.

    Parameters
    ----------
    unit : pixels of one unit.
    """

    def __init__(self, sheet: Image.Image, unit: float) -> None:
        self.sheet, self.unit = sheet, unit
        self._draw = ImageDraw.Draw(sheet)

    def _letters(self, size: float, bold: bool) -> Font:
        return _font(max(9, round(size * self.unit)), bold)

    def width(self, text: str, size: float, bold: bool = False) -> float:
        """Pixels that a line of text takes."""
        return float(self._letters(size, bold).getlength(text))

    def fitted(self, text: str, size: float, room: float, bold: bool = False) -> str:
        """The text, shortened in its middle if it is longer than `room` pixels."""
        if self.width(text, size, bold) <= room:
            return text
        for kept in range(len(text) - 1, 0, -1):
            head = (kept + 1) // 2
            short = text[:head].rstrip() + _ELLIPSIS + text[len(text) - (kept - head) :].lstrip()
            if self.width(short, size, bold) <= room:
                return short
        return _ELLIPSIS

    def wrapped(self, text: str, size: float, room: float, most: int) -> list[str]:
        """Lines of at most `room` pixels, at most so many; the last one is shortened."""
        found: list[str] = []
        words = text.split(" ")
        while words:
            if len(found) == most - 1:
                return [*found, self.fitted(" ".join(words), size, room)]
            count = len(words)
            while count > 1 and self.width(" ".join(words[:count]), size) > room:
                count -= 1
            found.append(self.fitted(" ".join(words[:count]), size, room))
            words = words[count:]
        return found

    def write(
        self, at: tuple[float, float], text: str, size: float, colour: Colour = INK,
        bold: bool = False, anchor: str = "la",
    ) -> None:  # fmt: skip
        """A line of text; `anchor` as Pillow has it: l, m, r across, a (top), m, s (baseline)."""
        self._draw.text(at, text, fill=colour, font=self._letters(size, bold), anchor=anchor)

    def line(
        self, a: tuple[float, float], b: tuple[float, float], width: float, colour: Colour
    ) -> None:
        """A straight line, `width` in units."""
        self._draw.line([a, b], fill=colour, width=max(1, round(width * self.unit)))

    def patch(self, left: float, top: float, width: float, height: float, colour: Colour) -> None:
        """A filled rectangle, in pixels."""
        self._draw.rectangle([left, top, left + width, top + height], fill=colour)

    def ramp(self, left: float, top: float, width: float, height: float, table: Table) -> None:
        """The colours of a table from left to right, in pixels."""
        count = max(1, round(width))
        row = table[np.minimum(np.arange(count) * len(table) // count, len(table) - 1)]
        block = np.repeat(row[None], max(1, round(height)), axis=0)
        self.sheet.paste(Image.fromarray(np.ascontiguousarray(block)), (round(left), round(top)))

    def directions(
        self, middle: tuple[float, float], length: float, ends: Sequence[tuple[float, float]]
    ) -> None:
        """x, y and z as three strokes in one colour; `ends` in parts of `length`, y upwards.

        A direction that points at the eye is a dot.
        """
        for name, (right, up) in zip("xyz", ends, strict=True):
            long = float(np.hypot(right, up))
            tip = (middle[0] + right * length, middle[1] - up * length)
            if long > 0.12:
                self.line(middle, tip, 1.4, SOFT_INK)
            off = 11.0 * self.unit
            way = (right / long, up / long) if long > 0.12 else (0.7, 0.7)
            at = (tip[0] + way[0] * off, tip[1] - way[1] * off)
            self.write(at, name, 13, SOFT_INK, anchor="mm")
        radius = 1.8 * self.unit
        x, y = middle
        self._draw.ellipse([x - radius, y - radius, x + radius, y + radius], fill=SOFT_INK)


def blank(width: int, height: int) -> Image.Image:
    """An empty sheet."""
    return Image.new("RGB", (width, height), PAPER)
