"""Random plates: valid ones mesh, faulty ones are refused or turn out to be valid.

A hundred of each kind run here; RANDOM_PLATES=1000 in the environment makes it a thousand. What a
mesh must be is checked against shapely's polygon of the plate. Nothing may hang: a mesher that does
is killed after 20 s and fails the plate.
"""

import os
from random import Random
from typing import Any

import numpy as np
import pytest
import shapely

from tests.gallery import drawn
from tests.random_plates import random_plate, spoil
from tests.shapes import plate_polygon, region_polygons
from workers.analysis.mesh import Mesh
from workers.analysis.meshing.drawing import Drawing
from workers.analysis.meshing.free import mesh_drawing
from workers.analysis.meshing.outline import draw
from workers.analysis.meshing.shape import shape_faults
from workers.analysis.quality import mesh_quality
from workers.errors import DocumentError
from workers.job import Meshing

pytestmark = pytest.mark.slow

ELEMENTS = ("T3", "T6", "Q4", "Q8")
COUNT = int(os.environ.get("RANDOM_PLATES", "100"))
BATCH = 20  # plates to a test
batches = pytest.mark.parametrize("first", range(0, COUNT, BATCH))


def assert_sound(mesh: Mesh, drawing: Drawing, geometry: dict[str, Any]) -> None:
    """Not inverted, whole, and of the area that shapely finds for every region."""
    for block in mesh.blocks:
        assert not shape_faults(block.element, block.connectivity, mesh.nodes)
    order = mesh.blocks[0].element.order
    exact = {n: p.area for n, p in region_polygons(geometry).items()}
    found = np.zeros(len(mesh.regions))
    for number, block in enumerate(mesh.blocks):
        rule = block.element.load_rule()
        _, det_J = block.element.jacobian(mesh.coords(number), rule.points)
        found += np.bincount(block.region, det_J @ rule.weights, len(found))
    # 48 chords or 24 parabolas to the turn of the outline and of every hole (test_gallery.py).
    tolerance = {1: 3e-3, 2: 3e-5}[order] * shapely.Polygon(plate_polygon(geometry).exterior).area
    for region, area in zip(mesh.regions, found, strict=True):
        assert area == pytest.approx(exact[region], abs=tolerance)
    border = mesh.nodes[mesh.facet_nodes(mesh.boundary)]
    line = shapely.union_all([g.boundary for g in [plate_polygon(geometry)]])
    away = shapely.distance(shapely.points(border), line)
    assert away.max() < 1e-5 * mesh.diagonal  # what the chords of shapely's own circles leave
    assert set(drawing.points) == set(mesh.points)
    for name, place in drawing.points.items():
        assert tuple(mesh.nodes[mesh.points[name]]) == place


@batches
def test_valid_plates_with_narrow_gaps_mesh(first: int) -> None:
    """Gaps down to a twenty-thousandth of the plate; elements stay well shaped all the same."""
    for seed in range(first, first + BATCH):
        geometry = random_plate(Random(seed), narrow=0.7)
        drawing = draw(drawn(geometry))
        mesh = mesh_drawing(drawing, Meshing(element=ELEMENTS[seed % 4]))
        assert_sound(mesh, drawing, geometry)
        assert mesh_quality(mesh)["min_scaled_jacobian"]["value"] > 0.25, seed


@batches
def test_spoilt_plates_are_refused_or_mesh_after_all(first: int) -> None:
    refused = 0
    for seed in range(first, first + BATCH):
        random = Random(seed)
        geometry = spoil(random, random_plate(random))
        try:
            drawing = draw(drawn(geometry))
        except DocumentError as error:
            refused += all(fault.pointer and fault.message for fault in error.faults)
            continue
        mesh = mesh_drawing(drawing, Meshing(element=ELEMENTS[seed % 4]))
        assert_sound(mesh, drawing, geometry)
    assert refused > BATCH / 3
