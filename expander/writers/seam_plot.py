"""A picture of both sides of a field along a seam, and of the jump between them, as PNG.

The modelled side is a filled disc on a full line, the copy's side a hollow square on a broken line,
so that they differ without colour; the colours are those of M. Okabe and K. Ito, which keep apart
for every kind of colour vision.
"""

from __future__ import annotations

import io
from dataclasses import dataclass
from functools import lru_cache
from typing import TYPE_CHECKING, Any

import numpy as np
from numpy.typing import NDArray

from expander.checking.along import Line, allowed_jump, along, field_jump, scale_of_jump
from expander.checking.continuity import Continuity
from expander.checking.jumps import Jump
from expander.checking.seamlist import Seam
from expander.errors import InputError
from expander.placements import Floats
from expander.writers.seam_tables import known_difference

if TYPE_CHECKING:
    from matplotlib.axes import Axes
    from matplotlib.figure import Figure

OWN, COPY, JUMP, ALLOWED, ERROR = "#0072b2", "#d55e00", "#262a30", "#009e73", "#c4c9d0"
_INK, _SOFT, _GRID = "#262a30", "#5c636c", "#e3e5e8"
_FONT = "DejaVu Sans"  # comes with the plotting library
_ROUND_OFF = (
    1e-6  # of the field's largest value: axes show no less, or round-off looks like a field
)
_SMALLEST, _LARGEST = 320, 8000  # pixels
_LEFT = 0.085  # of the width
LENGTH = "length"


@dataclass(frozen=True, eq=False)
class _Curves:
    """What is drawn, each (k,) along the line, NaN between pieces.

    Attributes
    ----------
    sides : values of both sides by the words of the axis ("" or "real part", "imaginary part").
    jump : signed, or a length where `signed` is false.
    allowance : what interpolation may be wrong by.
    """

    line: Line
    nodes: NDArray[np.int64]
    sides: dict[str, tuple[Floats, Floats]]
    jump: Floats
    signed: bool
    allowance: Floats


def plot(
    continuity: Continuity,
    seam: Seam,
    field: str,
    case: str,
    component: str | None = None,
    by: str = "auto",
    size: tuple[int, int] = (1600, 900),
) -> bytes:
    """Both sides of a field along a seam above, the jump below, as the bytes of a PNG file.

    The band is what a field that must agree may jump by, `seam.limit` times its largest value;
    values recovered from cells have none. The worst node is marked.

    Parameters
    ----------
    field, case : names.
    component : a component's name in global directions, or "length" (over all components; default
        if there are several). Complex components are drawn as real and imaginary part.
    by : the order, see `expander.checking.along.along`.
    size : width and height in pixels.

    Raises
    ------
    InputError
        For an unknown name, component or order, or a size that cannot be drawn.
    """
    if not all(_SMALLEST <= s <= _LARGEST for s in size):
        raise InputError(f"A plot of {size[0]} x {size[1]} pixels cannot be drawn.",
                         f"Expected {_SMALLEST} to {_LARGEST} pixels each way.")  # fmt: skip
    line = along(seam, continuity.sector.mesh, continuity.sector.group, by)
    jump = field_jump(continuity, seam, field, case)
    component = _component(jump, component)
    curves = _curves(line, jump, component)
    scale, allowed = scale_of_jump(continuity, jump), allowed_jump(continuity, jump)
    name = field if jump.quantity.size == 1 else f"{field}, {component}"
    if component == LENGTH and jump.quantity.kind.rank != 1:
        name += " over all components"
    figure = _figure(size, len(curves.sides) + 1)
    title = [name, f"case {case}" if len(continuity.cases) > 1 else "", seam.name]
    figure.text(_LEFT, 0.945, drawable("   ·   ".join(t for t in title if t)), fontsize=19,
                weight="bold", **_words())  # fmt: skip
    figure.text(_LEFT, 0.905, drawable(_summary(curves, seam, scale, allowed), 170), fontsize=13,
                **{**_words(), "color": _SOFT})  # fmt: skip
    unit = f" ({jump.field.unit})" if jump.field.unit else ""
    for axes, (words, (own, other)) in zip(figure.axes, curves.sides.items(), strict=False):
        _both(axes, curves, own, other, scale)
        _label(axes, (words or drawable(name, 36)) + unit)
    _jump(figure.axes[-1], curves, scale, allowed)
    _label(figure.axes[-1], ("jump" if curves.signed else "jump, length") + unit)
    length = continuity.sector.case.model.unit
    figure.axes[-1].set_xlabel(
        drawable(line.label + (f" ({length})" if length else "")),
        fontsize=14,
        labelpad=8,
        **_words(),
    )
    return _png(figure)


def _component(jump: Jump, component: str | None) -> str:
    names = [*jump.components, *([LENGTH] if jump.quantity.size > 1 else [])]
    if component is None:
        return LENGTH if LENGTH in names else names[0]
    if component not in names:
        raise InputError(f"Field {jump.field.name!r} has no component {component!r}.",
                         "Expected one of: " + ", ".join(names) + ".")  # fmt: skip
    return component


def _curves(line: Line, jump: Jump, component: str) -> _Curves:
    def taken(values: NDArray[Any]) -> NDArray[Any]:
        out = values[line.rows].astype(np.result_type(values, float))
        out[line.rows < 0] = np.nan
        return out

    difference = known_difference(jump)
    if component == LENGTH:
        own, other, size = (np.linalg.norm(v, axis=1) for v in (jump.own, jump.other, difference))
        sides = {"": (taken(own), taken(other))}
        found, signed = taken(size), False
    else:
        k = jump.components.index(component)
        own, other, apart = (taken(v[:, k]) for v in (jump.own, jump.other, difference))
        if any(np.iscomplexobj(v) for v in (own, other)):
            sides = {"real part": (own.real, other.real), "imaginary part": (own.imag, other.imag)}
            found, signed = np.abs(apart), False
        else:
            sides = {"": (own, other)}
            found, signed = apart, True
    nodes = np.where(line.rows < 0, -1, jump.seam.nodes[line.rows])
    return _Curves(line, nodes, sides, found, signed, taken(jump.allowance))


def _worst(curves: _Curves) -> int | None:
    """Entry of the largest jump that is shown; None if there is no number at all."""
    size = np.where(np.isfinite(curves.jump), np.abs(curves.jump), -1.0)
    worst = int(np.argmax(size))
    return worst if size[worst] >= 0.0 else None


def _summary(curves: _Curves, seam: Seam, scale: float, allowed: float | None) -> str:
    worst = _worst(curves)
    if worst is None:
        return "no finite values here"
    largest = abs(float(curves.jump[worst]))
    words = "both sides are equal"
    if largest > 0.0:
        words = f"largest jump {largest:.3g} at node {curves.nodes[worst]}"
    if largest > 0.0 and scale > 0.0:
        words += f", {largest / scale:.2g} of the field's largest value {scale:.4g}"
        words += f" (allowed {allowed / scale:.2g})" if allowed else ""
    count = len(np.unique(curves.line.rows[curves.line.rows >= 0]))
    nodes = f"{count} of {len(seam.nodes)}" if count < len(seam.nodes) else f"{count}"
    words += f"   ·   {nodes} nodes, {seam.pairing}"
    unknown = int((~np.isfinite(curves.jump[curves.line.rows >= 0])).sum())
    return words + (f"   ·   {unknown} not finite" if unknown else "")


def _figure(size: tuple[int, int], panels: int) -> Figure:
    from matplotlib.backends.backend_agg import FigureCanvasAgg
    from matplotlib.figure import Figure

    dpi = 100.0 * min(size[0] / 1600.0, size[1] / 900.0)
    # Half a pixel more: the canvas cuts off what is left of the division.
    figure = Figure(figsize=((size[0] + 0.5) / dpi, (size[1] + 0.5) / dpi), dpi=dpi,
                    facecolor="white", edgecolor="white", frameon=True)  # fmt: skip
    FigureCanvasAgg(figure)
    figure.subplots(
        panels, 1, sharex=True,
        gridspec_kw={"left": _LEFT, "right": 0.975, "bottom": 0.09, "top": 0.845,
                     "hspace": 0.14 if panels == 2 else 0.24,
                     "height_ratios": [1.45 if panels == 2 else 1.0] * (panels - 1) + [1.0]},
    )  # fmt: skip
    for axes in figure.axes:
        axes.set_facecolor("white")
        axes.grid(True, color=_GRID, linewidth=0.8, linestyle="-")
        axes.set_axisbelow(True)
        for side, spine in axes.spines.items():
            spine.set_visible(side in ("left", "bottom"))
            spine.set_color(_SOFT)
        last = axes is figure.axes[-1]
        axes.tick_params(labelsize=12.5, colors=_SOFT, labelcolor=_INK, labelfontfamily=_FONT,
                         labelbottom=last)  # fmt: skip
        axes.ticklabel_format(style="sci", scilimits=(-2, 4), useOffset=False, useMathText=True)
        axes.ticklabel_format(axis="x", scilimits=(-3, 5))
        for offset in (axes.xaxis.get_offset_text(), axes.yaxis.get_offset_text()):
            offset.set(fontsize=12, color=_SOFT, family=_FONT)
        if not last:
            axes.xaxis.get_offset_text().set_visible(False)
        axes.margins(x=0.02, y=0.12)
    return figure


def _both(axes: Axes, curves: _Curves, own: Floats, other: Floats, scale: float) -> None:
    x, connected = curves.line.position, curves.line.connected
    many = int((curves.line.rows >= 0).sum())
    mark = float(np.clip(70.0 / np.sqrt(max(many, 1)), 2.4, 7.0))
    # The broken line goes over the full one, but discs over squares: of many points both are seen.
    for values, words, colour, style, marker, face, bigger, above in (
        (own, "modelled side", OWN, "-", "o", OWN, 0.0, 2.2 if connected else 2.6),
        (other, "copy's side", COPY, (0, (5, 3)), "s", "none", 3.2, 2.4),
    ):
        axes.plot(
            x, values, label=words, color=colour, marker=marker, markersize=mark + bigger,
            linestyle=style if connected else "none", linewidth=1.8, markerfacecolor=face,
            markeredgecolor=colour, markeredgewidth=1.3 if bigger else 0.0, zorder=above,
        )  # fmt: skip
    if axes is axes.figure.axes[0]:
        axes.legend(loc="lower right", bbox_to_anchor=(1.0, 1.0), ncols=2, frameon=False,
                    borderaxespad=0.2, labelcolor=_INK, numpoints=1 if not connected else 2,
                    handlelength=3.0, markerscale=max(1.0, 4.5 / mark),
                    prop={"family": _FONT, "size": 13.5})  # fmt: skip
    _at_least(axes, np.concatenate([own, other]), scale)
    worst = _worst(curves)
    if worst is not None and curves.jump[worst]:
        axes.axvline(x[worst], color=_SOFT, linewidth=1.0, linestyle=":", zorder=0.9)


def _jump(axes: Axes, curves: _Curves, scale: float, allowed: float | None) -> None:
    x, jump, signed = curves.line.position, curves.jump, curves.signed
    many = int((curves.line.rows >= 0).sum())
    if allowed:
        low = -allowed if signed else 0.0
        words = f"allowed: {'±' if signed else 'up to '}{allowed:.3g}"
        axes.axhspan(
            low, allowed, facecolor=ALLOWED, alpha=0.16, linewidth=0.0, zorder=0.5, label=words
        )
        for edge in {low, allowed} - {0.0}:
            axes.axhline(edge, color=ALLOWED, linewidth=1.2, linestyle=(0, (6, 3)), zorder=0.6)
    error = float(np.nanmax(curves.allowance, initial=0.0))
    if error > 0.0:
        axes.vlines(
            x, -curves.allowance if signed else 0.0, curves.allowance, color=ERROR,
            linewidth=3.0, zorder=0.7, label="interpolation error, estimate",
        )  # fmt: skip
    axes.axhline(0.0, color=_SOFT, linewidth=0.9, zorder=0.8)
    axes.plot(
        x, jump, color=JUMP, linestyle="-" if curves.line.connected else "none", linewidth=1.5,
        marker="o", markersize=float(np.clip(50.0 / np.sqrt(max(many, 1)), 2.4, 5.0)),
        markeredgewidth=0.0,
        label="modelled side − copy's side" if signed else "length of the difference",
    )  # fmt: skip
    axes.legend(
        loc="lower right", bbox_to_anchor=(1.0, 1.0), ncols=3, frameon=False, borderaxespad=0.1,
        labelcolor=_INK, handlelength=2.0, prop={"family": _FONT, "size": 12},
    )  # fmt: skip
    most = max(allowed or 0.0, error)
    edges = [most, -most if signed else 0.0]
    _at_least(axes, np.concatenate([jump, edges]), 0.0 if allowed else scale, signed)
    worst = _worst(curves)
    if worst is not None and jump[worst]:
        _mark(axes, float(x[worst]), float(jump[worst]), f"worst: node {curves.nodes[worst]}")


def _mark(axes: Axes, x: float, y: float, words: str) -> None:
    """A ring around a point, and words beside it where there is more room."""
    axes.axvline(x, color=_SOFT, linewidth=1.0, linestyle=":", zorder=0.9)
    axes.plot(
        x, y, marker="o", markersize=13, markerfacecolor="none", markeredgecolor=_INK,
        markeredgewidth=1.8, linestyle="none", zorder=4,
    )  # fmt: skip
    late = x > sum(axes.get_xlim()) / 2.0
    paper = {"boxstyle": "round,pad=0.25", "facecolor": "white", "edgecolor": "none", "alpha": 0.85}
    axes.annotate(
        words, (x, y), xytext=(-14 if late else 14, 10 if y >= 0.0 else -10),
        textcoords="offset points", fontsize=13, zorder=5, ha="right" if late else "left",
        va="center", bbox=paper, **_words(),
    )  # fmt: skip


def _at_least(axes: Axes, values: Floats, scale: float, signed: bool = True) -> None:
    """Limits of the upright axis that hold all finite values and are no narrower than round-off."""
    finite = values[np.isfinite(values)]
    low, high = (float(finite.min()), float(finite.max())) if len(finite) else (0.0, 0.0)
    least = _ROUND_OFF * scale or 1e-9 * max(abs(low), abs(high)) or 1.0
    wide = max(high - low, least)
    middle = 0.5 * (low + high)
    if signed:
        axes.set_ylim(middle - 0.62 * wide, middle + 0.62 * wide)
    else:
        axes.set_ylim(-0.06 * wide, low + 1.18 * wide)


def _label(axes: Axes, words: str) -> None:
    axes.set_ylabel(drawable(words), fontsize=14, labelpad=10, **_words())
    axes.yaxis.set_label_coords(-0.056, 0.5)


def _words() -> dict[str, Any]:
    """How text is set; names are never read as formulas, whatever signs they hold."""
    return {"family": _FONT, "color": _INK, "parse_math": False, "usetex": False}


def drawable(text: str, most: int = 110) -> str:
    """Text that the font can draw on one line: other signs become a mark, long text is shortened.

    >>> drawable("a\\nb"), drawable("x" * 9, most=5)
    ('a b', 'xxxx…')
    """
    line = "".join(c if c.isprintable() else " " for c in text)
    line = "".join(c if ord(c) in _signs() else "\ufffd" for c in line)
    return line if len(line) <= most else line[: most - 1] + "…"


@lru_cache(maxsize=1)
def _signs() -> frozenset[int]:
    from matplotlib.font_manager import findfont, get_font

    return frozenset(get_font(findfont(_FONT)).get_charmap())


def _png(figure: Figure) -> bytes:
    out = io.BytesIO()
    figure.canvas.print_png(out, metadata={"Software": "seamfold"})  # type: ignore[attr-defined]
    return out.getvalue()
