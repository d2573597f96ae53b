"""One picture of many meshes, for a person to look at: `python -m tests.contact_sheet OUT.png`."""

import sys
from collections.abc import Mapping, Sequence
from pathlib import Path

import matplotlib

matplotlib.use("Agg")
import matplotlib.pyplot as plt
import numpy as np
from matplotlib.collections import PolyCollection

from tests.gallery import GALLERY, drawn
from workers.analysis.mesh import Mesh
from workers.analysis.meshing.free import mesh_drawing
from workers.analysis.meshing.outline import draw
from workers.analysis.quality import element_quality
from workers.job import Meshing

COLUMNS = 4
WIDTH, TITLE = 6.0, 0.5  # of a column, above a row [inch]
ALONG = np.linspace(-1, 1, 7)[:-1]  # points on each side that draw it curved


def contact_sheet(path: Path, meshes: Mapping[str, Mesh], columns: int = COLUMNS) -> None:
    """Draw every mesh, coloured by the scaled Jacobian of its elements, dark where it is poor."""
    heights = _row_heights(list(meshes.values()), columns)
    figure, axes = plt.subplots(
        len(heights),
        columns,
        figsize=(WIDTH * columns, sum(heights)),
        gridspec_kw={"height_ratios": heights},
        dpi=100,
    )
    for axis in np.ravel(axes):
        axis.set_axis_off()
    for axis, (name, mesh) in zip(np.ravel(axes), meshes.items(), strict=False):
        least, count = 1.0, 0
        for number, block in enumerate(mesh.blocks):
            coords = mesh.coords(number)
            quality = element_quality(block.element, coords)["min_scaled_jacobian"]
            least, count = min(least, float(quality.min())), count + len(coords)
            shapes = PolyCollection(_outlines(mesh, number), edgecolors="0.25", linewidths=0.2)
            shapes.set(array=quality, cmap="RdYlGn", clim=(0, 1))
            axis.add_collection(shapes)
        for place in mesh.points.values():
            axis.plot(*mesh.nodes[place], "o", color="blue", markersize=3)
        axis.set_aspect("equal")
        axis.autoscale_view()
        axis.set_title(f"{name}: {count}, SJ {least:.2f}", fontsize=11)
    figure.tight_layout()
    figure.savefig(path)
    plt.close(figure)


def _row_heights(meshes: Sequence[Mesh], columns: int) -> list[float]:
    """Of the tallest plate in each row, as wide as a column [inch]."""
    tall = [np.ptp(mesh.nodes, axis=0) for mesh in meshes]
    heights = [TITLE + WIDTH * min(1.0, float(height / width)) for width, height in tall]
    return [max(heights[k : k + columns]) for k in range(0, len(heights), columns)]


def _outlines(mesh: Mesh, number: int) -> np.ndarray:
    element, coords = mesh.blocks[number].element, mesh.coords(number)
    if element.order == 1:
        return coords
    places = []
    for a, b, mid in element.sides:
        s = ALONG[:, None]
        ends = (s * (s - 1) / 2, s * (s + 1) / 2, 1 - s**2)
        places.append(sum(w * coords[:, None, n] for w, n in zip(ends, (a, b, mid), strict=True)))
    return np.concatenate(places, axis=1)


def main(path: str, *elements: str) -> None:
    meshes = {
        f"{name} {element}": mesh_drawing(draw(drawn(geometry)), Meshing(element=element))
        for name, geometry in GALLERY.items()
        for element in elements or ("T3", "T6", "Q4", "Q8")
    }
    contact_sheet(Path(path), meshes)


if __name__ == "__main__":
    main(*sys.argv[1:])
