"""The case file: its tables as validated data, and one clear message for what is wrong in it."""

from __future__ import annotations

import difflib
import re
import tomllib
import unicodedata
from collections.abc import Mapping
from pathlib import Path
from typing import Annotated, Any, Literal

from pydantic import BaseModel, BeforeValidator, ConfigDict, Field, ValidationError

from expander.errors import InputError, NotYetError
from expander.quantities import KINDS, LATER_KINDS

Vector = Annotated[list[float], Field(min_length=3, max_length=3)]
Direction = Literal["x", "y", "z"] | Vector
LoadWord = Literal["symmetric", "antisymmetric"]
SeamRule = Literal["agree", "sum", "recovered"]


def _one_or_many(value: Any) -> Any:
    return [value] if isinstance(value, str) else value


def _one_table(value: Any) -> Any:
    return [value] if isinstance(value, Mapping) else value


Names = Annotated[list[str], BeforeValidator(_one_or_many)]
Arrays = Annotated[Names, Field(min_length=1)]


class Table(BaseModel):
    """A table of the case file: no unknown keys, no conversion of types but int to float."""

    model_config = ConfigDict(extra="forbid", strict=True, frozen=True, allow_inf_nan=False)


class ModelTable(Table):
    file: str | None = None
    linear: bool = True
    results: Names = []
    unit: str | None = None
    time_factor: Literal["+i omega t", "-i omega t"] = "+i omega t"


class MirrorTable(Table):
    name: str | None = None
    normal: Direction
    point: Vector = [0.0, 0.0, 0.0]
    load: LoadWord = "symmetric"
    held: bool = False


class CyclicTable(Table):
    sectors: int = Field(ge=2)
    axis: Direction = "z"
    point: Vector = [0.0, 0.0, 0.0]
    nodal_diameters: int = Field(default=0, ge=0)
    phase: Literal["auto", "+", "-"] = "auto"


class FieldTable(Table):
    kind: str
    components: str | None = None
    shear: Literal["tensor", "engineering"] | None = None
    seam: SeamRule | None = None
    follows: Literal["load", "body"] | None = None
    frame: str = "global"
    arrays: Arrays | None = None
    real: Arrays | None = None
    imaginary: Arrays | None = None
    amplitude: Arrays | None = None
    phase_degrees: Arrays | None = None
    columns: list[int] | None = None
    on: Literal["points", "cells"] | None = None
    unit: str | None = None


class FrameTable(Table):
    type: Literal["global", "cylindrical"]
    axis: Direction = "z"
    point: Vector = [0.0, 0.0, 0.0]


class CaseTable(Table):
    name: str
    file: str | None = None
    results: Names | None = None
    load: LoadWord | dict[str, LoadWord] = {}
    nodal_diameters: int | None = Field(default=None, ge=0)
    phase: Literal["auto", "+", "-"] | None = None
    factor: float = 1.0
    wave: Literal["as given", "forward", "backward", "standing"] = "as given"
    undamped: bool = False
    mean: str | None = None
    mode_mass: Literal["sector", "sector, real pair"] | None = None


Complex = Annotated[list[float], Field(min_length=2, max_length=2)]


class SumTable(Table):
    name: str
    terms: dict[str, float | Complex] = Field(min_length=1)
    mean: str | None = None
    part: Literal["complex", "real"] = "complex"


class SeamTable(Table):
    tolerance: float | None = Field(default=None, gt=0.0)
    limit: float = Field(default=1e-4, gt=0.0)
    scatter: float = Field(default=6.0, gt=0.0)
    open: Literal["refuse", "keep apart"] = "refuse"


class ExpectTable(Table):
    """What the user expects of the whole body, for all results or the one named."""

    result: str | None = None
    force: Vector | None = None
    moment: Vector | None = None
    about: Vector = [0.0, 0.0, 0.0]
    field: str | None = None
    mass: float | None = Field(default=None, gt=0.0)
    pieces: int | None = Field(default=None, ge=1)
    balance: bool = True
    mode_shape: bool = False
    tolerance: float = Field(default=1e-3, gt=0.0)


class SectionTable(Table):
    """A plane through the whole body across which force and moment are wanted."""

    name: str | None = None
    normal: Direction
    point: Vector = [0.0, 0.0, 0.0]
    about: Vector | None = None
    field: str | None = None


class ReReferenceTable(Table):
    """The rigid-body motion that is taken out of the displacement."""

    method: Literal["least squares", "three points"]
    nodes: list[int] | None = None


class OutputTable(Table):
    file: str | None = None
    results: Annotated[Names, Field(min_length=1)] | None = None
    copies: list[int] | None = None
    merge: bool = True
    encoding: Literal["raw"] = "raw"
    derived: list[Literal["von mises", "principal stresses", "magnitude"]] = []
    phases: int | None = Field(default=None, ge=1, le=3600)
    peaks: list[Literal["von mises", "principal stresses", "magnitude"]] = []


class CaseFile(Table):
    """The whole contract of a case.

    Attributes
    ----------
    folder : folder that file names in the case are relative to.
    source : the case file, or None when the case was given as options.
    """

    model: ModelTable = ModelTable()
    mirror: list[MirrorTable] = []
    cyclic: CyclicTable | None = None
    fields: dict[str, FieldTable] = {}
    frames: dict[str, FrameTable] = {}
    case: list[CaseTable] = []
    sum: list[SumTable] = []
    seam: SeamTable = SeamTable()
    expect: Annotated[list[ExpectTable], BeforeValidator(_one_table)] = []
    section: Annotated[list[SectionTable], BeforeValidator(_one_table)] = []
    re_reference: ReReferenceTable | None = None
    output: OutputTable = OutputTable()
    folder: Path = Path()
    source: Path | None = None


# Other names of the trade, for the suggestion only.
_OTHER_WORDS = {
    "pseudovector": "axial vector",
    "vector": "polar vector",
    "tensor6": "symmetric tensor",
}

# Keys of the contract that later versions serve; patterns over dotted paths.
_LATER = {
    r"model\.(step|once)": "Steps and parts modelled whole",
    r"case\[\d+\]\.step": "Steps",
}
_LATER_VALUES = {
    (r"output\.encoding", "compressed"): "Compressed files",
    (r"fields\..+\.on", "corners"): "Values at element corners",
}


def read_case(path: Path, overrides: Mapping[str, Any] | None = None) -> CaseFile:
    """Read and validate a case file.

    Raises
    ------
    InputError
        Naming file, key and allowed values.
    """
    try:
        raw = tomllib.loads(path.read_text(encoding="utf-8-sig"))  # with a byte order mark or not
    except FileNotFoundError:
        raise InputError(f"{path}: there is no such case file.", "Check the path.") from None
    except IsADirectoryError:
        raise InputError(f"{path} is a folder.", "Expected a case file (.toml).") from None
    except UnicodeDecodeError:
        raise InputError(f"{path} is not a text file.", "Expected TOML in UTF-8.") from None
    except tomllib.TOMLDecodeError as error:
        raise InputError(
            f"{path} is not valid TOML: {error}.",
            'Text goes in double quotes (normal = "x"), lists in brackets, tables in [..].',
        ) from None
    except OSError as error:
        raise InputError(f"{path} cannot be read: {error.strerror}.") from None
    for dotted, value in (overrides or {}).items():
        assign(raw, dotted, value)
    return validate_case(raw, path.parent, path)


def validate_case(raw: Mapping[str, Any], folder: Path, source: Path | None = None) -> CaseFile:
    """Turn raw tables into a `CaseFile`.

    Examples
    --------
    >>> case = validate_case({"model": {"file": "half.vtu"}, "mirror": [{"normal": "x"}]}, Path())
    >>> case.mirror[0].load, case.seam.limit
    ('symmetric', 0.0001)
    """
    where = str(source) if source else "the options"
    reserved = {"folder", "source"} & set(raw)
    if reserved:
        raise InputError(f"{where}: unknown table {reserved.pop()!r}.", _allowed(CaseFile))
    for path, value in _walk(raw):
        for pattern, what in _LATER.items():
            if re.fullmatch(pattern, path):
                raise NotYetError(
                    f"{where}: {path} belongs to the contract, but not yet to this version.",
                    f"{what} come with a later version; remove the key to go on without.",
                )
        for (pattern, word), what in _LATER_VALUES.items():
            if value == word and re.fullmatch(pattern, path):
                raise NotYetError(
                    f"{where}: {path} = {word!r} is not yet served by this version.",
                    f"{what} come with a later version.",
                )
    try:
        case = CaseFile.model_validate({**raw, "folder": folder, "source": source})
    except ValidationError as error:
        raise _explained(error, where) from None
    for name, table in case.fields.items():
        if table.kind in LATER_KINDS:
            raise NotYetError(
                f"{where}: fields.{name}.kind = {table.kind!r} belongs to the contract, but not "
                "yet to this version.",
                "Quantities of rank 4 come with a later version; leave the table out and give "
                "--skip-undeclared.",
            )
        if table.kind not in KINDS:
            raise InputError(
                f"{where}: fields.{name}.kind = {table.kind!r} is unknown.",
                _suggest(_OTHER_WORDS.get(table.kind, table.kind), list(KINDS))
                + "Expected one of: "
                + ", ".join(KINDS)
                + ".",
            )
    _check_names(case, where)
    return case


def _check_names(case: CaseFile, where: str) -> None:
    """Names must be unique and refer to something."""
    planes = plane_names(case)
    for name in [*planes, *(c.name for c in case.case), *(s.name for s in case.sum), *case.fields,
                 *case.frames]:  # fmt: skip
        if not writable(name):
            raise InputError(
                f"{where}: the name {name!r} holds control characters, which no file or table can "
                "show.",
                "Use letters, digits, blanks and punctuation; a field keeps the array's own name "
                "with arrays = [..].",
            )
    _unique(planes, f"{where}: two planes are named", "Give each [[mirror]] its own name.")
    cases = [c.name for c in case.case]
    sums = [s.name for s in case.sum]
    _unique(cases + sums, f"{where}: two results are named", "Give each [[case]] and [[sum]] "
            "its own name.")  # fmt: skip
    for entry in case.case:
        if isinstance(entry.load, dict):
            for plane in entry.load:
                if plane not in planes:
                    raise InputError(
                        f"{where}: case {entry.name!r} gives a load word to plane {plane!r}, "
                        "which is not declared.",
                        _suggest(plane, planes)
                        + f"Declared planes: {', '.join(planes) or 'none'}.",
                    )
        if entry.nodal_diameters is not None and case.cyclic is None:
            raise InputError(
                f"{where}: case {entry.name!r} has nodal_diameters, but there is no [cyclic] "
                "table.",
                "Add a [cyclic] table with sectors = N, or remove the key.",
            )
    if case.sum and not case.case:
        raise InputError(
            f"{where}: [[sum]] needs [[case]] tables to add up.",
            "Add a [[case]] with a name and a file for each result that is summed.",
        )
    for entry_sum in case.sum:
        for term in entry_sum.terms:
            if term not in cases:
                raise InputError(
                    f"{where}: sum {entry_sum.name!r} adds case {term!r}, which is not declared.",
                    _suggest(term, cases) + f"Declared cases: {', '.join(cases)}.",
                )
    means = [(t.name, t.mean) for t in case.case] + [(t.name, t.mean) for t in case.sum]
    for of, mean in means:
        if mean is not None and mean not in cases:
            raise InputError(
                f"{where}: {of!r} has the mean {mean!r}, which is not a case.",
                _suggest(mean, cases) + f"Declared cases: {', '.join(cases)}.",
            )
    results = cases + sums
    named = [("output.results", r) for r in case.output.results or []]
    named += [("expect.result", e.result) for e in case.expect if e.result is not None]
    for key, result in named:
        if result not in results:
            raise InputError(
                f"{where}: {key} names {result!r}, which is neither a case nor a sum.",
                _suggest(result, results) + f"Declared: {', '.join(results) or 'none'}.",
            )
    _unique(section_names(case), f"{where}: two sections are named",
            "Give each [[section]] its own name.")  # fmt: skip
    held = case.re_reference
    if held is not None and (held.method == "three points") != (held.nodes is not None):
        raise InputError(
            f"{where}: re_reference.method = {held.method!r} "
            + ("needs nodes." if held.nodes is None else "takes no nodes."),
            'Expected nodes = [12, 40, 77] with method = "three points", and only there.',
        )
    for name, table in case.fields.items():
        _check_parts(name, table, where)
        if table.frame != "global" and table.frame not in case.frames:
            raise InputError(
                f"{where}: fields.{name}.frame = {table.frame!r} is not declared.",
                _suggest(table.frame, list(case.frames))
                + f'Add [frames.{table.frame}] with type = "cylindrical", axis and point.',
            )


_PARTS = (("real", "imaginary"), ("amplitude", "phase_degrees"))


def _check_parts(name: str, table: FieldTable, where: str) -> None:
    """A complex field is stored as two sets of arrays of one of two kinds."""
    given = [k for pair in _PARTS for k in pair if getattr(table, k) is not None]
    if not given:
        return
    pair = next(p for p in _PARTS if given[0] in p)
    first, second = (getattr(table, k) for k in pair)
    if tuple(given) != pair or table.arrays is not None or len(first) != len(second):
        raise InputError(
            f"{where}: fields.{name} gives {' and '.join(given)}"
            + (" and arrays" if table.arrays is not None else "")
            + ": a complex field is two arrays, or two lists of as many arrays.",
            f'Expected real = "{name}_real" and imaginary = "{name}_imag", or amplitude = ".." and '
            'phase_degrees = "..".',
        )


def section_names(case: CaseFile) -> list[str]:
    """Names of the sections, "section 1", "section 2", .. where none is given."""
    return [s.name or f"section {k + 1}" for k, s in enumerate(case.section)]


def writable(name: str) -> bool:
    """Whether XML can hold the name: it has no control characters but tabs and line ends."""
    return not any(unicodedata.category(c) == "Cc" and c not in "\t\n\r" for c in name)


def plane_names(case: CaseFile) -> list[str]:
    """Names of the cut planes, "plane 1", "plane 2", .. where none is given."""
    return [m.name or f"plane {k + 1}" for k, m in enumerate(case.mirror)]


def _unique(names: list[str], found: str, remedy: str) -> None:
    for name in names:
        if names.count(name) > 1:
            raise InputError(f"{found} {name!r}.", remedy)


def assign(raw: dict[str, Any], dotted: str, value: Any) -> None:
    """Set ``raw["a"]["b"]`` for the key ``a.b``; ``mirror.0.load`` reaches into a list."""
    keys = dotted.split(".")
    target: Any = raw
    try:
        for key in keys[:-1]:
            target = target[_place(key)] if isinstance(target, list) else target.setdefault(key, {})
        if isinstance(target, list):
            target[_place(keys[-1])] = value
        else:
            target[keys[-1]] = value
    except (ValueError, IndexError, AttributeError, TypeError):
        raise InputError(
            f"--set {dotted}: there is no such place in the case.",
            "Expected dotted keys of the case file, lists counted from 0: mirror.0.load=...",
        ) from None


def _place(key: str) -> int:
    if not key.isdecimal():
        raise ValueError(key)
    return int(key)


def _walk(value: Any, path: str = "") -> list[tuple[str, Any]]:
    found: list[tuple[str, Any]] = [(path, value)] if path else []
    if isinstance(value, Mapping):
        for key, inner in value.items():
            found += _walk(inner, f"{path}.{key}" if path else str(key))
    elif isinstance(value, list):
        for k, inner in enumerate(value):
            found += _walk(inner, f"{path}[{k}]")
    return found


def _suggest(word: str, known: list[str]) -> str:
    close = difflib.get_close_matches(word, known, n=1)
    return f"Did you mean {close[0]!r}? " if close else ""


def _allowed(table: type[Table]) -> str:
    keys = [k for k in table.model_fields if k not in ("folder", "source")]
    return "Allowed: " + ", ".join(keys) + "."


_TABLES: dict[str, type[Table]] = {
    "model": ModelTable, "mirror": MirrorTable, "cyclic": CyclicTable, "fields": FieldTable,
    "frames": FrameTable, "case": CaseTable, "sum": SumTable, "seam": SeamTable,
    "output": OutputTable, "expect": ExpectTable, "section": SectionTable,
    "re_reference": ReReferenceTable,
}  # fmt: skip


def _explained(error: ValidationError, where: str) -> InputError:
    """The first problem as one message: key, what was found, what is allowed."""
    problems = error.errors(include_url=False)
    first = next((p for p in problems if p["type"] == "extra_forbidden"), problems[0])
    named = [
        part
        for part in first["loc"]
        if not (isinstance(part, str) and (part in _UNION_PARTS or "[" in part))
    ]
    path = ""
    for part in named:
        path += f"[{part}]" if isinstance(part, int) else (f".{part}" if path else str(part))
    table = _TABLES.get(str(named[0]), CaseFile) if named else CaseFile
    if first["type"] == "extra_forbidden":
        owner = CaseFile if len(named) == 1 else table
        known = list(owner.model_fields)
        return InputError(
            f"{where}: unknown key {path}.", _suggest(str(named[-1]), known) + _allowed(owner)
        )
    if first["type"] == "missing":
        return InputError(f"{where}: {path} is missing.", _example(str(named[-1])))
    value = first["input"]
    shown = repr(value) if len(repr(value)) < 80 else f"a {type(value).__name__}"
    same = [p for p in problems if p["loc"][: len(named)] == first["loc"][: len(named)]]
    reasons = list(dict.fromkeys(_reason(p["type"], p["msg"], named) for p in same))
    return InputError(f"{where}: {path} = {shown} is not valid.", "; or ".join(reasons) + ".")


def _reason(kind: str, message: str, named: list[Any]) -> str:
    """What was expected, in words of the case file."""
    name = str(named[0])
    if name in ("mirror", "case", "sum") and len(named) == 1:
        return f"expected tables headed [[{name}]], one for each"
    if kind in ("model_type", "model_attributes_type", "dict_type"):
        table = {1: f"[{name}]", 2: f"[{name}.{named[-1]}]" if name in ("fields", "frames")
                 else f"[[{name}]]"}.get(len(named))  # fmt: skip
        if name == "fields" and len(named) == 1:
            table = "[fields.NAME] for each field"
        keys = ", ".join(_TABLES.get(name, CaseFile).model_fields)
        if table is None:  # load = {..}, terms = {..}
            return f"expected names with a value for each: {named[-1]} = {{ name = value }}"
        if name == "fields":
            return f'expected a table {table} with kind = "..." and, if needed, {keys[6:]}'
        return f"expected a table {table} with the keys {keys}"
    return message.replace("Input should be", "expected").replace("List should", "the list should")


_UNION_PARTS = {"list", "literal", "dict", "str", "function-before"}


def _example(key: str) -> str:
    lines = {
        "normal": 'Add normal = "x" (or "y", "z", or three numbers).',
        "sectors": "Add sectors = 12, the number of sectors of the whole ring.",
        "kind": "Add kind = one of: " + ", ".join(KINDS) + ".",
        "name": 'Add name = "...".',
        "terms": "Add terms = { even = 1.0, odd = 0.5 }.",
        "type": 'Add type = "cylindrical".',
    }
    return lines.get(key, f"Add {key}.")
