"""Load cases and results: what was solved on the sector, and what is wanted on the whole body."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from expander.behaviours import Behaviour, Factors, is_plain
from expander.casefile import CaseFile, CaseTable, plane_names
from expander.model import Model


@dataclass(frozen=True, eq=False)
class LoadCase:
    """One result set on the sector and its load behaviour."""

    name: str
    model: Model
    behaviour: Behaviour
    chi: Factors
    factor: float

    @property
    def plain(self) -> bool:
        """Whether every copy takes the load as it is."""
        return is_plain(self.chi)

    @property
    def complex_factors(self) -> bool:
        """Whether chi is complex: ``0 < h < N/2``."""
        return bool(np.iscomplexobj(self.chi))


@dataclass(frozen=True)
class Result:
    """A case, or a sum of cases: (number of the case, factor) for each term."""

    name: str
    terms: tuple[tuple[int, float], ...]


def behaviour_of(case: CaseFile, table: CaseTable) -> Behaviour:
    words: dict[str, str] = {}
    for name, mirror in zip(plane_names(case), case.mirror, strict=True):
        given = table.load if isinstance(table.load, str) else table.load.get(name)
        words[name] = given or mirror.load
    h, phase = 0, "auto"
    if case.cyclic is not None:
        own = table.nodal_diameters
        h = case.cyclic.nodal_diameters if own is None else own
        phase = table.phase or case.cyclic.phase
    return Behaviour(words, h, phase)


def results_of(case: CaseFile, cases: tuple[LoadCase, ...]) -> tuple[Result, ...]:
    single = [Result(c.name, ((k, c.factor),)) for k, c in enumerate(cases)]
    number = {c.name: k for k, c in enumerate(cases)}
    sums = [
        Result(s.name, tuple((number[n], f * cases[number[n]].factor)
                             for n, f in s.terms.items()))
        for s in case.sum
    ]  # fmt: skip
    if case.output.results is not None:
        by_name = {r.name: r for r in single + sums}
        return tuple(by_name[n] for n in case.output.results)
    return tuple(sums or single)
