"""Expansion: from a case to files, or to a grid in memory."""

from __future__ import annotations

import hashlib
import re
from collections.abc import Callable
from concurrent.futures import Future, ThreadPoolExecutor
from dataclasses import dataclass
from importlib.metadata import PackageNotFoundError, version
from pathlib import Path
from threading import Event
from typing import TYPE_CHECKING, Any

import numpy as np

from expander.body import WholeBody, prepare
from expander.casefile import CaseFile, CaseTable, read_case
from expander.errors import InputError, NotYetError
from expander.images import arrays_of, is_complex
from expander.loadcases import LoadCase, Result, direction_words
from expander.sector import Step
from expander.summary import CAUTIONS, summary
from expander.writers.newfiles import NewFiles, check_place

if TYPE_CHECKING:
    import pyvista

Advance = Callable[[int], None]


@dataclass(frozen=True)
class Target:
    """A result and the file that it goes to.

    Attributes
    ----------
    moment : of the cycle, in degrees of omega t; None for the amplitude or a result without time.
    """

    result: Result
    file: Path
    moment: float | None = None

    @property
    def name(self) -> str:
        """The result's name, with the moment."""
        if self.moment is None:
            return self.result.name
        return f"{self.result.name}, omega t = {self.moment:.6g} degrees"


def program_version() -> str:
    """Version of the installed program."""
    try:
        return version("seamfold")
    except PackageNotFoundError:
        return "not installed"


def input_files(case: CaseFile) -> list[Path]:
    """Every file that the case reads, each once, in order."""
    names: list[str] = []
    for table in case.case or [CaseTable(name="result")]:
        names.append(table.file or case.model.file or "")
        names += table.results if table.results is not None else case.model.results
    files = [case.folder / n for n in dict.fromkeys(names) if n]
    # The numbers of an XDMF file usually stand in an HDF5 file beside it.
    beside = [f.with_suffix(".h5") for f in files if f.suffix.lower() in (".xdmf", ".xmf")]
    files += [f for f in beside if f.is_file()]
    return files + ([case.source] if case.source else [])


def digests(files: list[Path], stop: Event | None = None) -> dict[str, str]:
    """SHA-256 of each file by name; empty if `stop` is set meanwhile."""
    found = {}
    for file in files:
        if not file.is_file():
            continue  # a pipe would never end; what is missing is reported by the reader
        digest = hashlib.sha256()
        with file.open("rb") as stream:
            while piece := stream.read(1 << 20):
                if stop is not None and stop.is_set():
                    return {}
                digest.update(piece)
        found[file.as_posix()] = digest.hexdigest()
    return found


def targets(
    case: CaseFile, results: tuple[Result, ...], cases: tuple[LoadCase, ...] = ()
) -> tuple[list[Target], Path | None]:
    """The file of each result, and the index if there is one.

    One result goes to exactly `output.file`; several, or several phases of a complex one, to one
    file each beside an index.

    Parameters
    ----------
    cases : those of the results, to tell which are complex; without them none is.
    """
    name = case.output.file or _default_name(case)
    path = case.folder / name
    suffix = path.suffix.lower()
    if suffix == ".vtkhdf":
        raise NotYetError(
            f"output.file = {name!r}: .vtkhdf is not yet written by this version.",
            "Write .vtu, or .pvd for several results.",
        )
    if suffix not in (".vtu", ".pvd"):
        raise InputError(
            f"output.file = {name!r}: files of type {suffix or 'without extension'!r} are not "
            "written.",
            "Expected .vtu, or .pvd for several results.",
        )
    moments = {r.name: _moments(case, r, cases) for r in results}
    if len(results) == 1 and suffix == ".vtu" and moments[results[0].name] == [None]:
        chosen = [Target(results[0], path)]
        index = None
    else:
        index = path.with_suffix(".pvd")
        slugs = _file_words([r.name for r in results])
        chosen = [
            Target(r, path.with_name(f"{path.stem}_{s}{_moment_word(case, m)}.vtu"), m)
            for r, s in zip(results, slugs, strict=True)
            for m in moments[r.name]
        ]
    for target in chosen:
        check_place(target.file)
    inputs = {f.resolve() for f in input_files(case)}
    for file in [t.file for t in chosen] + ([index] if index else []):
        if file.resolve() in inputs:
            raise InputError(
                f"{file} is read by this case and would be overwritten.",
                "Choose another output.file.",
            )
    return chosen, index


def _moments(case: CaseFile, result: Result, cases: tuple[LoadCase, ...]) -> list[float | None]:
    """The moments of the cycle at which a complex result is wanted."""
    count = case.output.phases
    complex_fields = any(t.real is not None or t.amplitude is not None
                         for t in case.fields.values())  # fmt: skip
    is_complex = complex_fields or (bool(cases) and result.complex_factors(cases))
    if count is None or not is_complex or result.real:
        return [None]
    return [360.0 * k / count for k in range(count)]


def _moment_word(case: CaseFile, moment: float | None) -> str:
    if moment is None or case.output.phases is None:
        return ""
    number = round(moment * case.output.phases / 360.0)
    return f"_phase_{number:0{len(str(case.output.phases - 1))}d}"


def _file_words(names: list[str]) -> list[str]:
    """Parts of file names, different from each other also where case is not told apart.

    >>> _file_words(["one ear", "one_ear", "ONE EAR"])
    ['one_ear', 'one_ear_2', 'ONE_EAR_3']
    """
    found: list[str] = []
    for name in names:
        word = re.sub(r"[^A-Za-z0-9.-]+", "_", name).strip("_.") or "result"
        taken = {w.lower() for w in found}
        number = 1
        unique = word
        while unique.lower() in taken:
            number += 1
            unique = f"{word}_{number}"
        found.append(unique)
    return found


def _default_name(case: CaseFile) -> str:
    source = case.source or Path(case.model.file or "model")
    return f"{source.stem}_full.vtu"


def field_data(
    body: WholeBody, result: Result, hashes: dict[str, str], moment: float | None = None
) -> dict[str, Any]:
    """What is recorded in the file: how the body was made and what was assumed."""
    placements = np.stack([_matrix(body, g) for g in body.copies])
    terms = [(body.cases[k], a) for k, a in result.terms]
    chi = np.stack([a * c.chi[list(body.copies)] for c, a in terms], axis=1)
    return {
        "result": [result.name],
        "terms": [f"{_exact(a)} * {c.name}: {c.behaviour.words()}" for c, a in terms],
        **_wave_data(body, result, moment),
        "copies": np.array(body.copies, dtype=np.int32),
        "copy_words": [body.group.words(g) for g in body.copies],
        "placements": placements,
        **(
            {"factors": chi}
            if not np.iscomplexobj(chi)
            else {"factors_real": chi.real.copy(), "factors_imag": chi.imag.copy()}
        ),
        "fields": [
            f"{f.name}: {f.kind} on {f.on} ({f.decided}), follows {f.follows}, seam {f.seam}, "
            f"frame {f.frame.name}" + (f", {f.unit}" if f.unit else "")
            for f in body.fields
        ],
        "assumptions": list(body.notes) or ["none"],
        "cautions": list(CAUTIONS),
        "unit": [body.case.model.unit or ""],
        "program": [f"seamfold {program_version()}"],
        "input_sha256": [
            f"{_relative(name, body.case.folder)} {digest}" for name, digest in hashes.items()
        ],
    }


def _exact(a: complex) -> str:
    return f"({a.real:.17g}{a.imag:+.17g}i)" if np.iscomplexobj(a) else f"{a:.17g}"


def _wave_data(body: WholeBody, result: Result, moment: float | None) -> dict[str, Any]:
    """What a complex result means in time: conventions, direction, moment and mean."""
    if not any(is_complex(body, result, f) for f in body.fields):
        return {}
    if result.real:
        return {"time": ["constant: the real part of the sum of complex amplitudes"]}
    words = [f"field = Re(amplitude * exp({body.case.model.time_factor}))"]
    running = direction_words(result, body.cases)
    words += [running] if running else []
    if result.mean is not None:
        name = body.cases[result.mean].name
        words.append(f"with the mean {name} added" if moment is not None
                     else f"peaks are those of the sum with the mean {name}")  # fmt: skip
    found: dict[str, Any] = {"time": words}
    if moment is not None:
        found["phase_degrees"] = np.array([moment])
    return found


def _relative(name: str, folder: Path) -> str:
    """A file as the case names it, so that the bytes do not depend on where the case lies."""
    path = Path(name)
    return path.relative_to(folder).as_posix() if path.is_relative_to(folder) else path.name


def _matrix(body: WholeBody, copy: int) -> np.ndarray:
    matrix = np.eye(4)
    placement = body.group.placements[copy]
    matrix[:3, :3], matrix[:3, 3] = placement.Q, placement.t
    return matrix.ravel()


@dataclass(eq=False)
class Expansion:
    """A prepared case with its files: `size` is known, nothing is written yet."""

    body: WholeBody
    targets: list[Target]
    index: Path | None
    _hashes: Future[dict[str, str]]

    def size(self) -> int:
        """Bytes of all arrays of all results."""
        return sum(a.nbytes for t in self.targets for a in arrays_of(self.body, t.result, t.moment))

    def write(self, advance: Advance = lambda done: None) -> None:
        """Write all results; each file appears only when all are whole."""
        from expander.writers.pvd import write_pvd
        from expander.writers.vtu import write_vtu

        hashes = self._hashes.result()
        with NewFiles() as files:
            for target in self.targets:
                write_vtu(
                    files,
                    target.file,
                    arrays_of(self.body, target.result, target.moment),
                    field_data(self.body, target.result, hashes, target.moment),
                    advance,
                )
            if self.index is not None:
                write_pvd(files, self.index, [(t.name, t.file) for t in self.targets])

    def summary(self) -> dict[str, Any]:
        """What was done, as plain data for the table and for JSON."""
        return summary(self.body, [(t.result, t.file, t.moment) for t in self.targets], self.index,
                       program_version())  # fmt: skip


def plan(
    case: CaseFile,
    skip_undeclared: bool = False,
    allow_nan: bool = False,
    step: Step = lambda words: None,
) -> Expansion:
    """Read and check a case; raises as `body.prepare` does."""
    stop = Event()
    with ThreadPoolExecutor(1) as pool:
        # Hashing reads the files once more, while the main thread thinks.
        hashes = pool.submit(digests, input_files(case), stop)
        try:
            body = prepare(case, skip_undeclared, allow_nan, step)
            chosen, index = targets(case, body.results, body.cases)
        except BaseException:
            stop.set()
            raise
    return Expansion(body, chosen, index, hashes)


def expand(
    case: CaseFile | Path | str,
    result: str | None = None,
    skip_undeclared: bool = False,
    allow_nan: bool = False,
    moment: float | None = None,
) -> pyvista.UnstructuredGrid:
    """The whole body in memory, for scripts.

    Parameters
    ----------
    case : a case file, or a case that was read.
    result : name of the case or sum, if there are several.
    moment : of the cycle, in degrees of omega t, at which complex fields are taken; their real and
        imaginary parts (``X_real``, ``X_imag``) if None.

    Returns
    -------
    pyvista.UnstructuredGrid
        With the sector's arrays on the whole body and the arrays `copy`, `sector_cell` and
        `sector_point`.

    Raises
    ------
    InputError, CheckFailed
        As the command line reports them.
    """
    from expander.writers.grid import build_grid

    if not isinstance(case, CaseFile):
        case = read_case(Path(case))
    body = prepare(case, skip_undeclared, allow_nan)
    names = [r.name for r in body.results]
    if result is None and len(names) > 1:
        raise InputError(
            "The case has several results.", f"Choose one with result=...: {', '.join(names)}."
        )
    if result is not None and result not in names:
        raise InputError(f"There is no result {result!r}.", f"Results: {', '.join(names)}.")
    chosen = next(r for r in body.results if result in (None, r.name))
    hashes = digests(input_files(case))
    return build_grid(arrays_of(body, chosen, moment), field_data(body, chosen, hashes, moment))
