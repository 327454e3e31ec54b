"""Drawing without a screen: whether this machine can, and silence on the terminal meanwhile."""

from __future__ import annotations

import os
import subprocess
import sys
from collections.abc import Iterator
from contextlib import contextmanager

from expander.errors import InputError

_TRIAL = """
import vtkmodules.vtkRenderingOpenGL2
from vtkmodules.vtkRenderingCore import vtkRenderer, vtkRenderWindow
window = vtkRenderWindow()
window.SetOffScreenRendering(1)
window.SetSize(8, 8)
window.AddRenderer(vtkRenderer())
window.Render()
"""
_PATIENCE = 60.0

NO_OPENGL = (
    "Pictures cannot be drawn on this machine: no OpenGL was found, neither of a graphics card nor "
    "in software."
)
HOW_TO_GET_IT = (
    "Install Mesa's software OpenGL (Debian and Ubuntu: apt install libegl1 libgl1-mesa-dri; "
    "Fedora: dnf install mesa-libEGL mesa-dri-drivers). A screen is not needed."
)


class Trial:
    """A picture of nothing, drawn by another process.

    Where there is no OpenGL at all, VTK ends the process that draws. Hence the first try is not
    ours; it runs while the case is read, so that it costs no time.
    """

    def __init__(self) -> None:
        self._process = subprocess.Popen(
            [sys.executable, "-c", _TRIAL],
            stdin=subprocess.DEVNULL,
            stdout=subprocess.DEVNULL,
            stderr=subprocess.DEVNULL,
        )

    def __enter__(self) -> Trial:
        return self

    def __exit__(self, *_: object) -> None:
        if self._process.poll() is None:
            self._process.kill()
        self._process.wait()

    def require(self) -> None:
        """Return if pictures can be drawn here.

        Raises
        ------
        InputError
            With what has to be installed.
        """
        if not self.succeeds():
            raise InputError(NO_OPENGL, HOW_TO_GET_IT)

    def succeeds(self) -> bool:
        """Whether pictures can be drawn here."""
        try:
            return self._process.wait(_PATIENCE) == 0
        except subprocess.TimeoutExpired:
            self._process.kill()
            return False


@contextmanager
def silent() -> Iterator[None]:
    """No words of VTK or of the OpenGL libraries on the terminal; these write to the C stream."""
    from vtkmodules.vtkCommonCore import vtkObject

    shown = vtkObject.GetGlobalWarningDisplay()
    vtkObject.GlobalWarningDisplayOff()
    sys.stderr.flush()
    try:
        kept = os.dup(2)
    except OSError:  # no error stream at all
        kept = -1
    nowhere = os.open(os.devnull, os.O_WRONLY)
    try:
        if kept >= 0:
            os.dup2(nowhere, 2)
        yield
    finally:
        os.close(nowhere)
        if kept >= 0:
            os.dup2(kept, 2)
            os.close(kept)
        vtkObject.SetGlobalWarningDisplay(shown)
