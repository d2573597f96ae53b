"""Meshes written and read: the same bit for bit."""

from pathlib import Path

import numpy as np

from tests.plates import grid
from workers.mesh_file import read_mesh, write_mesh


def test_a_mesh_comes_back_as_it_was(tmp_path: Path) -> None:
    """Two blocks, two regions, names of any script, mid-side nodes."""
    mesh = grid("T6+Q8", 4, 3, region_of_column=[0, 0, 1, 1], regions=("plate", "Gelötetes Stück"))
    path = tmp_path / "mesh.npz"
    write_mesh(path, mesh)
    read = read_mesh(path)
    np.testing.assert_array_equal(read.nodes, mesh.nodes)
    assert read.regions == mesh.regions
    assert dict(read.points) == dict(mesh.points)
    assert list(read.sides) == list(mesh.sides)
    for name, facets in mesh.sides.items():
        np.testing.assert_array_equal(read.sides[name], facets)
    for one, other in zip(read.blocks, mesh.blocks, strict=True):
        assert one.element is other.element
        np.testing.assert_array_equal(one.connectivity, other.connectivity)
        np.testing.assert_array_equal(one.region, other.region)


def test_a_mesh_without_names_comes_back(tmp_path: Path) -> None:
    mesh = grid("Q4", 2, 2, closed=False)
    bare = type(mesh)(mesh.nodes, mesh.blocks)
    write_mesh(tmp_path / "mesh.npz", bare)
    read = read_mesh(tmp_path / "mesh.npz")
    assert (dict(read.sides), dict(read.points)) == ({}, {})
