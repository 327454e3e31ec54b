"""The questions to ask of a path before opening it."""

from __future__ import annotations

import os
from pathlib import Path

from expander.errors import InputError


def require_file(path: Path) -> None:
    """Refuse a path that is no file with something in it.

    Raises
    ------
    InputError
        If nothing is there, or a folder, an empty file or one that may not be read.
    """
    try:
        if path.is_dir():
            raise InputError(f"{path} is a folder", "Name a file in it.")
        if not path.exists():
            raise InputError(
                f"{path} does not exist",
                "Check the spelling; a path in a case file is relative to the case file.",
            )
        if not path.is_file():
            raise InputError(f"{path} is not a regular file", "Name a regular file.")
        if path.stat().st_size == 0:
            raise InputError(f"{path} is empty", "Write it again.")
        if not os.access(path, os.R_OK):
            raise InputError(f"{path} may not be read", "Change its permissions.")
    except (OSError, ValueError) as problem:  # too long a name, a zero byte in it
        raise InputError(f"{path!s:.200} cannot be opened: {problem}", "Check the path.") from None
