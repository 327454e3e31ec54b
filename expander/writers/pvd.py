"""An index (.pvd) of several .vtu files, one step for each result."""

from __future__ import annotations

from collections.abc import Sequence
from pathlib import Path
from xml.sax.saxutils import quoteattr

from expander.writers.newfiles import NewFiles


def write_pvd(new: NewFiles, path: Path, files: Sequence[tuple[str, Path]]) -> None:
    """Write the index; `files` are the results' names and files in the same folder as `path`.

    Step numbers count from 0 in the order of the results; the name is kept as the part's group.
    """
    lines = [
        '<?xml version="1.0"?>',
        '<VTKFile type="Collection" version="1.0">',
        "  <Collection>",
    ]
    lines += [
        f'    <DataSet timestep="{k}" group={quoteattr(name)} part="0" '
        f"file={quoteattr(file.name)}/>"
        for k, (name, file) in enumerate(files)
    ]
    lines += ["  </Collection>", "</VTKFile>"]
    new.open(path).write(("\n".join(lines) + "\n").encode())
