"""How many times each copy carries the load of the sector's model, split into load behaviours.

Every case is run once with that load as it is; the parts are complex factors of the results.
"""

from __future__ import annotations

import csv
from collections.abc import Mapping
from dataclasses import dataclass, replace
from pathlib import Path

import numpy as np

from expander.behaviours import Behaviour, factors
from expander.casefile import CaseFile, plane_names, writable
from expander.errors import InputError
from expander.groups import Group
from expander.placements import Floats
from expander.readers.paths import require_file
from expander.splitting import (
    LEAST,
    ROUND_OFF,
    Part,
    check_complete,
    check_linear,
    group_of,
    share_of,
    sifted,
)
from expander.waves.fourier import characters, component


@dataclass(frozen=True, eq=False)
class Pattern:
    """One pattern of the load: a sum of cases.

    Attributes
    ----------
    copies : (copies,) times that each copy carries the sector's load, turned with it.
    factors : of each part in the sum, by the part's name: ``w/|G| sum_g conj(chi(g)) a_g``.
    """

    name: str
    copies: Floats
    factors: Mapping[str, complex]


@dataclass(frozen=True, eq=False)
class PatternSplit:
    """Patterns in parts.

    Attributes
    ----------
    parts : the cases to run; `left_out` are those that no pattern needs.
    """

    group: Group
    source: Path
    patterns: tuple[Pattern, ...]
    parts: tuple[Part, ...]
    left_out: tuple[Part, ...]


def read_patterns(path: Path) -> dict[str, Floats]:
    """Factors of each sector by name, (columns,) each.

    A .csv with a row of numbers for each pattern, a column for each sector in order. The first
    line may name the columns, the first of them `load` if rows begin with a name.

    Raises
    ------
    InputError
        If the file is missing or no such table.
    """
    require_file(path)
    try:
        with path.open(encoding="utf-8-sig", newline="") as file:
            rows = [[c.strip() for c in row] for row in csv.reader(file) if any(row)]
    except (UnicodeDecodeError, csv.Error) as problem:
        raise InputError(f"{path} is no table of text: {problem}.", "Save it as UTF-8.") from None
    named = bool(rows) and rows[0][0].lower() == "load"
    headed = named or (bool(rows) and not _is_number(rows[0][-1]))
    if headed:
        _check_order(path, rows[0][named:])
    found: dict[str, Floats] = {}
    for line, row in enumerate(rows[headed:], start=1):
        name = row[0] if named else ("sector loads" if len(rows) == 1 + headed else f"load {line}")
        numbers = row[named:]
        wrong = [c for c in numbers if not _is_number(c)]
        if wrong or len(numbers) != len(rows[0]) - named:
            what = f"{wrong[0]!r} is no number" if wrong else f"{len(numbers)} numbers are there"
            raise InputError(
                f"{path}, row {line}: {what}.",
                "Write one number per column, separated by commas: a column for each sector; rows "
                "may begin with a name if the first line begins with 'load'.",
            )
        if not name or not writable(name) or name in found:
            raise InputError(f"{path}, row {line}: the name {name!r} is empty, odd or taken.",
                             "Give each pattern its own name.")  # fmt: skip
        found[name] = np.array([float(c) for c in numbers])
    if not found:
        raise InputError(f"{path} has no row of numbers.", "Write a row with one for each sector.")
    return found


def _is_number(text: str) -> bool:
    try:
        float(text)
    except ValueError:
        return False
    return True


def _check_order(path: Path, head: list[str]) -> None:
    """Numbers in the column names must rise by one: the first column is the modelled sector."""
    ends = [name.split()[-1] if name.split() else "" for name in head]
    if all(e.isdecimal() for e in ends) and ends:
        numbers = [int(e) for e in ends]
        if numbers != list(range(numbers[0], numbers[0] + len(numbers))):
            raise InputError(
                f"{path}: the columns are not in the order of the sectors: {', '.join(head[:6])}.",
                "The first column is the modelled sector, the next one lies beside it in the sense "
                "of a right-handed turn about the axis, and so on.",
            )


def split_patterns(
    case: CaseFile, path: Path, rows: Mapping[str, Floats], least: float = LEAST
) -> PatternSplit:
    """Split patterns of the sector's own load.

    Parameters
    ----------
    rows : by name, a factor for each copy in their order, (copies,); or for each sector, (N,),
        where all planes are normal to the axis: their load words are then those of the case.
    path : where they come from, for messages.
    least : parts whose norm is less than this part of the load's are left out.

    Raises
    ------
    InputError
        If the numbers do not fit the copies, or a pattern is no sum of these behaviours.
    """
    check_linear(case)
    group = group_of(case)
    every = characters(group)
    patterns = []
    for name, given in rows.items():
        copies = _of_copies(case, group, np.asarray(given, dtype=float), path, name)
        noise = ROUND_OFF * np.abs(copies).max()
        found = {}
        for c in every:
            f = c.weight * complex(component(c.chi, copies[:, None])[0])
            found[c.name] = complex(*(0.0 if abs(v) < noise else v for v in (f.real, f.imag)))
        patterns.append(Pattern(name, copies, found))
    parts = [Part(c, {p.name: share_of(c, p.factors[c.name] / c.weight, float(p.copies @ p.copies))
                      for p in patterns})
             for c in every]  # fmt: skip
    check_complete(group, parts, str(path))
    kept, left = sifted(parts, least)
    names = {p.name for p in kept}
    _check_sums(path, names, patterns)
    tidy = (
        replace(p, factors={n: f for n, f in p.factors.items() if n in names and f})
        for p in patterns
    )
    return PatternSplit(group, path, tuple(tidy), kept, left)


def _check_sums(path: Path, names: set[str], patterns: list[Pattern]) -> None:
    taken = [p.name for p in patterns if p.name in names]
    if taken:
        raise InputError(f"{path}: the pattern {taken[0]!r} has the name of a case to run.",
                         "Give it another name in the column 'load'.")  # fmt: skip


def _of_copies(case: CaseFile, group: Group, given: Floats, path: Path, name: str) -> Floats:
    """A factor for each copy, (copies,)."""
    if not np.isfinite(given).all() or not given.any():
        raise InputError(f"{path}: {name}: no copy is loaded, or a factor is not finite.",
                         "Expected a number for each, not all of them 0.")  # fmt: skip
    if len(given) == len(group):
        return given
    N = group.axis.sectors if group.axis else 0
    normal = group.axis is not None and all(
        abs(float(p.normal @ group.axis.axis)) > 1.0 - 1e-9 for p in group.planes
    )
    if len(given) != N or not normal:
        wanted = f"{len(group)} numbers, one for each copy" + (
            f", or {N}, one for each sector" if normal and group.planes else ""
        )
        first = "; ".join(f"{g}: {group.words(g)}" for g in range(min(len(group), 4)))
        raise InputError(f"{path}: {name} has {len(given)} numbers.",
                         f"Expected {wanted}. Copies: {first}, ..")  # fmt: skip
    words = {n: m.load for n, m in zip(plane_names(case), case.mirror, strict=True)}
    sector = np.arange(len(group))  # the turns come first, then those of the mirrored part
    sector[group.product[:N, group.times[0, 0]]] = np.arange(N)
    return np.asarray(np.real(factors(group, Behaviour(words))) * given[sector])
