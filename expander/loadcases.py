"""Load cases and results: what was solved on the sector, and what is wanted on the whole body."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from expander.behaviours import Behaviour, Factors, is_plain
from expander.casefile import CaseFile, CaseTable, plane_names
from expander.errors import InputError
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
    """A case, or a sum of cases.

    Attributes
    ----------
    terms : (number of the case, factor) for each term; a factor may be complex.
    wave : "as given", "reversed" (the wave that runs the other way round), or "standing".
    time_sign : +1 for a field ``Re(f exp(+i omega t))``, -1 for the other sign.
    mean : number of the case that is added to a harmonic field, unchanged in time.
    real : only the real part is meant, as in a sum over nodal diameters of a static load.
    """

    name: str
    terms: tuple[tuple[int, complex], ...]
    wave: str = "as given"
    time_sign: int = 1
    mean: int | None = None
    real: bool = False

    def complex_factors(self, cases: tuple[LoadCase, ...]) -> bool:
        """Whether a factor or a load behaviour is complex."""
        return any(np.iscomplexobj(a) or cases[k].complex_factors for k, a in self.terms)

    @property
    def turned_back(self) -> bool:
        """Whether the field in time is that of the conjugate amplitude with ``exp(+i omega t)``."""
        return (self.time_sign < 0) != (self.wave == "reversed")

    def parts(self, moment: float | None) -> list[tuple[str, complex]]:
        """Suffix and weight ``w`` of the arrays ``Re(w f)`` that a complex field is written as.

        The wave that runs the other way has the conjugate amplitude, which is seen at ``-t``.
        """
        if self.real:
            return [("", 1.0)]
        if moment is None:
            if self.wave == "standing":
                return [("_real", 1.0), ("_imag", 0.0)]
            return [("_real", 1.0), ("_imag", 1j if self.wave == "reversed" else -1j)]
        angle = np.deg2rad(moment) * self.time_sign
        if self.wave == "standing":
            return [("", complex(np.cos(angle)))]
        turn = complex(np.cos(angle), np.sin(angle))
        return [("", turn.conjugate() if self.wave == "reversed" else turn)]


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


def mode_factor(table: CaseTable, chi: Factors) -> float:
    """What makes a mode of unit modal mass on the sector one of unit modal mass on the body.

    Modal masses add up over the copies: ``1/sqrt(|G|)``; each real shape of the pair that a complex
    amplitude stands for has half of them: ``sqrt(2/|G|)``.
    """
    if table.mode_mass is None:
        return 1.0
    if table.mode_mass.endswith("pair") and not np.iscomplexobj(chi):
        raise InputError(
            f"Case {table.name!r}: mode_mass = {table.mode_mass!r}, but no pair of shapes belongs "
            "to real factors (h = 0 and N/2): each mode stands alone.",
            'Expected mode_mass = "sector" there.',
        )
    return float(np.sqrt((2.0 if table.mode_mass.endswith("pair") else 1.0) / len(chi)))


def results_of(case: CaseFile, cases: tuple[LoadCase, ...]) -> tuple[Result, ...]:
    """The results that are wanted: the sums if any, else the cases, or those named.

    Raises
    ------
    InputError
        If a wave, a mean or the size of a mode is asked for that the cases do not allow.
    """
    number = {c.name: k for k, c in enumerate(cases)}
    tables = case.case or [CaseTable(name="result")]
    sign = -1 if case.model.time_factor.startswith("-") else 1
    single = [
        Result(c.name, ((k, c.factor),), _wave(t.wave, t.undamped, c, sign), sign,
               _mean(t.mean, number, cases, c.name))
        for k, (c, t) in enumerate(zip(cases, tables, strict=True))
    ]  # fmt: skip
    sums = []
    for s in case.sum:
        terms = tuple((number[n], _times(a, cases[number[n]].factor)) for n, a in s.terms.items())
        waves = {single[k].wave for k, _ in terms}
        if len(waves) > 1:
            raise InputError(
                f"Sum {s.name!r} adds waves taken differently: {', '.join(sorted(waves))}.",
                "Give the cases of a sum the same wave.",
            )
        sums.append(Result(s.name, terms, waves.pop(), sign, _mean(s.mean, number, cases, s.name),
                           s.part == "real"))  # fmt: skip
    if case.output.results is not None:
        by_name = {r.name: r for r in single + sums}
        return tuple(by_name[n] for n in case.output.results)
    return tuple(sums or [r for r in single if r.name not in _means(case)])


def _times(factor: float | list[float], own: float) -> complex:
    if isinstance(factor, list):
        return complex(*factor) * own
    return factor * own


def _means(case: CaseFile) -> set[str]:
    """Cases that serve as the mean of others, and are no results of their own."""
    return {m for m in [t.mean for t in case.case] + [t.mean for t in case.sum] if m is not None}


def _mean(
    name: str | None, number: dict[str, int], cases: tuple[LoadCase, ...], of: str
) -> int | None:
    if name is None:
        return None
    if cases[number[name]].complex_factors:
        raise InputError(
            f"The mean {name!r} of {of!r} is a wave ({cases[number[name]].behaviour.words()}).",
            "A mean is constant in time: expected a case with real factors.",
        )
    return number[name]


def _wave(word: str, undamped: bool, case: LoadCase, time_sign: int) -> str:
    """What is done to the given wave to get the one that is asked for.

    With ``exp(+i h k alpha)`` and ``exp(+i omega t)`` the crest moves towards lower k: backward.
    """
    if word == "as given":
        return word
    if not undamped:
        raise InputError(
            f"Case {case.name!r}: wave = {word!r} makes another wave out of the one that was "
            "solved, which is right without gyroscopic and damping terms only.",
            "Add undamped = true if there are none.",
        )
    if word == "standing":
        return word
    phase = -1 if case.behaviour.phase == "-" else 1
    given = "backward" if phase * time_sign > 0 else "forward"
    return "as given" if word == given else "reversed"


def direction_words(result: Result, cases: tuple[LoadCase, ...]) -> str:
    """Which way the waves of a result run, in words; empty if none does."""
    waves = [cases[k] for k, _ in result.terms if cases[k].complex_factors]
    if not waves or result.real:
        return ""
    if result.wave == "standing":
        return "standing wave Re(f) cos(omega t)"
    signs = {(-1 if c.behaviour.phase == "-" else 1) * result.time_sign for c in waves}
    if len(signs) > 1:
        return "waves that run both ways"
    backward = (signs.pop() > 0) != (result.wave == "reversed")
    towards = "lower sector numbers (backward)" if backward else "higher sector numbers (forward)"
    return f"the wave runs towards {towards}"
