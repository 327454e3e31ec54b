"""Fields: what each array of the model is, as declared in the case or told by its name."""

from __future__ import annotations

import json
from collections.abc import Iterable, Mapping
from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

from expander.casefile import CaseFile, FieldTable, writable
from expander.cells import dimensions
from expander.errors import InputError, NotYetError
from expander.frames import Cylindrical, Frame, Global
from expander.model import Model
from expander.placements import Floats, Placement
from expander.quantities import KINDS, Quantity, quantity
from expander.tradewords import (
    TradeWord,
    component_of,
    component_order,
    names_a_rotation,
    names_cylindrical,
    not_linear,
    stress_odd,
    trade_word,
)

ADDED_ARRAYS = ("copy", "sector_cell", "sector_point")
_OF_PLANE_MODELS = {("polar vector", 2), ("axial vector", 1), ("symmetric tensor", 3),
                    ("symmetric tensor", 4), ("tensor", 4)}  # fmt: skip
_LABEL_FRAME = str.maketrans("rt", "xy")  # r, t, z are the components x, y, z of a local frame


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
    decided : how the kind was decided, in words.
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

    @property
    def kind(self) -> str:
        return self.quantity.kind.name

    @property
    def summable(self) -> bool:
        """Whether results of several cases may be added."""
        linear = self.quantity.linear and not stress_odd(self.name) and not not_linear(self.name)
        return linear and self.follows == "load"

    @property
    def constant(self) -> bool:
        """Whether it is a property of the body, the same in every case."""
        return self.follows == "body"

    def values(self, model: Model) -> NDArray[np.generic]:
        """The field on the sector, (n, k), in the number type of the file."""
        data = model.point_data if self.on == "points" else model.cell_data
        missing = [a for a in self.arrays if a not in data]
        if missing:
            raise InputError(
                f"{model.source}: there is no array {missing[0]!r} on {self.on} "
                f"(field {self.name!r}).",
                f"Arrays on {self.on}: {', '.join(data) or 'none'}.",
            )
        if len(self.arrays) == 1:
            array = np.asarray(data[self.arrays[0]])
            array = array.reshape(len(array), -1)
            if self.columns is not None:
                array = array[:, list(self.columns)]
        else:
            array = np.stack([np.asarray(data[a]) for a in self.arrays], axis=1)
        if array.shape[1] != self.quantity.size:
            raise InputError(
                f"{model.source}: array {self.name!r} has {array.shape[1]} components, in the "
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


def fields_of(
    model: Model,
    case: CaseFile,
    frames: Mapping[str, Frame],
    skip_undeclared: bool,
    odd: bool,
    scaled: bool,
) -> tuple[list[Field], list[str]]:
    """All fields of the model, and notes on arrays that were left out.

    Parameters
    ----------
    odd : whether a case has a copy with chi = -1: scalars must then be declared.
    scaled : whether a case is scaled or added: scalars without a trade word must be declared.

    Raises
    ------
    InputError
        For a declared field that is not there or does not fit, and for arrays that neither the
        case nor their name explains, with the lines to add.
    """
    where = str(case.source) if case.source else "the options"
    fields = [_declared(n, t, model, frames, where) for n, t in case.fields.items()]
    used = {(f.on, a) for f in fields for a in f.arrays}
    solid = bool((dimensions(model.mesh.types) == 3).any())
    unknown: list[tuple[str, str, int]] = []
    notes: list[str] = []
    notices: list[str] = []
    parts: dict[tuple[str, str], list[str]] = {}
    for on, data in (("points", model.point_data), ("cells", model.cell_data)):
        other = model.cell_data if on == "points" else model.point_data
        for name, array in data.items():
            if (on, name) in used:
                continue
            size = 1 if array.ndim == 1 else array.shape[1]
            word = None if name in other else trade_word(name, size)
            if word is not None and odd and word.kind == "scalar" and word.follows == "load":
                # whether it follows the load must be said, not guessed
                word = word if stress_odd(name) else None
            if word is not None and solid and (word.kind, size) in _OF_PLANE_MODELS:
                word = None  # a plane storage on solids may be something else
            clash = (
                name in ADDED_ARRAYS or any(f.name == name for f in fields) or not writable(name)
            )
            named = model.component_names.get((on, name), ())
            if (
                word is not None
                and word.kind == "polar vector"
                and any(names_a_rotation(n) for n in named)
            ):
                notices.append(
                    f" The file names the components of {name!r} {' '.join(named)}: translations "
                    "and rotations in one array are two fields, a polar vector and an axial "
                    "vector, each with its columns."
                )
                word = None
            if word is not None and names_cylindrical(named):
                notices.append(
                    f" The file names the components of {name!r} {' '.join(named)}: these are "
                    'cylindrical. Declare the field with frame = "...", and the frame with a '
                    "[frames] table."
                )
                word = None
            part = (
                component_of(name)
                if size == 1 and np.issubdtype(array.dtype, np.floating)
                else None
            )
            if part is not None:
                parts.setdefault((on, part), []).append(name)
                word = None
            if word is not None and not clash:
                fields.append(_by_name(name, on, word, size, named, frames["global"]))
            elif (
                size == 1 and name not in other and not clash
                and (np.issubdtype(array.dtype, np.integer) or not (odd or scaled))
            ):  # fmt: skip
                fields.append(_plain(name, on, array, frames["global"]))
            else:
                unknown.append((on, name, size))
    if unknown and not skip_undeclared:
        notices += [
            f" {', '.join(names)} on {on} look like components of one field: declare it with "
            f"arrays = {json.dumps(names)}."
            for (on, _), names in parts.items()
        ]
        raise _undeclared(model, unknown, case, odd or scaled, notices)
    notes += [f"array {n!r} on {on} is undeclared and was left out" for on, n, _ in unknown]
    return fields, notes


def _declared(
    name: str, table: FieldTable, model: Model, frames: Mapping[str, Frame], where: str
) -> Field:
    arrays = tuple(table.arrays or [name])
    path = f"{where}: fields.{name}"
    on = _where(arrays, table.on, model, path)
    data = model.point_data if on == "points" else model.cell_data
    shapes = [1 if data[a].ndim == 1 else data[a].shape[1] for a in arrays]
    if len(arrays) > 1 and set(shapes) != {1}:
        wide = arrays[int(np.argmax(np.array(shapes) > 1))]
        raise InputError(
            f"{path}.arrays: {wide!r} has {max(shapes)} components.",
            "Name one array, or one array of a single component for each component.",
        )
    columns = None
    size = shapes[0] if len(arrays) == 1 else len(arrays)
    if table.columns is not None:
        bad = [c for c in table.columns if not 1 <= c <= size]
        twice = len(set(table.columns)) < len(table.columns)
        if bad or twice or len(arrays) > 1 or not table.columns:
            raise InputError(
                f"{path}.columns = {table.columns} does not fit {arrays[0]!r} of {size} columns"
                + (": a column is named twice." if twice else "."),
                f"Expected different numbers from 1 to {size}, for a single array.",
            )
        columns = tuple(c - 1 for c in table.columns)
        size = len(columns)
    frame = frames[table.frame]
    components = table.components
    if components is not None and isinstance(frame, Cylindrical):
        components = components.replace("theta", "t").translate(_LABEL_FRAME)
    if components is None and len(arrays) > 1 and size in (3, 4, 6) and "tensor" in table.kind:
        raise InputError(
            f"{path}: a tensor given as one array per component needs its order.",
            'Add components = "xx yy zz xy yz zx" in the order of arrays.',
        )
    try:
        named = model.component_names.get((on, arrays[0]), ()) if len(arrays) == 1 else ()
        if columns is not None:
            named = tuple(named[c] for c in columns) if named else ()
        if names_cylindrical(named) and components is None and isinstance(frame, Global):
            raise InputError(
                f"the file names its components {' '.join(named)}: these are cylindrical.",
                'Add frame = "..." and a [frames] table, or components = "..." if they are not.',
            )
        q, order = _ordered(table.kind, size, components, named, table.shear or "tensor")
    except NotYetError as error:
        raise NotYetError(f"{path}: {error.found}", error.remedy) from None
    except InputError as error:
        raise InputError(f"{path}: {error.found}", error.remedy) from None
    if name in ADDED_ARRAYS:
        raise InputError(
            f"{path}: the output adds an array {name!r} of its own.",
            f'Give the field another key, with arrays = ["{arrays[0]}"].',
        )
    word = trade_word(name, size)
    follows = table.follows or ("body" if q.kind.name == "label" else "load")
    if follows == "body" and table.seam is None:
        seam = word.seam if word and word.seam == "sum" else "lowest copy"
    else:
        seam = table.seam or (word.seam if word else "agree")
    if q.kind.name == "label":
        seam = "lowest copy"
    if seam == "sum" and q.kind.response != "linear":
        raise InputError(
            f'{path}: seam = "sum" does not go with kind = "{q.kind.name}".',
            "Only linear quantities such as forces, heat flows and masses add up at a seam.",
        )
    decided = f"declared{order}"
    if word is not None and word.kind != q.kind.name:
        decided += f" (by name it would be a {word.kind})"
    return Field(name, q, follows, seam, frame, on, arrays, columns,
                 table.unit or "", decided, table.shear is None)  # fmt: skip


def _where(arrays: tuple[str, ...], on: str | None, model: Model, path: str) -> str:
    missing: list[str] = []
    fitting = []
    for place, data in (("points", model.point_data), ("cells", model.cell_data)):
        absent = [a for a in arrays if a not in data]
        missing += absent
        if not absent:
            fitting.append(place)
    if on is not None and on in fitting:
        return on
    if len(fitting) > 1 and on is None:
        raise InputError(
            f"{path}: {arrays[0]!r} is both on points and on cells of {model.source}.",
            'Add on = "points" or on = "cells".',
        )
    if fitting and on is None:
        return fitting[0]
    place = f" on {on}" if on else ""
    raise InputError(
        f"{path}: {model.source} has no array {missing[0]!r}{place}.",
        f"Arrays on points: {', '.join(model.point_data) or 'none'}; "
        f"on cells: {', '.join(model.cell_data) or 'none'}.",
    )


def _by_name(
    name: str, on: str, word: TradeWord, size: int, named: tuple[str, ...], frame: Frame
) -> Field:
    q, order = _ordered(word.kind, size, None, named, "tensor")
    decided = f"by name{order}"
    seam = "lowest copy" if word.follows == "body" and word.seam != "sum" else word.seam
    return Field(name, q, word.follows, seam, frame, on, (name,), None, "", decided, True)


def _ordered(
    kind: str, size: int, components: str | None, named: tuple[str, ...], shear: str
) -> tuple[Quantity, str]:
    """The quantity in the declared order, else in the order that the file itself names."""
    if components is None and kind in KINDS:
        order = component_order(named, KINDS[kind].rank)
        if order is not None and len(order.split()) == size:
            try:
                return quantity(kind, size, order, shear), ", order by the file"
            except InputError:
                pass  # names that mean something else; the usual order of this size
    return quantity(kind, size, components, shear), ""


def _plain(name: str, on: str, array: NDArray[np.generic], frame: Frame) -> Field:
    if np.issubdtype(array.dtype, np.integer):
        q, follows, seam, why = quantity("label", 1), "body", "lowest copy", "integers: a label"
    else:
        q, follows, seam, why = quantity("scalar", 1), "load", "agree", "one component: a scalar"
    return Field(name, q, follows, seam, frame, on, (name,), None, "", why)


_KINDS_BY_SIZE = {
    1: "scalar, invariant, pseudoscalar or label",
    2: "polar vector",
    3: "polar vector, axial vector or principal values",
    4: "symmetric tensor",
    6: "symmetric tensor; translations and rotations are two fields, a polar vector with "
       "columns = [1, 2, 3] and an axial vector with columns = [4, 5, 6]",
    9: "tensor",
}  # fmt: skip


def _undeclared(
    model: Model,
    unknown: list[tuple[str, str, int]],
    case: CaseFile,
    odd: bool,
    notices: list[str],
) -> InputError:
    lines = []
    taken = set(case.fields)
    for on, name, size in unknown:
        other = model.cell_data if on == "points" else model.point_data
        key = name
        if name in ADDED_ARRAYS or name in other or key in taken or not writable(name):
            key = f"{name}_on_{on}" if writable(name) else f"array_on_{on}"
        taken.add(key)
        kinds = _KINDS_BY_SIZE.get(size, "label, or parts of it with columns = [..]")
        lines.append(f'[fields.{_toml_key(key)}]\n  kind = "..."  # {size} component(s): {kinds}')
        if key != name:
            lines.append(f"arrays = [{_toml_text(name)}]")
        if name in other:
            lines.append(f'on = "{on}"')
    names = ", ".join(f"{n!r} on {on} ({s})" for on, n, s in unknown)
    because = (
        " With an antisymmetric load, a factor or a sum even a single number must be declared: a "
        "scalar follows the load, an invariant and a property of the body do not."
        if odd and any(s == 1 for _, _, s in unknown)
        else ""
    )
    because += "".join(notices)
    option = (
        "" if case.source else '\n  or give options such as --field "NAME=polar vector",'
    )  # fmt: skip
    return InputError(
        f"{model.source}: arrays that neither the case nor their name explains: {names}.{because}",
        "Add to the case file:\n  "
        + "\n  ".join(lines)
        + f"{option}\n  or leave them out with --skip-undeclared.",
    )


def _toml_key(name: str) -> str:
    bare = name.isascii() and name.replace("_", "").replace("-", "").isalnum()
    return name if bare else _toml_text(name)


def _toml_text(text: str) -> str:
    """A TOML basic string; JSON's escapes are TOML's."""
    return json.dumps(text, ensure_ascii=False).replace("\x7f", "\\u007f")


def check_shear(fields: Iterable[Field], placements: Iterable[Placement]) -> None:
    """Refuse an assumed shear word where tensor and engineering shear would differ."""
    copies = list(placements)
    for field in fields:
        if field.kind != "symmetric tensor" or not field.shear_assumed:
            continue
        if "strain" not in field.name.lower():
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
        if stress_odd(field.name) and field.quantity.size == 1:
            raise InputError(
                f"Field {field.name!r} in {where}: a lone principal, signed or interaction measure "
                "is odd in the stress but not linear; the largest principal stress of a copy is "
                "minus the smallest of the sector.",
                'Give all three principal values as one field (kind = "principal values"), or '
                'leave it out and ask for output.derived = ["principal stresses"].',
            )
        if not_linear(field.name):
            raise InputError(
                f"Field {field.name!r} in {where}: it is not linear in the response, so an "
                "antisymmetric load has no rule for it.",
                "Leave it out, and use the displacement gradient in its place.",
            )
    check_invariants(listed, where)


def check_invariants(fields: Iterable[Field], where: str) -> None:
    """Refuse an invariant, told by its name, that is declared to be something linear."""
    for field in fields:
        word = trade_word(field.name, field.quantity.size)
        if word and word.kind == "invariant" and field.summable:
            raise InputError(
                f"Field {field.name!r} is declared a {field.kind}, which changes sign with the "
                f"load and adds up, in {where}; by its name it is an invariant, which does not.",
                f'Write kind = "invariant" under [fields.{field.name}].',
            )
