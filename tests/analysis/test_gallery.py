"""The gallery of plates, meshed with every element type: shapes, borders, areas, names.

What a chord leaves out of a circle of n sides is 1 - sin(2 pi / n) n / 2 pi, or 0.3 % at 48; what a
parabola through three points leaves out of an arc of angle a is r^2 a^5 / 960, or 1e-5 of a circle
at 24 (series of the segment's area). These are the default numbers of elements to the turn.
"""

from functools import cache
from pathlib import Path

import numpy as np
import pytest
from PIL import Image

from elements.registry import get
from tests.contact_sheet import contact_sheet
from tests.gallery import GALLERY, drawn
from tests.shapes import region_polygons
from workers.analysis.mesh import Mesh
from workers.analysis.meshing.corners import sharp_corners
from workers.analysis.meshing.drawing import Drawing
from workers.analysis.meshing.free import mesh_drawing
from workers.analysis.meshing.outline import draw
from workers.analysis.meshing.shape import shape_faults
from workers.analysis.quality import element_quality
from workers.job import Meshing

pytestmark = pytest.mark.slow

ELEMENTS = ("T3", "T6", "Q4", "Q8")
CHORDS = {1: 3e-3, 2: 2e-5}  # relative error of an area, by order
LEAST_ANGLE = 20.0  # degrees, of triangles
LEAST_JACOBIAN = 0.25  # of quadrilaterals
MOST_ASPECT = 4.0  # of quadrilaterals: length over width, by the eye of whoever looks at the sheet
SHARP = 50.0  # degrees: near such a corner of the drawing no element can be better than it

plates = pytest.mark.parametrize("name", GALLERY)
elements = pytest.mark.parametrize("element", ELEMENTS)


@cache
def drawing(name: str) -> Drawing:
    return draw(drawn(GALLERY[name]))


@cache
def mesh(name: str, element: str) -> Mesh:
    return mesh_drawing(drawing(name), Meshing(element=element))


def areas(mesh: Mesh) -> dict[str, float]:
    """Area of every region, curved sides included."""
    found = np.zeros(len(mesh.regions))
    for number, block in enumerate(mesh.blocks):
        rule = block.element.load_rule()
        _, det_J = block.element.jacobian(mesh.coords(number), rule.points)
        found += np.bincount(block.region, det_J @ rule.weights, len(found))
    return dict(zip(mesh.regions, found.tolist(), strict=True))


def away_from_sharp_corners(drawing: Drawing, corners: np.ndarray) -> np.ndarray:
    """Elements (m,) not in a sharp corner of the drawing, where it is two of them wide."""
    size = np.linalg.norm(np.roll(corners, -1, axis=1) - corners, axis=2).mean(axis=1)
    away = np.ones(len(corners), bool)
    for corner in sharp_corners(drawing.edges, SHARP):
        distance = np.linalg.norm(corners.mean(axis=1) - corner.at, axis=1)
        away &= distance > size / np.tan(np.radians(corner.degrees / 2))
    return away


@elements
@plates
def test_no_element_is_inverted_anywhere(name: str, element: str) -> None:
    for block in mesh(name, element).blocks:
        assert not shape_faults(block.element, block.connectivity, mesh(name, element).nodes)


@elements
@plates
def test_elements_are_well_shaped(name: str, element: str) -> None:
    made = mesh(name, element)
    for number, block in enumerate(made.blocks):
        coords = made.coords(number)
        away = away_from_sharp_corners(drawing(name), coords[:, : block.element.corners])
        quality = element_quality(block.element, coords[away])
        if block.element.is_triangle:
            assert quality["min_angle"].min(initial=60) > LEAST_ANGLE
        else:
            assert quality["min_scaled_jacobian"].min(initial=1) > LEAST_JACOBIAN
            assert quality["max_aspect"].max(initial=1) < MOST_ASPECT


@elements
@plates
def test_nodes_of_every_border_lie_on_the_true_curves(name: str, element: str) -> None:
    """Of the outline, of holes, and between regions; mid-side nodes included."""
    made = mesh(name, element)
    one, other = made.shared_facets()
    between = one[made.facet_regions(one) != made.facet_regions(other)]
    table = drawing(name).table
    for facets in (made.boundary, between):
        nodes = made.nodes[made.facet_nodes(facets)]
        every = np.repeat(nodes, len(table), axis=0)
        distance = table.distance(np.tile(np.arange(len(table)), len(nodes)), every)
        nearest = distance.reshape(len(nodes), len(table)).min(axis=1)
        assert nearest.max(initial=0.0) < 1e-9 * made.diagonal


@elements
@plates
def test_every_region_has_its_area(name: str, element: str) -> None:
    """The exact areas are shapely's, of polygons with 2000 sides to the turn."""
    exact = {n: p.area for n, p in region_polygons(GALLERY[name]).items() if not p.is_empty}
    found = areas(mesh(name, element))
    assert found.keys() == exact.keys()
    tolerance = CHORDS[get(element).order] * sum(exact.values())
    for region, area in exact.items():
        assert found[region] == pytest.approx(area, abs=tolerance)


@elements
@plates
def test_sides_and_points_have_their_names(name: str, element: str) -> None:
    made, plan = mesh(name, element), drawing(name)
    lengths: dict[str, float] = {}
    for edge in plan.edges:
        if edge.side is not None:
            lengths[edge.side] = lengths.get(edge.side, 0.0) + edge.curve.length
    found = {side: float(made.facet_lengths(f).sum()) for side, f in made.sides.items()}
    # A chord is shorter than its arc by (2 pi / 48)^2 / 24, a parabola by far less.
    assert found == pytest.approx(lengths, rel=1e-3)
    border = {tuple(facet) for facet in made.boundary.tolist()}
    for facets in made.sides.values():
        assert {tuple(facet) for facet in facets.tolist()} <= border
    for point, place in plan.points.items():
        assert tuple(made.nodes[made.points[point]]) == place


@plates
def test_orders_of_one_shape_differ_in_their_middles_only(name: str) -> None:
    """Quadratic elements are mostly of their own type; triangles fill in only where needed."""
    for element in ("Q4", "Q8"):
        blocks = {block.element.name: block.element_count for block in mesh(name, element).blocks}
        assert set(blocks) <= {element, "T3" if element == "Q4" else "T6"}
        assert blocks[element] > 0.98 * sum(blocks.values())
    for element in ("T3", "T6"):
        assert [block.element.name for block in mesh(name, element).blocks] == [element]


def test_contact_sheet_shows_every_mesh(tmp_path: Path) -> None:
    """A picture with a good deal of ink in each of its cells."""
    shown = {f"{name} {e}": mesh(name, e) for name in ("ring", "wedge") for e in ("T6", "Q8")}
    contact_sheet(tmp_path / "sheet.png", shown, columns=2)
    with Image.open(tmp_path / "sheet.png") as picture:
        grey = np.array(picture.convert("L"))
    for half in np.array_split(grey, 2, axis=0):
        for cell in np.array_split(half, 2, axis=1):
            assert (cell < 200).mean() > 0.05
