"""Options that describe a case, shared by all commands that take one."""

from __future__ import annotations

import re
import tomllib
from collections.abc import Callable
from pathlib import Path
from typing import TYPE_CHECKING, Any, TypeVar

import click

from expander.errors import InputError

if TYPE_CHECKING:
    from expander.casefile import CaseFile

F = TypeVar("F", bound=Callable[..., Any])

_OPTIONS = (
    click.argument("case", type=click.Path(path_type=Path), metavar="CASE"),
    click.option("--mirror", multiple=True, metavar="PLANE",
                 help="A cut plane: NORMAL [at X,Y,Z] [symmetric|antisymmetric] [called NAME]; "
                      "NORMAL is x, y, z or NX,NY,NZ. Repeat for more planes."),
    click.option("--sectors", type=int, help="Number of sectors of a cyclic body."),
    click.option("--axis", metavar="AXIS", help="Cyclic axis: x, y, z or AX,AY,AZ (default z)."),
    click.option("--axis-point", metavar="X,Y,Z", help="A point of the axis (default 0,0,0)."),
    click.option("--nodal-diameters", type=int, metavar="H", help="Nodal diameters (default 0)."),
    click.option("--field", multiple=True, metavar="NAME=KIND",
                 help='What an array is, for example "spin=axial vector". Repeat for more.'),
    click.option("--set", "settings", multiple=True, metavar="KEY=VALUE",
                 help="Any key of the case file, for example fields.stress.seam=recovered "
                      "or mirror.0.load=antisymmetric; it overrides the case file."),
    click.option("--skip-undeclared", is_flag=True,
                 help="Leave out arrays that nothing explains, and say so."),
    click.option("--allow-nan", is_flag=True, help="Accept values that are not finite numbers; "
                 "they are counted."),
)  # fmt: skip


def case_options(function: F) -> F:
    """Add the argument CASE and the options that describe a case."""
    for option in reversed(_OPTIONS):
        function = option(function)
    return function


def case_from(
    case: Path,
    mirror: tuple[str, ...] = (),
    sectors: int | None = None,
    axis: str | None = None,
    axis_point: str | None = None,
    nodal_diameters: int | None = None,
    field: tuple[str, ...] = (),
    settings: tuple[str, ...] = (),
    output: Path | None = None,
    sections: tuple[str, ...] = (),
) -> CaseFile:
    """The case from a case file (.toml) or from a model file with options."""
    from expander.casefile import read_case, validate_case

    overrides: dict[str, Any] = {}
    for setting in settings:
        key, value = _pair(setting, "--set", "KEY=VALUE")
        overrides[key] = _toml_value(value)
    if output is not None:
        overrides["output.file"] = str(output.absolute())
    if sections:
        overrides["section"] = [_plane(words, "--section") for words in sections]
    if case.suffix.lower() == ".toml":
        given = [n for n, v in (("--mirror", mirror), ("--sectors", sectors), ("--axis", axis),
                                ("--axis-point", axis_point), ("--field", field),
                                ("--nodal-diameters", nodal_diameters))
                 if v not in (None, ())]  # fmt: skip
        if given:
            raise InputError(
                f"{given[0]} describes a case, but {case} is a case file already.",
                "Use --set KEY=VALUE to override keys of a case file.",
            )
        return read_case(case, overrides)
    raw: dict[str, Any] = {"model": {"file": case.name}, "fields": {}}
    if mirror:
        raw["mirror"] = [_plane(words) for words in mirror]
    if sectors is not None or axis or axis_point or nodal_diameters is not None:
        cyclic: dict[str, Any] = {}
        if sectors is not None:
            cyclic["sectors"] = sectors
        if axis:
            cyclic["axis"] = _direction(axis, "--axis")
        if axis_point:
            cyclic["point"] = _triple(axis_point, "--axis-point")
        if nodal_diameters is not None:
            cyclic["nodal_diameters"] = nodal_diameters
        raw["cyclic"] = cyclic
    for entry in field:
        name, kind = _pair(entry, "--field", "NAME=KIND")
        raw["fields"][name] = {"kind": kind.strip("\"'")}
    from expander.casefile import assign

    for key, value in overrides.items():
        assign(raw, key, value)
    return validate_case(raw, case.parent)


_PLANE = re.compile(
    r"\s*(?P<normal>\S+?)(\s+at\s+(?P<point>\S+))?"
    r"(\s+(?P<load>symmetric|antisymmetric))?(\s+called\s+(?P<name>.+?))?\s*"
)


def _plane(words: str, option: str = "--mirror") -> dict[str, Any]:
    found = _PLANE.fullmatch(words)
    if not found or (found["load"] and option != "--mirror"):
        raise InputError(
            f"{option} {words!r} is not understood.",
            'Expected for example "x", "y at 0,0.5,0'
            + (" antisymmetric" if option == "--mirror" else "")
            + '" or "1,1,0 called web".',
        )
    plane: dict[str, Any] = {"normal": _direction(found["normal"], option)}
    if found["point"]:
        plane["point"] = _triple(found["point"], option)
    if found["load"]:
        plane["load"] = found["load"]
    if found["name"]:
        plane["name"] = found["name"]
    return plane


def _direction(text: str, option: str) -> str | list[float]:
    return text if text in ("x", "y", "z") else _triple(text, option)


def _triple(text: str, option: str) -> list[float]:
    try:
        numbers = [float(part) for part in text.split(",")]
    except ValueError:
        numbers = []
    if len(numbers) != 3:
        raise InputError(
            f"{option}: {text!r} is not three numbers.", "Expected for example 0,0.5,0."
        )
    return numbers


def _pair(text: str, option: str, form: str) -> tuple[str, str]:
    name, equals, value = text.partition("=")
    if not equals or not name.strip() or not value.strip():
        raise InputError(f"{option} {text!r} is not understood.", f"Expected {form}.")
    return name.strip(), value.strip()


def _toml_value(text: str) -> Any:
    try:
        return tomllib.loads(f"value = {text}")["value"]
    except tomllib.TOMLDecodeError:
        return text  # a bare word
