"""Verdicts: whether a field closes at a seam, with the numbers that say so.

Three measures, each against its own limit:

- *value*: fields that must agree. Limit: `seam.limit` times the field's largest value over the
  body; 1e-4 by default, since solvers write six or seven digits and iterative ones stop near 1e-5,
  while a wrong sign or a forgotten constraint shows jumps of the order of the field itself.
- *traction* (stress), *flux* (heat flux and other recovered vectors' normal part) and *kink* (the
  jump of the normal derivative of a field that must agree): discrete fields jump from cell to cell
  everywhere, so the limit is `seam.scatter` times the jumps between neighbouring cells near the
  seam; 6 by default, see DEVELOPERS.md for the solutions it was set by.
- *systematic*: recovered values on both sides that stand in one ratio other than 1.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from expander.checking.jumps import Jump

CLOSED, DOUBTFUL, OPEN, TOLD = "closed", "doubtful", "open", "not judged"
_ORDER = (TOLD, CLOSED, DOUBTFUL, OPEN)


@dataclass(frozen=True)
class Verdict:
    """One field of one case at one seam, by one measure.

    Attributes
    ----------
    result : "closed", "doubtful", "open", or "not judged".
    jump, rms : largest length of the jump and its root mean square over the seam's rows.
    scale : the field's largest value over the body; `relative` and `relative_rms` refer to it.
    components : largest jump of each component.
    node, position : where the jump is largest, in the sector; `own`, `other` the values there.
    limit : what `relative` (or, with a yardstick, `times`) must not exceed.
    times : the jump in multiples of the scatter of the cells near it; None without a yardstick.
    open_nodes : how many nodes exceed the limit, the worst ones first in `worst_nodes`.
    """

    seam: str
    field: str
    case: str
    measure: str
    result: str
    jump: float
    rms: float
    scale: float
    limit: float
    components: dict[str, float]
    node: int
    position: tuple[float, ...]
    own: tuple[complex, ...]
    other: tuple[complex, ...]
    words: str = ""
    times: float | None = None
    typical: float | None = None
    open_nodes: int = 0
    worst_nodes: tuple[int, ...] = ()

    @property
    def relative(self) -> float:
        """Largest jump as part of the field's largest value."""
        return self.jump / self.scale if self.scale else 0.0

    @property
    def relative_rms(self) -> float:
        """RMS jump as part of the field's largest value."""
        return self.rms / self.scale if self.scale else 0.0


def gravity(result: str) -> int:
    """How serious a result is, from 0."""
    return _ORDER.index(result)


def worst_of(results: list[str]) -> str:
    """The most serious of several results.

    >>> worst_of(["closed", "doubtful", "not judged"])
    'doubtful'
    """
    return max(results, key=gravity, default=TOLD)


def verdict_of(
    jump: Jump,
    points: NDArray[np.floating],
    scale: float,
    limit: float,
    measure: str = "value",
    result: str | None = None,
    over: np.ndarray | None = None,
    worst: int | None = None,
    **more: object,
) -> Verdict:
    """Numbers of a jump gathered; closed or open by the limit unless `result` is given.

    Parameters
    ----------
    over : (k,) rows that exceed the limit, if not simply those longer than limit times scale.
    worst : the row that is shown; that of the longest jump if None.
    """
    lengths = jump.lengths
    over = lengths > limit * scale if over is None else over
    if result is None:
        result = OPEN if over.any() else CLOSED
    row = int(np.argmax(lengths)) if worst is None and len(lengths) else worst
    node = int(jump.seam.nodes[row]) if row is not None else -1
    order = np.argsort(-lengths, kind="stable")
    bad = list(dict.fromkeys(jump.seam.nodes[order[over[order]]].tolist()))
    return Verdict(
        seam=jump.seam.name,
        field=jump.field.name,
        case=jump.case.name,
        measure=measure,
        result=result,
        jump=float(lengths.max(initial=0.0)),
        rms=float(np.sqrt(np.mean(lengths**2))) if len(lengths) else 0.0,
        scale=scale,
        limit=limit,
        components=dict(
            zip(jump.components, np.abs(jump.difference).max(axis=0, initial=0.0).tolist(),
                strict=True)
        ),
        node=node,
        position=tuple(points[node].tolist()) if row is not None else (),
        own=tuple(jump.own[row].tolist()) if row is not None else (),
        other=tuple(jump.other[row].tolist()) if row is not None else (),
        open_nodes=len(bad),
        worst_nodes=tuple(bad[:20]),
        **more,  # type: ignore[arg-type]
    )  # fmt: skip
