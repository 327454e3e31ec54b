"""Fields: what each array of the model is, as declared in the case or told by its name."""

from __future__ import annotations

from collections.abc import Iterable, Mapping
from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

from expander.casefile import CaseFile
from expander.errors import InputError
from expander.frames import Cylindrical, Frame, Global
from expander.model import Model
from expander.placements import Floats, Placement
from expander.quantities import Quantity
from expander.tradewords import (
    not_linear,
    stress_odd,
    trade_word,
)


@dataclass(frozen=True, eq=False)
class Field:
    """One field of the sector and how it is carried to the copies.

    Attributes
    ----------
    name : of the output array.
    follows : "load" (takes chi) or "body" (never).
    seam : "agree", "sum", "recovered", or "lowest copy" (labels and properties of the body).
    on : "points" or "cells".
    arrays : the arrays that hold it; one, or one per component.
    columns : columns of the one array that are used, counted from 0; None for all.
    second : the arrays of the imaginary part of a complex field, or of its phase; empty if real.
    polar : the two arrays hold amplitude and phase in degrees, not real and imaginary part.
    decided : how the kind was decided, in words.
    shear_assumed, order_assumed : neither the case nor the file says how shear or components are
        stored.
    """

    name: str
    quantity: Quantity
    follows: str
    seam: str
    frame: Frame
    on: str
    arrays: tuple[str, ...]
    columns: tuple[int, ...] | None
    unit: str
    decided: str
    shear_assumed: bool = False
    order_assumed: bool = False
    second: tuple[str, ...] = ()
    polar: bool = False

    @property
    def complex_values(self) -> bool:
        """Whether its values are complex."""
        return bool(self.second)

    @property
    def kind(self) -> str:
        return self.quantity.kind.name

    @property
    def summable(self) -> bool:
        """Whether results of several cases may be added."""
        special = any(stress_odd(n) or not_linear(n) for n in self.names)
        return self.quantity.linear and self.follows == "load" and not special

    @property
    def names(self) -> tuple[str, ...]:
        """Its own name and those of its arrays: renaming a measure does not change what it is."""
        return (self.name, *self.arrays, *self.second)

    @property
    def constant(self) -> bool:
        """Whether it is a property of the body, the same in every case."""
        return self.follows == "body"

    def stored_type(self, model: Model) -> np.dtype[np.generic]:
        """Number type of the arrays, also where they make up a complex field."""
        return self._part(model, self.stored_arrays(model)).dtype

    def stored_arrays(self, model: Model) -> tuple[str, ...]:
        """Its arrays in this model. A case that is constant in time may hold a complex field of
        the others as one real array under the field's own name."""
        data = model.point_data if self.on == "points" else model.cell_data
        missing = self.second and any(a not in data for a in (*self.arrays, *self.second))
        return (self.name,) if missing and self.name in data else self.arrays

    def values(self, model: Model) -> NDArray[np.generic]:
        """The field on the sector, (n, k), in the number type of the file; complex if it is."""
        arrays = self.stored_arrays(model)
        first = self._part(model, arrays)
        if not self.second or arrays != self.arrays:
            return first
        second = self._part(model, self.second)
        if self.polar:
            return np.asarray(first.astype(float) * np.exp(1j * np.deg2rad(second.astype(float))))
        return np.asarray(first.astype(float) + 1j * second.astype(float))

    def _part(self, model: Model, arrays: tuple[str, ...]) -> NDArray[np.generic]:
        data = model.point_data if self.on == "points" else model.cell_data
        missing = [a for a in arrays if a not in data]
        if missing:
            raise InputError(
                f"{model.source}: there is no array {missing[0]!r} on {self.on} "
                f"(field {self.name!r}).",
                f"Arrays on {self.on}: {', '.join(data) or 'none'}.",
            )
        if len(arrays) == 1:
            array = np.asarray(data[arrays[0]])
            array = array.reshape(len(array), -1)
            if self.columns is not None:
                array = array[:, list(self.columns)]
        else:
            array = np.stack([np.asarray(data[a]) for a in arrays], axis=1)
        if array.shape[1] != self.quantity.size:
            raise InputError(
                f"{model.source}: array {arrays[0]!r} has {array.shape[1]} components, in the "
                f"first case it has {self.quantity.size}.",
                "All cases of one body hold the same fields.",
            )
        return array


def frames_of(case: CaseFile, directions: Mapping[str, Floats]) -> dict[str, Frame]:
    """The declared frames; `directions` are their axes by name."""
    frames: dict[str, Frame] = {"global": Global()}
    for name, table in case.frames.items():
        if table.type == "global":
            frames[name] = Global(name)
        else:
            frames[name] = Cylindrical(name, directions[name], np.array(table.point, dtype=float))
    return frames


def check_shear(fields: Iterable[Field], placements: Iterable[Placement]) -> None:
    """Refuse an assumed shear word where tensor and engineering shear would differ."""
    copies = list(placements)
    for field in fields:
        if field.kind != "symmetric tensor" or not field.shear_assumed:
            continue
        if not any("strain" in n.lower() for n in field.names):
            continue
        other = replace(field.quantity, engineering=True)
        for g in copies:
            local = field.frame.local_action(g) if isinstance(field.frame, Cylindrical) else None
            Q = g.Q if local is None else local
            if np.abs(field.quantity.matrix(Q) - other.matrix(Q)).max() > 1e-12:
                raise InputError(
                    f"Field {field.name!r}: shear strain may be stored as tensor or as "
                    "engineering shear, and on these copies the two differ.",
                    f'Add shear = "tensor" or shear = "engineering" under [fields.{field.name}].',
                )


def check_load_odd(fields: Iterable[Field], where: str) -> None:
    """Refuse values that no rule can copy under an antisymmetric load (chi = -1)."""
    listed = list(fields)
    for field in listed:
        if field.follows == "body":
            continue
        if any(stress_odd(n) for n in field.names) and field.quantity.size == 1:
            raise InputError(
                f"Field {field.name!r} in {where}: a lone principal, signed or interaction measure "
                "is odd in the stress but not linear; the largest principal stress of a copy is "
                "minus the smallest of the sector.",
                'Give all three principal values as one field (kind = "principal values"), or '
                'leave it out and ask for output.derived = ["principal stresses"].',
            )
        if any(not_linear(n) for n in field.names):
            raise InputError(
                f"Field {field.name!r} in {where}: it is not linear in the response, so an "
                "antisymmetric load has no rule for it.",
                "Leave it out, and use the displacement gradient in its place.",
            )
    check_invariants(listed, where)


def check_invariants(fields: Iterable[Field], where: str) -> None:
    """Refuse an invariant, told by its name, that is declared to be something linear."""
    for field in fields:
        words = [trade_word(n, field.quantity.size, field.on) for n in field.names]
        if any(w and w.kind == "invariant" for w in words) and field.summable:
            raise InputError(
                f"Field {field.name!r} is declared a {field.kind}, which changes sign with the "
                f"load and adds up, in {where}; by its name it is an invariant, which does not.",
                f'Write kind = "invariant" under [fields.{field.name}].',
            )
