"""Declarations: what each array of a model is, as the case declares it or as its name tells."""

from __future__ import annotations

import json
from collections.abc import Mapping
from dataclasses import dataclass, field

import numpy as np
from numpy.typing import NDArray

from expander.casefile import CaseFile, FieldTable, writable
from expander.errors import InputError, NotYetError
from expander.fields import Field
from expander.frames import Cylindrical, Frame, Global
from expander.model import Mesh, Model
from expander.quantities import KINDS, Quantity, quantity
from expander.tradewords import (
    TradeWord,
    component_of,
    component_order,
    label_word,
    names_a_rotation,
    names_cylindrical,
    stress_odd,
    trade_word,
)

ADDED_ARRAYS = ("copy", "sector_cell", "sector_point")
_OF_PLANE_MODELS = {("polar vector", 2), ("axial vector", 1), ("symmetric tensor", 3),
                    ("symmetric tensor", 4), ("tensor", 4)}  # fmt: skip
_LABEL_FRAME = str.maketrans("rt", "xy")  # r, t, z are the components x, y, z of a local frame


@dataclass
class _Unexplained:
    """Arrays that neither the case nor their name explains, and what can be said of them."""

    arrays: list[tuple[str, str, int]] = field(default_factory=list)
    notices: list[str] = field(default_factory=list)
    parts: dict[tuple[str, str], list[str]] = field(default_factory=dict)


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
    odd : whether a case has a copy with chi = -1: single numbers must then be declared.
    scaled : whether a case is scaled or added: scalars without a trade word must be declared.

    Raises
    ------
    InputError
        For a declared field that is not there or does not fit, and for arrays that neither the
        case nor their name explains, with the lines to add.
    """
    where = str(case.source) if case.source else "the options"
    fields = [_declared(n, t, model, frames, where) for n, t in case.fields.items()]
    used = {(f.on, a) for f in fields for a in (*f.arrays, *f.second)}
    left = _Unexplained()
    for on, data in (("points", model.point_data), ("cells", model.cell_data)):
        other = model.cell_data if on == "points" else model.point_data
        for name, array in data.items():
            if (on, name) in used:
                continue
            free = (
                name not in other and name not in ADDED_ARRAYS and writable(name)
                and all(f.name != name for f in fields)
            )  # fmt: skip
            found = _told(name, on, array, model, frames["global"], odd, scaled, left)
            if found is not None and free:
                fields.append(found)
            else:
                left.arrays.append((on, name, 1 if array.ndim == 1 else array.shape[1]))
    if left.arrays and not skip_undeclared:
        raise _undeclared(model, left, case, odd or scaled)
    return fields, [f"array {n!r} on {on} is undeclared and was left out" for on, n, _ in
                    left.arrays]  # fmt: skip


def _told(
    name: str,
    on: str,
    array: NDArray[np.generic],
    model: Model,
    frame: Frame,
    odd: bool,
    scaled: bool,
    left: _Unexplained,
) -> Field | None:
    """The field that an undeclared array is by its name, or None if that cannot be told."""
    size = 1 if array.ndim == 1 else array.shape[1]
    if size == 1 and np.issubdtype(array.dtype, np.integer):
        return _integer(name, on, array, frame, odd)
    part = component_of(name) if size == 1 else None
    if part is not None:
        left.parts.setdefault((on, part), []).append(name)
        return None
    word = trade_word(name, size, on)
    if word is None:
        plain = size == 1 and not odd and not scaled
        return _plain(name, on, "scalar", "one component: a scalar", frame) if plain else None
    if (word.kind, size) in _OF_PLANE_MODELS and not _flat(model.mesh):
        return None  # a storage of plane models may be something else in space
    if odd and word.kind == "scalar" and word.follows == "load" and not stress_odd(name):
        return None  # whether it follows the load must be said, not guessed
    named = model.component_names.get((on, name), ())
    problem = _told_by_components(named, word.kind, frame)
    if problem:
        left.notices.append(f" The file names the components of {name!r} {problem}")
        return None
    return _by_name(name, on, word, size, named, frame)


def _integer(
    name: str, on: str, array: NDArray[np.generic], frame: Frame, odd: bool
) -> Field | None:
    """Integers are labels: by their name, as members of a set (0 and 1 in bytes), or, where
    nothing changes sign, in general."""
    if label_word(name):
        return _plain(name, on, "label", "by name", frame)
    if array.dtype.itemsize == 1 and bool(np.isin(array, (0, 1)).all()):
        return _plain(name, on, "label", "0 and 1 in bytes: members of a set", frame)
    if odd or trade_word(name, 1, on) is not None:
        return None
    return _plain(name, on, "label", "integers: a label", frame)


def _flat(mesh: Mesh) -> bool:
    """Whether the model lies in a plane normal to z, as plane models do."""
    return bool(np.ptp(mesh.bounds[:, 2]) <= 1e-9 * mesh.size)


def _told_by_components(named: tuple[str, ...], kind: str, frame: Frame) -> str:
    """What the file's names of components say against a kind or frame, as the end of a sentence."""
    words = " ".join(named)
    if kind == "polar vector" and any(names_a_rotation(n) for n in named):
        return (
            f"{words}: translations and rotations in one array are two fields, a polar vector and "
            "an axial vector, each with its columns."
        )
    if isinstance(frame, Global) and names_cylindrical(named):
        return (
            f'{words}: these are cylindrical. Declare the field with frame = "...", and the frame '
            "with a [frames] table."
        )
    return ""


def _declared(
    name: str, table: FieldTable, model: Model, frames: Mapping[str, Frame], where: str
) -> Field:
    arrays = tuple(table.arrays or table.real or table.amplitude or [name])
    second = tuple(table.imaginary or table.phase_degrees or [])
    path = f"{where}: fields.{name}"
    on = _where(arrays + second, table.on, model, path)
    data = model.point_data if on == "points" else model.cell_data
    _check_second(arrays, second, data, path)
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
        if components is None:
            problem = _told_by_components(named, table.kind, frame)
            if problem:
                raise InputError(f"the file names its components {problem}",
                                 'Or give components = "..." if they are not.')  # fmt: skip
        q, order = _ordered(table.kind, size, components, named, frame, table.shear or "tensor")
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
    same_kind = word is not None and word.kind == q.kind.name
    follows = table.follows or (
        word.follows if word and same_kind else "body" if q.kind.name == "label" else "load"
    )
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
                 table.unit or "", decided, table.shear is None,
                 q.kind.rank == 2 and components is None and not order,
                 second, table.amplitude is not None)  # fmt: skip


def _check_second(
    arrays: tuple[str, ...],
    second: tuple[str, ...],
    data: Mapping[str, NDArray[np.generic]],
    path: str,
) -> None:
    """The two parts of a complex field must have the same shape."""
    for a, b in zip(arrays, second, strict=False):
        if data[a].shape != data[b].shape:
            raise InputError(
                f"{path}: {a!r} has shape {data[a].shape}, {b!r} {data[b].shape}.",
                "The two arrays of a complex field have the same shape.",
            )


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
    q, order = _ordered(word.kind, size, None, named, frame, "tensor")
    seam = "lowest copy" if word.follows == "body" and word.seam != "sum" else word.seam
    assumed = q.kind.rank == 2 and not order
    return Field(name, q, word.follows, seam, frame, on, (name,), None, "", f"by name{order}",
                 True, assumed)  # fmt: skip


def _ordered(
    kind: str,
    size: int,
    components: str | None,
    named: tuple[str, ...],
    frame: Frame,
    shear: str,
) -> tuple[Quantity, str]:
    """The quantity in the declared order, else in the order that the file itself names."""
    if components is not None or kind not in KINDS or not named or KINDS[kind].rank == 0:
        return quantity(kind, size, components, shear), ""
    order = component_order(named, KINDS[kind].rank, isinstance(frame, Cylindrical))
    if order is not None:
        try:
            return quantity(kind, size, order, shear), ", order by the file"
        except InputError:
            pass  # the names mean something else, and that is said
    usual = quantity(kind, size, None, shear)
    return usual, f", order assumed {' '.join(usual.components)}, not {' '.join(named)}"


def _plain(name: str, on: str, kind: str, why: str, frame: Frame) -> Field:
    follows, seam = ("body", "lowest copy") if kind == "label" else ("load", "agree")
    return Field(name, quantity(kind, 1), follows, seam, frame, on, (name,), None, "", why)


_KINDS_BY_SIZE = {
    1: "scalar, invariant, pseudoscalar or label",
    2: "polar vector",
    3: "polar vector, axial vector or principal values",
    4: "symmetric tensor",
    6: "symmetric tensor; translations and rotations are two fields, a polar vector with "
       "columns = [1, 2, 3] and an axial vector with columns = [4, 5, 6]",
    9: "tensor",
}  # fmt: skip


def _undeclared(model: Model, left: _Unexplained, case: CaseFile, odd: bool) -> InputError:
    unknown = left.arrays
    notices = left.notices + [
        f" {', '.join(names)} on {on} look like components of one field: declare it with "
        f"arrays = {json.dumps(names)}."
        for (on, _), names in left.parts.items()
    ]
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
