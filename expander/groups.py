"""Groups: all copies of the sector, closed under composition from cut planes and one axis.

The whole body is the list of placements of the group; number 0 is the modelled part. What the
copies take from a load is a character of the group and lives in `behaviours`.
"""

from __future__ import annotations

from dataclasses import dataclass
from fractions import Fraction
from functools import cached_property

import numpy as np
from numpy.typing import NDArray

from expander.errors import InputError
from expander.placements import Floats, Placement

MOST_COPIES = 4096
_SAME = 1e-6  # two placements closer than this (relative for translations) are one


@dataclass(frozen=True, eq=False)
class CutPlane:
    """A plane of symmetry that bounds the model."""

    name: str
    normal: Floats
    point: Floats

    @cached_property
    def placement(self) -> Placement:
        return Placement.mirror(self.normal, self.point)


@dataclass(frozen=True, eq=False)
class CyclicAxis:
    """The axis of a body of `sectors` equal sectors."""

    sectors: int
    axis: Floats
    point: Floats

    @property
    def degrees(self) -> float:
        """The sector's angle."""
        return 360.0 / self.sectors

    @cached_property
    def placement(self) -> Placement:
        return self.turn(1)

    def turn(self, k: int) -> Placement:
        """To sector ``k``; the angle is made at once, so that errors do not add up with k."""
        return Placement.turn(self.axis, 360.0 * (k % self.sectors) / self.sectors, self.point)


@dataclass(frozen=True, eq=False)
class Group:
    """The placements of all copies and how they compose.

    Attributes
    ----------
    placements : number 0 is the identity.
    planes, axis : the generators, as declared.
    parent, generator : copy ``g`` is ``placements[parent[g]] @ generators[generator[g]]``.
    times : (copies, generators) number of the copy ``placements[g] @ generators[k]``.
    """

    placements: tuple[Placement, ...]
    planes: tuple[CutPlane, ...]
    axis: CyclicAxis | None
    parent: tuple[int, ...]
    generator: tuple[int, ...]
    times: NDArray[np.int64]

    def __len__(self) -> int:
        return len(self.placements)

    @cached_property
    def product(self) -> NDArray[np.int64]:
        """(copies, copies): number of the copy ``placements[g] @ placements[h]``."""
        table = np.empty((len(self), len(self)), dtype=np.int64)
        table[:, 0] = np.arange(len(self))
        for h in range(1, len(self)):
            table[:, h] = self.times[table[:, self.parent[h]], self.generator[h]]
        return table

    @cached_property
    def inverse(self) -> NDArray[np.int64]:
        """(copies,): number of the inverse placement."""
        found: NDArray[np.int64] = np.argmin(self.product, axis=1)
        return found

    @cached_property
    def mirrors(self) -> tuple[tuple[int, Floats, float], ...]:
        """Every mirror plane of the closed group: copy number, normal, ``n . x`` on the plane."""
        planes = ((g, p.plane()) for g, p in enumerate(self.placements))
        return tuple((g, plane[0], plane[1]) for g, plane in planes if plane is not None)

    @cached_property
    def is_reflection_group(self) -> bool:
        """Whether the mirror planes alone make every copy: then a model that no mirror plane cuts
        tiles space exactly (J. E. Humphreys, Reflection Groups and Coxeter Groups, 1.12)."""
        reached = np.zeros(len(self), dtype=bool)
        reached[0] = True
        front = np.array([0])
        mirrors = np.array([g for g, _, _ in self.mirrors], dtype=np.int64)
        while len(front) and len(mirrors):
            new = np.unique(self.product[np.ix_(front, mirrors)])
            front = new[~reached[new]]
            reached[front] = True
        return bool(reached.all())

    def words(self, copy: int) -> str:
        """How a copy is made, in words.

        >>> from expander.placements import unit
        >>> make_group([CutPlane("mid", unit([0, 0, 1]), np.zeros(3))], None).words(1)
        "mirrored in 'mid'"
        """
        placement = self.placements[copy]
        if copy == 0:
            return "as modelled"
        if not placement.mirrored:
            return _turned(placement)
        for plane in self.planes:
            if _same(placement, plane.placement, self._scale):
                return f"mirrored in {plane.name!r}"
        found = placement.plane()
        if found is not None:
            return f"mirrored in the plane with normal {direction_words(found[0])}"
        first = self.planes[0]
        return f"mirrored in {first.name!r}, then {_turned(placement @ first.placement.inverse())}"

    @property
    def _scale(self) -> float:
        return _scale(self.planes, self.axis)


def direction_words(direction: Floats) -> str:
    """``x``, ``-y`` or ``(0.707, 0, 0.707)``."""
    for sign, mark in ((1.0, ""), (-1.0, "-")):
        for axis, name in enumerate("xyz"):
            if abs(sign * direction[axis] - 1.0) < 1e-12:  # a unit vector: the others vanish
                return mark + name
    return "(" + ", ".join(f"{c + 0.0:.4g}" for c in direction) + ")"


def _turned(placement: Placement) -> str:
    axis, degrees = placement.turning()
    if axis[np.argmax(np.abs(axis))] < 0:
        axis, degrees = -axis, 360.0 - degrees
    return f"turned {degrees:.6g} degrees about {direction_words(axis)}"


def _scale(planes: tuple[CutPlane, ...], axis: CyclicAxis | None) -> float:
    """Largest distance of a plane or the axis from the origin: where along itself the point of a
    plane lies says nothing."""
    away = [abs(float(p.normal @ p.point)) for p in planes]
    if axis is not None:
        along = (axis.point @ axis.axis) * axis.axis
        away.append(float(np.linalg.norm(axis.point - along)))
    # Points read off a model carry round-off: below this, a distance is none in any length unit.
    return max(*away, 1e-6)


def _same(a: Placement, b: Placement, scale: float) -> bool:
    return bool(np.abs(a.Q - b.Q).max() < _SAME and np.abs(a.t - b.t).max() < _SAME * scale)


def _check_planes(planes: tuple[CutPlane, ...]) -> None:
    """Each pair must make a finite group; the reason otherwise."""
    for i, a in enumerate(planes):
        for b in planes[:i]:
            cosine = float(np.clip(a.normal @ b.normal, -1.0, 1.0))
            sine = float(np.linalg.norm(np.cross(a.normal, b.normal)))
            angle = float(np.rad2deg(np.arctan2(sine, abs(cosine))))
            if angle < 1e-4:
                gap = abs(float(a.normal @ (a.point - b.point)))
                if gap <= 1e-6 * _scale(planes, None):
                    raise InputError(
                        f"Planes {b.name!r} and {a.name!r} are the same plane.",
                        f"Remove one of the two [[mirror]] tables, for example {a.name!r}.",
                    )
                raise InputError(
                    f"Planes {b.name!r} and {a.name!r} are parallel, {gap:.6g} apart: their "
                    "images never close, the body would be an endless row of copies.",
                    "Keep one of the two [[mirror]] tables.",
                )
            turns = Fraction(angle / 180.0).limit_denominator(MOST_COPIES // 4)
            if abs(float(turns) * 180.0 - angle) > 1e-6:
                raise InputError(
                    f"Planes {b.name!r} and {a.name!r} meet at {angle:.6f} degrees, which is no "
                    "whole part of 180 degrees: their images never close.",
                    f"Expected 180/m degrees (nearest: {180.0 / max(1, round(180 / angle)):.6g}); "
                    "give mirror.normal with all its digits.",
                )


def _check_axis(planes: tuple[CutPlane, ...], axis: CyclicAxis) -> None:
    along_axis = [abs(float(plane.normal @ axis.axis)) for plane in planes]
    copies = axis.sectors
    copies *= 2 if any(a < 1e-6 for a in along_axis) else 1  # a plane through the axis
    copies *= 2 if any(a > 1.0 - 1e-9 for a in along_axis) else 1  # a plane normal to it
    if copies > MOST_COPIES:
        raise InputError(
            f"cyclic.sectors = {axis.sectors} makes {copies} copies with the planes, more than "
            f"the {MOST_COPIES} that this version holds.",
            "Check cyclic.sectors.",
        )
    for plane, along in zip(planes, along_axis, strict=True):
        if along < 1e-6:
            gap = abs(float(plane.normal @ (axis.point - plane.point)))
            if gap > 1e-6 * _scale(planes, axis):
                raise InputError(
                    f"Plane {plane.name!r} is parallel to the cyclic axis but {gap:.6g} away from "
                    "it: the copies never close.",
                    "A cut plane goes through the axis or is normal to it; check mirror.point and "
                    "cyclic.point.",
                )


def make_group(planes: list[CutPlane], axis: CyclicAxis | None) -> Group:
    """Close cut planes and an axis under composition.

    Raises
    ------
    InputError
        If there is neither, or the set does not close, with the planes and the angle.

    Examples
    --------
    >>> from expander.placements import unit
    >>> x, y = (CutPlane(n, unit(v), np.zeros(3)) for n, v in (("x", [1, 0, 0]), ("y", [0, 1, 0])))
    >>> len(make_group([x, y], None)), len(make_group([x], CyclicAxis(5, unit([0, 0, 1]),
    ...     np.zeros(3))))
    (4, 10)
    """
    cuts = tuple(planes)
    if not cuts and axis is None:
        raise InputError(
            "The case has neither a cut plane nor an axis: there is nothing to copy.",
            'Add a [[mirror]] table (normal = "x") or a [cyclic] table (sectors = 12); for a model '
            "file the options --mirror x or --sectors 12.",
        )
    _check_planes(cuts)
    if axis is not None:
        _check_axis(cuts, axis)
    scale = _scale(cuts, axis)
    generators = [p.placement for p in cuts] + ([axis.placement] if axis else [])
    elements = [Placement.identity()]
    parent, made_by = [0], [0]
    if axis is not None:
        for k in range(1, axis.sectors):
            elements.append(axis.turn(k))
            parent.append(k - 1)
            made_by.append(len(generators) - 1)
    keys = np.empty((MOST_COPIES + 1, 12))
    keys[: len(elements)] = [_key(e, scale) for e in elements]
    times: list[list[int]] = []
    done = 0
    while done < len(elements):
        row = []
        for k, generator in enumerate(generators):
            image = elements[done] @ generator
            key = _key(image, scale)
            off = np.abs(keys[: len(elements)] - key).max(axis=1)
            found = int(np.argmin(off))
            if off[found] > _SAME:
                if len(elements) == MOST_COPIES:
                    raise _never_closes(cuts, axis)
                found = len(elements)
                keys[found] = key
                elements.append(image)
                parent.append(done)
                made_by.append(k)
            row.append(found)
        times.append(row)
        done += 1
    return Group(tuple(elements), cuts, axis, tuple(parent), tuple(made_by), np.array(times))


def _key(p: Placement, scale: float) -> Floats:
    return np.concatenate([p.Q.ravel(), p.t / scale])


def _never_closes(planes: tuple[CutPlane, ...], axis: CyclicAxis | None) -> InputError:
    names = ", ".join(repr(p.name) for p in planes)
    pairs = [
        f"{a.name!r} and {b.name!r} meet at "
        f"{np.rad2deg(np.arccos(np.clip(abs(a.normal @ b.normal), 0, 1))):.6g} degrees"
        for i, b in enumerate(planes)
        for a in planes[:i]
    ]
    with_axis = f" and the axis of {axis.sectors} sectors" if axis else ""
    angles = [
        f"{p.name!r} and the axis meet at "
        f"{np.rad2deg(np.arcsin(np.clip(abs(p.normal @ axis.axis), 0, 1))):.6g} degrees"
        for p in planes
        if axis is not None
    ]
    detail = f" ({'; '.join(pairs + angles)})" if pairs or angles else ""
    return InputError(
        f"The copies made by the planes {names}{with_axis} never close: more than {MOST_COPIES} "
        f"were found{detail}.",
        "Cut planes meet in one point or line, at 180/m degrees, and go through the axis or are "
        "normal to it; check mirror.normal, mirror.point, cyclic.axis and cyclic.point.",
    )
