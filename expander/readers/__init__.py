"""Reading a sector model: the file's extension says who reads it.

The expander never asks which format a model came in. A format is one row of the table
below; its module is imported when a file of that kind is met, so that starting the
program does not wait for libraries that the case does not need.
"""

from __future__ import annotations

import os
from collections.abc import Callable
from importlib import import_module
from pathlib import Path

from expander.errors import InputError
from expander.model import Model

# extension -> module of this package and function in it, called with the path
_FORMATS: dict[str, tuple[str, str]] = {
    ".vtu": ("vtk_files", "read_vtu"),
    ".vtp": ("vtk_files", "read_vtp"),
    ".vtk": ("vtk_files", "read_legacy"),
}
# Every other extension is looked up among those of this module.
_OTHERS = "meshio_files"


def readable() -> dict[str, str]:
    """Extensions that can be read, in lower case with their dot, and who reads each."""
    others = import_module(f"{__name__}.{_OTHERS}").extensions()
    return {**dict.fromkeys(_FORMATS, "VTK"), **{e: "meshio" for e in others if e not in _FORMATS}}


def read_model(path: Path) -> Model:
    """Read the mesh and the results of a sector from one file.

    Parameters
    ----------
    path : the file; its extension, in upper or lower case, names the format.

    Raises
    ------
    InputError
        If the file is missing, empty, damaged, or of a format that cannot be read.
    """
    path = Path(path)
    _require_file(path)
    return _reader(path)(path)


def _require_file(path: Path) -> None:
    try:
        if path.is_dir():
            raise InputError(f"{path} is a folder", "Name a result file in it.")
        if not path.exists():
            raise InputError(
                f"{path} does not exist",
                "Check the spelling; a path in a case file is relative to the case file.",
            )
        if not path.is_file():
            raise InputError(f"{path} is not a regular file", "Name a result file.")
        if path.stat().st_size == 0:
            raise InputError(f"{path} is empty", "Write the results again.")
        if not os.access(path, os.R_OK):
            raise InputError(f"{path} may not be read", "Change its permissions.")
    except (OSError, ValueError) as problem:  # too long a name, a zero byte in it
        raise InputError(f"{path!s:.200} cannot be opened: {problem}", "Check the path.") from None


def _reader(path: Path) -> Callable[[Path], Model]:
    """The function that reads this kind of file."""
    extension = path.suffix.lower()
    if extension in _FORMATS:
        module, function = _FORMATS[extension]
        reader: Callable[[Path], Model] = getattr(import_module(f"{__name__}.{module}"), function)
        return reader
    others = import_module(f"{__name__}.{_OTHERS}")
    if others.reads(path):
        reader = others.read
        return reader
    known = ", ".join(sorted(readable()))
    kind = f"files of kind '{extension}' cannot be read" if extension else "it has no extension"
    raise InputError(f"{path}: {kind}", f"Extensions that can be read: {known}.")
