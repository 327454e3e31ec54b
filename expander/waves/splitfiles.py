"""The parts of a load as files: nodal loads for each case, and the tables of the case file."""

from __future__ import annotations

import csv
import io
import json
from collections.abc import Mapping
from pathlib import Path

import numpy as np

from expander.casefile import CaseFile
from expander.errors import InputError
from expander.resolve import Numbers
from expander.splitting import Part, Split, model_file
from expander.waves.patterns import PatternSplit
from expander.waves.wholeloads import LOADS
from expander.writers.newfiles import NewFiles

TABLES = "split.toml"


def targets(case: CaseFile, split: Split | PatternSplit, folder: Path) -> list[Path]:
    """The files that are written.

    Raises
    ------
    InputError
        If one of them is read, or the folder does not exist.
    """
    names = [f"{p.name}.csv" for p in split.parts] if isinstance(split, Split) else []
    paths = [folder / n for n in [*names, TABLES]]
    read = [split.source, *([case.source] if case.source else [])]
    if isinstance(split, Split):
        read.append(model_file(case))
    inputs = {f.resolve() for f in read}
    for path in paths:
        if path.resolve() in inputs:
            raise InputError(f"{path} is read by this case and would be overwritten.",
                             "Choose another folder with --output.")  # fmt: skip
    if not folder.is_dir():
        raise InputError(f"The folder {folder} does not exist.",
                         "Create it, or choose another one with --output.")  # fmt: skip
    return paths


def write(case: CaseFile, split: Split | PatternSplit, folder: Path) -> list[Path]:
    """Write all files or none."""
    paths = targets(case, split, folder)
    with NewFiles() as files:
        for path in paths:
            if path.name == TABLES:
                text = tables(case, split)
            else:
                assert isinstance(split, Split)
                part = next(p for p in split.parts if p.name == path.stem)
                text = nodal_table(split.mesh.points, split.loads(part))
            data = memoryview(text.encode())
            file = files.open(path, len(data))
            while data:  # an unbuffered file may take less than it is given
                data = data[file.write(data) :]
    return paths


def nodal_table(points: np.ndarray, loads: Mapping[str, Numbers]) -> str:
    """Rows of the loaded nodes: node (from 0), x, y, z, then fx, fy, fz, mx, .. or q; complex ones
    as fx_real, fx_imag.

    >>> print(nodal_table(np.eye(3), {"heat flow": np.array([[0.0], [2.5], [0.0]])}), end="")
    node,x,y,z,q
    1,0.0,1.0,0.0,2.5
    """
    loaded = np.flatnonzero(np.any([f.any(axis=1) for f in loads.values()], axis=0))
    head = ["node", "x", "y", "z"]
    columns = [loaded.tolist(), *points[loaded].T.tolist()]
    for name, values in loads.items():
        for component, f in zip(LOADS[name][1], values[loaded].T, strict=True):
            both = {"_real": f.real, "_imag": f.imag} if np.iscomplexobj(f) else {"": f}
            head += [component + end for end in both]
            columns += [(numbers + 0.0).tolist() for numbers in both.values()]  # no -0
    text = io.StringIO(newline="")
    table = csv.writer(text, lineterminator="\n")
    table.writerow(head)
    table.writerows(zip(*columns, strict=True))
    return text.getvalue()


_SHARE = """\
# Each table of loads holds the model's own share: half of it at a node in a cut plane, 1/N on the
# axis, on both faces of a cyclic seam. Apply them as they stand, under the load words below.
"""
_AS_IT_IS = """\
# Run each case with the load that the model has, as it is; the sums take the parts of it.
"""
_COMPLEX = """\
# With 0 < h < N/2 sector k takes exp(+i h k alpha), right-handed about the axis. {opposite}
# Such a case stands for +h and -h: its factor in the sum is twice that of its part, and the whole
# body's result is the real part of the sum: part = "real". Leave that out for a harmonic load.
"""
_OPPOSITE = {
    True: "If your\n# solver's sector takes exp(-i h k alpha), change the sign of the _imag columns"
    ' and write\n# phase = "-".',
    False: "If your\n# solver's sector takes exp(-i h k alpha), change the sign of each second "
    'number in terms and write\n# phase = "-".',
}


def tables(case: CaseFile, split: Split | PatternSplit) -> str:
    """The [[case]] and [[sum]] tables that belong to the parts, as TOML."""
    nodal = isinstance(split, Split)
    lines = [
        f"# {_comment(split.source.name)} on the whole body, in {len(split.parts)} cases. Add these"
        " tables to the case\n# file, and name the files of your results.\n",
        _SHARE if nodal else _AS_IT_IS,
    ]
    if any(np.iscomplexobj(p.character.chi) for p in split.parts):
        lines.append(_COMPLEX.format(opposite=_OPPOSITE[nodal]))
    stem, suffix = "sector", ".vtu"
    if any([case.model.file, *(c.file for c in case.case)]):
        stem, suffix = model_file(case).stem, model_file(case).suffix
    for part in split.parts:
        lines.append(f"\n[[case]]\nname = {_quoted(part.name)}\n")
        run = f"loads: {part.name}.csv" if nodal else "the model's load"
        lines.append(f"file = {_quoted(f'{stem}_{part.name}{suffix}')}  # your result; {run}\n")
        lines.append(_behaviour(part))
    if isinstance(split, Split):
        sums = {split.source.stem + " on the whole body": {
            p.name: complex(p.character.weight) for p in split.parts}}  # fmt: skip
    else:
        sums = {p.name: dict(p.factors) for p in split.patterns}
    for name, terms in sums.items():
        listed = ", ".join(f"{n} = {_factor(f)}" for n, f in terms.items())
        lines.append(f"\n[[sum]]\nname = {_quoted(name)}\nterms = {{ {listed} }}\n")
        if any(np.iscomplexobj(p.character.chi) for p in split.parts):
            lines.append('part = "real"\n')
    return "".join(lines)


def _behaviour(part: Part) -> str:
    b = part.character.behaviour
    text = ""
    if b.load:
        words = ", ".join(f"{_quoted(n)} = {_quoted(w)}" for n, w in b.load.items())
        text += f"load = {{ {words} }}\n"
    if part.name.startswith("h"):
        text += f"nodal_diameters = {b.nodal_diameters}\n"
    if np.iscomplexobj(part.character.chi):
        text += f"phase = {_quoted(b.phase)}\n"
    return text


def _factor(f: complex) -> str:
    return repr(f.real) if f.imag == 0.0 else f"[{f.real!r}, {f.imag!r}]"


def _quoted(text: str) -> str:
    """A string of TOML; a string of JSON is one."""
    return json.dumps(text, ensure_ascii=False).replace("\x7f", "\\u007f")


def _comment(text: str) -> str:
    return "".join(c if c.isprintable() else "?" for c in text)
