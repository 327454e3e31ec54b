"""Quantities: how a value of a kind turns with the body.

A quantity is data: a rank, whether it is axial, and how its components are stored. Its matrix
``A(Q)`` is derived, one piece of code for every kind and storage: expand the stored components to
the full array, apply one ``Q`` per index, times ``det Q`` if axial, reduce back.

Signs of polar and axial quantities: J. F. Nye, Physical Properties of Crystals, chapters I and II.

>>> mirror_x = np.diag([-1.0, 1.0, 1.0])
>>> np.diag(quantity("polar vector", 3).matrix(mirror_x)).tolist()
[-1.0, 1.0, 1.0]
>>> np.diag(quantity("axial vector", 3).matrix(mirror_x)).tolist()
[1.0, -1.0, -1.0]
"""

from __future__ import annotations

from dataclasses import dataclass
from functools import cached_property

import numpy as np
from numpy.typing import NDArray

from expander.errors import InputError, NotYetError
from expander.placements import Floats

_AXES = "xyz"
_OPPOSITE = {"largest": "smallest", "middle": "middle", "smallest": "largest"}


@dataclass(frozen=True)
class Kind:
    """One row of the table of quantities.

    Attributes
    ----------
    rank : number of indices.
    axial : times ``det Q``.
    symmetric : a tensor whose off-diagonal components are stored once.
    response : how the value takes a load behaviour of -1: "linear" changes sign, "even" (quadratic
        in the response, or no response at all) does not, "ordered" are principal values, whose
        order turns round.
    storages : component names by number of components.
    """

    name: str
    rank: int
    axial: bool = False
    symmetric: bool = False
    response: str = "linear"
    storages: tuple[str, ...] = ("value",)

    @property
    def full_size(self) -> int:
        """Components of a value in any directions: independent ones of a symmetric tensor."""
        return 6 if self.symmetric else int(3**self.rank)


_VECTOR = ("x y z", "x y")
_FULL = "xx xy xz yx yy yz zx zy zz"
_SYMMETRIC = ("xx yy zz xy yz zx", "xx yy zz xy", "xx yy xy", _FULL)

KINDS = {
    kind.name: kind
    for kind in (
        Kind("scalar", 0),
        Kind("invariant", 0, response="even"),
        Kind("pseudoscalar", 0, axial=True),
        Kind("polar vector", 1, storages=_VECTOR),
        # A plane model turns about z only, so its rotation is the one component z.
        Kind("axial vector", 1, axial=True, storages=("x y z", "z")),
        Kind("symmetric tensor", 2, symmetric=True, storages=_SYMMETRIC),
        Kind("tensor", 2, storages=(_FULL, "xx xy yx yy")),
        Kind("axial tensor", 2, axial=True, storages=(_FULL,)),
        Kind("principal values", 0, response="ordered", storages=("largest middle smallest",)),
        Kind("label", 0, response="even"),
    )
}
COMPLETE = {1: "x y z", 2: _FULL}  # storages that can hold a value in any directions
LATER_KINDS = ("stiffness", "compliance")


def kind_named(word: str) -> Kind:
    """The kind with this name; the error lists the names."""
    if word in LATER_KINDS:
        raise NotYetError(f"kind = {word!r} is not expanded by this version yet.")
    if word not in KINDS:
        raise InputError(f"kind = {word!r} is unknown.", "Expected one of: " + ", ".join(KINDS))
    return KINDS[word]


@dataclass(frozen=True)
class Quantity:
    """A kind together with its storage.

    Attributes
    ----------
    kind : a row of the table.
    components : names of the stored components in their order, such as ``("xx", "yy", "xy")``.
    engineering : shear components are stored doubled (gamma = 2 epsilon).
    """

    kind: Kind
    components: tuple[str, ...]
    engineering: bool = False

    @property
    def size(self) -> int:
        """Number of stored components."""
        return len(self.components)

    @cached_property
    def spread(self) -> Floats:
        """(3^rank, size): stored components to the full array."""
        if self.kind.rank == 0:
            return np.eye(self.size)
        full = np.zeros((3,) * self.kind.rank + (self.size,))
        for column, name in enumerate(self.components):
            index = tuple(_AXES.index(letter) for letter in name)
            shear = self.kind.symmetric and index != index[::-1]
            full[(*index, column)] = 1.0
            if shear and name[::-1] not in self.components:
                full[(*index[::-1], column)] = 1.0
            if shear and self.engineering:
                full[..., column] *= 0.5
        return full.reshape(-1, self.size)

    @cached_property
    def gather(self) -> Floats:
        """(size, 3^rank): the full array to stored components; left inverse of `spread`."""
        picked = (self.spread != 0.0).T / np.maximum(1, (self.spread != 0).sum(axis=0))[:, None]
        return np.asarray(np.linalg.inv(picked @ self.spread) @ picked)

    def matrix(self, Q: Floats) -> Floats:
        """``A(Q)``, (size, size), acting on stored components.

        Raises
        ------
        InputError
            If the storage is that of a plane model and Q leaves the plane.
        """
        action: Floats = np.ones((1, 1)) if self.kind.rank else np.eye(self.size)
        for _ in range(self.kind.rank):
            n = len(action)  # action and Q as a Kronecker product
            action = (action[:, None, :, None] * Q[None, :, None, :]).reshape(3 * n, 3 * n)
        moved = action @ self.spread
        A = self.gather @ moved
        if np.abs(self.spread @ A - moved).max(initial=0.0) > 1e-9:
            raise InputError(
                f"components = {' '.join(self.components)!r} cannot hold a {self.kind.name} on "
                "every copy: a plane or turn of the group moves components out of the stored ones.",
                "A plane model is mirrored in planes whose normal lies in its plane, and turned "
                "about the axis normal to it; otherwise store all components.",
            )
        sign = np.sign(np.linalg.det(Q)) if self.kind.axial else 1.0
        return np.asarray(sign * A + 0.0)

    @cached_property
    def complete(self) -> Quantity:
        """The same quantity with all components stored, to be turned in any way."""
        names = COMPLETE.get(self.kind.rank)
        return self if names is None else Quantity(self.kind, tuple(names.split()))

    @cached_property
    def completion(self) -> Floats:
        """(complete size, size): stored components to all components."""
        return np.asarray(self.complete.gather @ self.spread)

    @cached_property
    def reduction(self) -> Floats:
        """(size, complete size): all components to the stored ones."""
        return np.asarray(self.gather @ self.complete.spread)

    @cached_property
    def odd(self) -> Floats:
        """(size, size): what a load behaviour of -1 does to a value that follows the load."""
        if self.kind.response == "linear":
            return -np.eye(self.size)
        if self.kind.response == "ordered":
            turned = [_OPPOSITE[name] for name in self.components]
            return -np.array([[float(a == b) for b in self.components] for a in turned])
        return np.eye(self.size)

    @property
    def linear(self) -> bool:
        """Whether values of several load cases may be added."""
        return self.kind.response == "linear"


def quantity(
    kind: str, size: int, components: str | None = None, shear: str = "tensor"
) -> Quantity:
    """The quantity of a declared field.

    Parameters
    ----------
    kind : a name of the table.
    size : number of components of the array.
    components : stored order, such as ``"xx yy zz xy yz zx"``; the usual one of this size if None.
    shear : "tensor" or "engineering".

    Examples
    --------
    >>> quantity("symmetric tensor", 4).components
    ('xx', 'yy', 'zz', 'xy')
    """
    row = kind_named(kind)
    if row.name == "label" and size > 1:
        return Quantity(row, tuple(f"{i + 1}" for i in range(size)))
    if components is None:
        fitting = [s for s in row.storages if len(s.split()) == size]
        if not fitting:
            sizes = " or ".join(str(len(s.split())) for s in row.storages)
            raise InputError(
                f"the array has {size} component{'s' * (size != 1)}, a {row.name} has {sizes}.",
                _size_advice(row, size),
            )
        names = tuple(fitting[0].split())
    else:
        names = _checked_names(row, components, size)
    if shear == "engineering" and not row.symmetric:
        raise InputError(f"shear = 'engineering' has no meaning for a {row.name}.",
                         "It belongs to a symmetric tensor such as strain.")  # fmt: skip
    return Quantity(row, names, shear == "engineering")


def _size_advice(row: Kind, size: int) -> str:
    if row.rank == 1 and size == 6:
        return (
            "An array of translations and rotations is two fields: declare one polar vector with "
            "columns = [1, 2, 3] and one axial vector with columns = [4, 5, 6], arrays = [..]."
        )
    if row.rank == 1 and size == 3:
        return "Name the stored components, for example components = 'x y z'."
    return "Correct kind, or name the stored ones with components = '...'."


def _checked_names(row: Kind, components: str, size: int) -> tuple[str, ...]:
    names = tuple(components.replace(",", " ").lower().split())
    expected = row.storages[0] if row.rank == 0 else " ".join(_FULL.split() if row.rank == 2
                                                              else _AXES)  # fmt: skip
    allowed = expected.split()
    bad = [n for n in names if n not in allowed]
    if bad or len(set(names)) != len(names):
        what = f"{bad[0]!r} is not a component" if bad else "a component is named twice"
        both = (
            " Translations and rotations in one array are two fields of kind polar vector and "
            'axial vector: give each its columns = [..] and arrays = [".."].'
            if row.rank == 1 and bad
            else ""
        )
        raise InputError(
            f"components = {components!r}: {what} of a {row.name}.",
            f"Expected names from: {expected}.{both}",
        )
    if len(names) != size:
        raise InputError(
            f"components = {components!r} names {len(names)}, the array has {size}.",
            "Name one component for each column of the array, in its order.",
        )
    if row.response == "ordered" and len(names) != 3:
        raise InputError(
            f"components = {components!r}: principal values are handled as a triple only, since "
            "their order turns round under an antisymmetric load.",
            f"Expected all of: {expected}.",
        )
    doubled = [n for n in names if row.symmetric and n != n[::-1] and n[::-1] in names]
    if doubled and len(names) != 9:
        raise InputError(
            f"components = {components!r} names {doubled[0]!r} and {doubled[0][::-1]!r}, which are "
            "one component of a symmetric tensor.",
            "Name each shear component once.",
        )
    return names


def sign_words(q: Quantity, A: NDArray[np.floating]) -> str:
    """The components that change sign under a diagonal matrix, or why there are none to show.

    >>> q = quantity("symmetric tensor", 6)
    >>> sign_words(q, q.matrix(np.diag([1.0, 1.0, -1.0])))
    'yz zx'
    """
    if np.abs(A - np.diag(np.diag(A))).max(initial=0.0) > 1e-12:
        return "mixed"
    flipped = [name for name, a in zip(q.components, np.diag(A), strict=True) if a < 0]
    if not flipped:
        return "none"
    return "sign" if q.kind.rank == 0 and q.size == 1 else " ".join(flipped)
