"""Files that do not let a reader wait for ever at their end.

Some of meshio's readers ask for the next line until a word comes that a truncated file does
not have. While they run, files are opened here: after many reads beyond the end it is an error.
"""

from __future__ import annotations

import io
from collections.abc import Iterator
from contextlib import contextmanager
from importlib import import_module
from typing import Any

# modules of meshio that call the built-in ``open`` to read
_OPENERS = ("meshio._files", "meshio.gmsh.main", "meshio.tetgen._tetgen")
_PATIENCE = 1000  # reads that return nothing


class _Patience:
    """Counts the reads that came back empty."""

    def __init__(self) -> None:
        self.left = _PATIENCE

    def passed(self, data: Any) -> Any:
        if not data:
            self.left -= 1
            if self.left < 0:
                raise EOFError("the file ends too early")
        return data


class _Bytes(io.BufferedReader):
    def __init__(self, raw: io.RawIOBase) -> None:
        super().__init__(raw)
        self.patience = _Patience()

    def read(self, size: int | None = -1, /) -> Any:
        return self.patience.passed(super().read(size))

    def readline(self, size: int | None = -1, /) -> Any:
        return self.patience.passed(super().readline(size))


class _Text(io.TextIOWrapper):
    def __init__(self, buffer: Any) -> None:
        super().__init__(buffer)
        self.patience = _Patience()

    def read(self, size: int | None = -1, /) -> Any:
        return self.patience.passed(super().read(size))

    def readline(self, size: int = -1, /) -> Any:  # type: ignore[override]
        return self.patience.passed(super().readline(size))


def _open(path: Any, mode: str = "r", **_: Any) -> Any:
    if mode not in ("r", "rb"):
        raise ValueError("meshio only reads here")
    raw = io.FileIO(path)
    return _Bytes(raw) if mode == "rb" else _Text(io.BufferedReader(raw))


@contextmanager
def impatient() -> Iterator[None]:
    """While this lasts, meshio opens its files through this module."""
    modules: list[Any] = [import_module(name) for name in _OPENERS]
    for module in modules:
        module.open = _open
    try:
        yield
    finally:
        for module in modules:
            del module.open
