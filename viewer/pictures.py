"""Pictures: the modelled sector and the whole body next to each other, drawn without a screen.

Both at one scale, from one direction, deformed by one factor, under one colour scale. The
projection is parallel, so lengths can be compared, and the sector is the same part moved aside.

>>> from viewer.layout import Sheet
>>> Sheet(1600, 900).drawing
(132, 712)
"""

from __future__ import annotations

from dataclasses import dataclass
from functools import cached_property
from io import BytesIO
from pathlib import Path
from typing import TYPE_CHECKING, Any

import numpy as np
from numpy.typing import NDArray
from PIL import Image

from expander.placements import Floats
from expander.writers.newfiles import NewFiles
from viewer.colours import BORDER, INK, MISSING, OUTLINE, PAPER, PLAIN, UNDEFORMED
from viewer.layout import Arrangement, Sheet, arrange
from viewer.legend import MOST_BORDERED, Scale, write_legend
from viewer.lettering import Pen, blank
from viewer.offscreen import silent
from viewer.scene import VALUE, Scene
from viewer.surfaces import Skin, at, lines, places, silhouette, skin_of, smooth

if TYPE_CHECKING:
    import pyvista

Pixels = NDArray[np.uint8]

SIZE = (1600, 900)
_FINER = 2  # drawn so many times as fine, then averaged, for clean edges
_MOST_PIXELS = 24_000_000  # drawn finer only up to here: software takes its time


def draw(scene: Scene, path: Path, size: tuple[int, int] = SIZE) -> None:
    """Write the picture as a PNG file; it appears under its name only when it is whole.

    Raises
    ------
    InputError
        If the file cannot be written.
    """
    data = png(scene, size)
    with NewFiles() as files:
        file = files.open(path, len(data))
        view = memoryview(data)
        while len(view):
            view = view[file.write(view) :]


def png(scene: Scene, size: tuple[int, int] = SIZE) -> bytes:
    """The picture as the bytes of a PNG file, for reports."""
    stream = BytesIO()
    Image.fromarray(pixels(scene, size)).save(stream, "PNG")
    return stream.getvalue()


def pixels(scene: Scene, size: tuple[int, int] = SIZE) -> Pixels:
    """The picture, (height, width, 3)."""
    sheet = Sheet(*size)
    scale = Scale.of(scene)
    first, last = sheet.drawing
    strip = (sheet.width, last - first)
    sector, body = skin_of(scene.sector), skin_of(scene.body)
    arrangement = arrange(_extent(sector, scene), _extent(body, scene), scene.view, strip,
                          sheet.unit)  # fmt: skip
    page = blank(*size)
    with silent():
        drawn = _Drawing(scene, scale, arrangement, strip, sheet.unit).pixels(sector, body)
    page.paste(Image.fromarray(drawn), (0, first))
    pen = Pen(page, sheet.unit)
    write_legend(pen, sheet, scene, scale, arrangement)
    return np.asarray(page)


def _extent(skin: Skin, scene: Scene) -> Floats:
    """Everything that is drawn of a grid: deformed surface and undeformed lines."""
    return np.concatenate([places(skin.faces, scene.factor), places(skin.faces, 0.0)])


@dataclass(eq=False)
class _Drawing:
    """The strip with both bodies; `unit` in pixels."""

    scene: Scene
    scale: Scale
    arrangement: Arrangement
    strip: tuple[int, int]
    unit: float

    def pixels(self, sector: Skin, body: Skin) -> Pixels:
        """Surfaces first, so that their contours are known, then the lines on them."""
        import pyvista

        finer = _FINER if _FINER**2 * self.strip[0] * self.strip[1] <= _MOST_PIXELS else 1
        window = (self.strip[0] * finer, self.strip[1] * finer)
        width = finer * max(self.unit, 0.75)  # of lines: thinner ones fade
        plotter = pyvista.Plotter(off_screen=True, window_size=list(window), lighting="none")
        try:
            plotter.set_background("white")
            plotter.disable_anti_aliasing()
            # From the upper left of the eye; with the rest from everywhere, colours that face
            # the eye are those of the scale
            plotter.add_light(pyvista.Light(position=(-0.28, 0.4, 1.0), intensity=1.0,
                                            light_type="camera light"))  # fmt: skip
            shift = self.arrangement.shift
            for skin, moved in ((sector, shift), (body, np.zeros(3))):
                self._surface(plotter, skin, moved, width)
            self._look(plotter)
            plain = _shot(plotter)
            contours = _contours(_depth(plotter, window), 0.006 * self.size)
            for skin, moved in ((sector, shift), (body, np.zeros(3))):
                self._lines(plotter, skin, moved, width)
            for moved in (shift, np.zeros(3)) if self.scene.outlined else (shift,):
                self._outline(plotter, sector, body, moved, width)
            self._look(plotter)
            full = _shot(plotter)
        finally:
            plotter.close()
        full = _darkened(full, plain, contours)
        image = Image.fromarray(full)
        return np.asarray(image if finer == 1 else image.resize(self.strip, Image.Resampling.BOX))

    @cached_property
    def size(self) -> float:
        """Diagonal of the whole body."""
        return float(np.linalg.norm(np.ptp(np.asarray(self.scene.body.points, float), axis=0)))

    def _surface(self, plotter: pyvista.Plotter, skin: Skin, moved: Floats, width: float) -> None:
        mesh = at(skin.faces, places(skin.faces, self.scene.factor) + moved)
        style: dict[str, Any] = {
            "ambient": 0.72, "diffuse": 0.33, "specular": 0.0, "show_scalar_bar": False,
            "line_width": 3.0 * width, "point_size": 6.0 * width, "lighting": True,
            "name": _next(plotter),
        }  # fmt: skip
        if self.scene.shown is None:
            plotter.add_mesh(smooth(mesh), color=PLAIN, **style).prop.SetInterpolationToGouraud()
            return
        plotter.add_mesh(
            smooth(self.scale.prepared(mesh, VALUE)), scalars=VALUE,
            cmap=self.scale.lookup_table(MISSING), clim=list(self.scale.limits),
            interpolate_before_map=self.scale.continuous, nan_color=MISSING,
            **style,
        ).prop.SetInterpolationToGouraud()  # fmt: skip

    def _lines(self, plotter: pyvista.Plotter, skin: Skin, moved: Floats, width: float) -> None:
        """The undeformed outline, the folds of the body, and the borders of the copies."""
        if self.scene.factor:
            turning = silhouette(skin.faces, self.scene.view.towards)
            for thin in (skin.edges, skin.wires, turning):
                self._stroke(plotter, thin, moved, 1.0 * width, UNDEFORMED, 0.9, factor=0.0)
        self._stroke(plotter, skin.edges, moved, 1.1 * width, INK, 0.75, lift=1.0)
        if len(skin.borders) and self.scene.copies[0] <= MOST_BORDERED:
            seams = lines(places(skin.faces, self.scene.factor), skin.borders)
            self._stroke(plotter, seams, moved, 0.8 * width, BORDER, 0.45, lift=1.0, factor=0.0)

    def _outline(
        self, plotter: pyvista.Plotter, sector: Skin, body: Skin, moved: Floats, width: float
    ) -> None:
        """The modelled sector: strong where it was cut from the body, thin along its own folds."""
        # Around a beam, behind its colours
        self._stroke(plotter, sector.wires, moved, 8.0 * width, OUTLINE, 1.0, lift=-1.0)
        cut = sector.edges
        if len(body.cuts):
            cut = lines(places(body.faces, self.scene.factor), body.cuts)
            self._stroke(plotter, sector.edges, moved, 1.3 * width, OUTLINE, 1.0, lift=2.0)
        self._stroke(plotter, cut, moved, 5.0 * width, PAPER, 0.8, lift=3.0)
        self._stroke(plotter, cut, moved, 3.0 * width, OUTLINE, 1.0, lift=4.0)

    def _stroke(
        self, plotter: pyvista.Plotter, data: pyvista.PolyData, moved: Floats, width: float,
        colour: tuple[int, int, int], opacity: float, lift: float = 0.0,
        factor: float | None = None,
    ) -> None:  # fmt: skip
        """Lines, moved a little towards the eye so that the surface below does not cover them;
        a parallel projection leaves them in their places."""
        if data.n_points == 0:
            return
        points = places(data, self.scene.factor if factor is None else factor)
        mesh = at(data, points + moved + lift * 0.002 * self.size * self.scene.view.towards)
        plotter.add_mesh(mesh, color=colour, line_width=width, opacity=opacity, lighting=False,
                         show_scalar_bar=False, name=_next(plotter))  # fmt: skip

    def _look(self, plotter: pyvista.Plotter) -> None:
        view, focus = self.scene.view, self.arrangement.focus
        camera = plotter.camera
        camera.focal_point = tuple(focus)
        camera.position = tuple(focus + 4.0 * self.size * view.towards)
        camera.up = tuple(view.up)
        camera.parallel_projection = True
        camera.parallel_scale = self.strip[1] / self.arrangement.scale / 2.0
        plotter.reset_camera_clipping_range()


def _next(plotter: pyvista.Plotter) -> str:
    """A new name: two meshes of one name, which may be a reused address, replace each other."""
    return f"part {len(plotter.actors)}"


def _shot(plotter: pyvista.Plotter) -> Pixels:
    plotter.render_window.Render()  # also when something was added since the last picture
    return np.asarray(plotter.screenshot(None, return_img=True))[..., :3]


def _depth(plotter: pyvista.Plotter, window: tuple[int, int]) -> NDArray[np.float32]:
    """Distance from the eye of what each pixel shows, in lengths of the model."""
    from vtkmodules.util.numpy_support import vtk_to_numpy
    from vtkmodules.vtkCommonCore import vtkFloatArray

    stored = vtkFloatArray()
    plotter.render_window.GetZbufferData(0, 0, window[0] - 1, window[1] - 1, stored)
    near, far = plotter.camera.clipping_range
    depth = vtk_to_numpy(stored).reshape(window[1], window[0])[::-1]
    return np.asarray(near + depth * (far - near), dtype=np.float32)


def _contours(depth: NDArray[np.float32], step: float) -> NDArray[np.bool_]:
    """Pixels at which the surface ends before another one or before the paper."""
    found = np.zeros(depth.shape, dtype=bool)
    for d, f in ((depth, found), (depth.T, found.T)):
        # The second difference is nearly zero on a slope, however steep
        bend = d[2:] - 2.0 * d[1:-1] + d[:-2]
        f[1:-1] |= bend > step
    return found


def _darkened(full: Pixels, plain: Pixels, contours: NDArray[np.bool_]) -> Pixels:
    """Contours in ink, except where a line was drawn."""
    free = contours & (np.abs(full.astype(np.int16) - plain).max(axis=2) < 8)
    out = full.copy()
    out[free] = (0.25 * out[free] + 0.75 * np.array(INK)).astype(np.uint8)
    return out
