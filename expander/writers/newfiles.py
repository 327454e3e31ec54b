"""Files that appear under their names only when all of them are whole."""

from __future__ import annotations

import errno
import os
import shutil
import tempfile
from pathlib import Path
from types import TracebackType
from typing import IO

from expander.errors import InputError

_FULL = (errno.ENOSPC, errno.EDQUOT, errno.EFBIG)


class NewFiles:
    """Temporary files beside their final names, renamed together at the end, removed on failure.

    Any failure of the operating system inside the block becomes an `InputError` that names the
    file last opened.

    Examples
    --------
    >>> import tempfile
    >>> folder = Path(tempfile.mkdtemp())
    >>> with NewFiles() as files:
    ...     _ = files.open(folder / "a.txt").write(b"whole")
    ...     (folder / "a.txt").exists()
    False
    >>> (folder / "a.txt").read_text()
    'whole'
    """

    def __init__(self) -> None:
        self._made: list[tuple[IO[bytes], Path, Path]] = []
        self._opening: Path | None = None

    def __enter__(self) -> NewFiles:
        return self

    def open(self, path: Path, size: int = 0) -> IO[bytes]:
        """A new unbuffered binary file that will be called `path`, of about `size` bytes."""
        self._opening = path
        check_place(path)
        free = shutil.disk_usage(path.parent).free
        if free < size:
            raise InputError(
                f"{path}: the file needs {_in_words(size)}, the disk has {_in_words(free)} free.",
                "Choose another folder (output.file), or fewer copies (output.copies).",
            )
        handle, name = tempfile.mkstemp(prefix=".seamfold-", suffix=".part", dir=path.parent)
        file = open(handle, "wb", buffering=0)  # noqa: SIM115  closed in __exit__
        self._made.append((file, Path(name), path))
        return file

    def __exit__(
        self,
        kind: type[BaseException] | None,
        error: BaseException | None,
        trace: TracebackType | None,
    ) -> None:
        try:
            for file, _, _ in self._made:
                file.close()
            if kind is None:
                while self._made:
                    file, temporary, path = self._made[0]
                    self._opening = path
                    os.chmod(temporary, 0o666 & ~_umask())
                    temporary.replace(path)
                    self._made.pop(0)
        except OSError as failed:
            error = failed
        finally:
            for _, temporary, _ in self._made:
                temporary.unlink(missing_ok=True)
        if isinstance(error, OSError):
            raise InputError(
                f"{self._opening} cannot be written: {error.strerror or error}.",
                "Free some space or choose another folder (output.file)."
                if error.errno in _FULL
                else "Choose another folder (output.file), or make this one writable.",
            ) from None


def _in_words(size: int) -> str:
    """A number of bytes.

    >>> _in_words(1_500_000), _in_words(300)
    ('1.5 MB', '0.3 kB')
    """
    for unit, name in ((1e9, "GB"), (1e6, "MB")):
        if size >= unit:
            return f"{size / unit:.3g} {name}"
    return f"{size / 1e3:.3g} kB"


def check_place(path: Path) -> None:
    """Refuse a path that cannot become a file, before anything is computed."""
    if path.is_dir():
        raise InputError(f"{path} is a folder.", "Expected a file name for output.file.")
    if not path.parent.is_dir():
        raise InputError(
            f"{path}: the folder {path.parent} does not exist.",
            "Create it, or choose another output.file.",
        )


def _umask() -> int:
    mask = os.umask(0)
    os.umask(mask)
    return mask
