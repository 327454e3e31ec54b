"""Reading a sector model: the file's extension says who reads it.

The expander never asks which format a model came in. A format is one row of the table
below; its module is imported when a file of that kind is met, so that starting the
program does not wait for libraries that the case does not need.
"""

from __future__ import annotations

from collections.abc import Callable
from importlib import import_module
from pathlib import Path

from expander.errors import InputError
from expander.model import Model
from expander.readers.paths import require_file

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
    require_file(path)
    return _reader(path)(path)


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
