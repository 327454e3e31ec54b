"""Rotating excitation: which nodal diameters it meets on N sectors, and which way they run.

A pattern ``exp(i e theta)`` that runs around the body, seen at N equal sectors only, cannot be told
from one of order ``e - m N``. So order ``e`` meets ``h`` when ``e = m N + h`` (the wave runs with
the excitation) or ``e = m N - h`` (against it); h = 0 is in step in all sectors and h = N/2 changes
sign from one to the next: they stand for both. S. J. Wildheim, Excitation of rotationally
periodic structures, Journal of Applied Mechanics 46 (1979), 878-882.
"""

from __future__ import annotations

from dataclasses import dataclass

from expander.errors import InputError

WITH, AGAINST, IN_STEP, ALTERNATING = "with", "against", "in step", "alternating"


@dataclass(frozen=True)
class Meeting:
    """What an excitation of one order meets.

    Attributes
    ----------
    order : e, cycles of the excitation in one turn.
    nodal_diameters : h, 0 to N/2.
    direction : "with" or "against" the excitation; "in step" for h = 0 (all sectors at once) and
        "alternating" for h = N/2 (from sector to sector), which run neither way.
    multiple : m in ``e = m N + h`` or ``e = m N - h``.
    """

    order: int
    nodal_diameters: int
    direction: str
    multiple: int

    @property
    def phase(self) -> str | None:
        """cyclic.phase of a load that runs toward higher sector numbers, written
        ``Re(f exp(+i omega t))``; None where chi is real.

        Such a wave has ``exp(-i e k alpha)`` on sector k: phase "-" if it is met with, "+" against.
        """
        return {WITH: "-", AGAINST: "+"}.get(self.direction)


def meets(order: int, sectors: int) -> Meeting:
    """The nodal diameters that a rotating excitation of an order meets.

    Raises
    ------
    InputError
        For a negative order or fewer than two sectors.

    Examples
    --------
    >>> [(m.nodal_diameters, m.direction) for m in (meets(5, 12), meets(7, 12), meets(29, 12))]
    [(5, 'with'), (5, 'against'), (5, 'with')]
    >>> meets(24, 12).direction, meets(6, 12).direction
    ('in step', 'alternating')
    """
    _check_sectors(sectors)
    if order < 0:
        raise InputError(
            f"An excitation of order {order} does not exist.",
            "Expected 0 or more: the cycles of the excitation in one turn.",
        )
    m, rest = divmod(order, sectors)
    if rest == 0:
        return Meeting(order, 0, IN_STEP, m)
    if 2 * rest == sectors:
        return Meeting(order, rest, ALTERNATING, m)
    if 2 * rest < sectors:
        return Meeting(order, rest, WITH, m)
    return Meeting(order, sectors - rest, AGAINST, m + 1)


def table(last: int, sectors: int) -> tuple[Meeting, ...]:
    """What every order from 0 to `last` meets.

    >>> [m.nodal_diameters for m in table(7, 5)]
    [0, 1, 2, 2, 1, 0, 1, 2]
    """
    return tuple(meets(e, sectors) for e in range(last + 1))


def orders_exciting(nodal_diameters: int, sectors: int, last: int) -> tuple[Meeting, ...]:
    """The orders up to `last` that excite waves of h nodal diameters.

    Raises
    ------
    InputError
        If h is not one of 0 to N/2.

    Examples
    --------
    >>> [(m.order, m.direction) for m in orders_exciting(2, 12, 26)]
    [(2, 'with'), (10, 'against'), (14, 'with'), (22, 'against'), (26, 'with')]
    """
    _check_sectors(sectors)
    h = nodal_diameters
    if not 0 <= h <= sectors // 2:
        raise InputError(
            f"{sectors} sectors have no waves of {h} nodal diameters.",
            f"Expected 0 to {sectors // 2}.",
        )
    orders = {m * sectors + s for m in range(last // sectors + 2) for s in (-h, h)}
    return tuple(meets(e, sectors) for e in sorted(orders) if 0 <= e <= last)


def _check_sectors(sectors: int) -> None:
    if sectors < 2:
        raise InputError(
            f"A body of {sectors} sectors is not cyclic.", "Expected sectors = 2 or more."
        )
