"""Fields as pixels: triangles with values at their corners, painted off-screen by PyVista.

Call `offscreen.require()` first: on a machine without off-screen OpenGL the first render ends the
process. The plotting half of PyVista, which it loads by itself only when the first window opens, is
loaded here: a worker imports this before it forks.
"""

from typing import Any

import numpy as np
import pyvista
import pyvista.plotting
from numpy.typing import NDArray

Array = NDArray[np.floating[Any]]


def paint(
    size: tuple[int, int],
    points: Array,
    triangles: NDArray[np.int64],
    values: Array,
    *,
    colours: NDArray[np.uint8],
    limits: tuple[float, float],
) -> NDArray[np.uint8]:
    """Paint values through a table of colours on white paper.

    Parameters
    ----------
    size : width, height [pixels]
    points : (n, 2)   pixels from the lower left corner
    triangles : (t, 3)
    values : (n,)     values beyond the limits take the colour of the limit
    colours : (c, 3) uint8

    Returns
    -------
    (height, width, 3) uint8   top row first
    """
    width, height = size
    surface = _polydata(points, triangles)
    surface["value"] = values
    table = pyvista.LookupTable(
        values=np.column_stack((colours, np.full(len(colours), 255, np.uint8))),
        scalar_range=limits,
    )
    plotter = pyvista.Plotter(off_screen=True, window_size=[width, height])
    try:
        plotter.disable_anti_aliasing()  # edges are overdrawn with smooth lines
        plotter.background_color = pyvista.Color("white")
        plotter.add_mesh(
            surface,
            scalars="value",
            cmap=table,
            clim=limits,
            lighting=False,
            interpolate_before_map=True,
            show_scalar_bar=False,
            reset_camera=False,
        )
        camera = plotter.camera
        camera.parallel_projection = True
        camera.position = (width / 2, height / 2, 1.0)
        camera.focal_point = (width / 2, height / 2, 0.0)
        camera.up = (0.0, 1.0, 0.0)
        camera.parallel_scale = height / 2  # one unit is one pixel
        camera.clipping_range = (0.1, 2.0)
        return np.array(plotter.screenshot(return_img=True))
    finally:
        plotter.close()


def isolines(
    points: Array, triangles: NDArray[np.int64], values: Array, level: float
) -> list[Array]:
    """Polylines (n, 2) where the value is `level`."""
    if not len(triangles):
        return []
    corners = triangles.ravel()
    surface = _polydata(points[corners], np.arange(len(corners)).reshape(-1, 3))
    surface["value"] = values[corners]
    lines = surface.contour([level], scalars="value")
    if lines.n_cells == 0:
        return []
    # Elements do not share corners: join what meets within a hundredth of a pixel.
    joined = lines.clean(tolerance=0.01, absolute=True).strip(join=True, max_length=100_000)
    return [joined.points[line][:, :2] for line in _cells(joined.lines)]


def _cells(flat: NDArray) -> list[NDArray]:
    found, at = [], 0
    while at < len(flat):
        found.append(flat[at + 1 : at + 1 + flat[at]])
        at += flat[at] + 1
    return found


def _polydata(points: Array, triangles: NDArray[np.int64]) -> pyvista.PolyData:
    space = np.column_stack((points, np.zeros(len(points))))
    return pyvista.PolyData.from_regular_faces(space.astype(float), triangles.astype(int))
