"""A mesh of half a million nodes: read as a whole, and nearly as fast as its JSON is parsed."""

import gc
from statistics import median
from time import perf_counter
from typing import Any

import numpy as np
import orjson
import pytest

from tests.good_documents import good
from workers.document.read import load, read_document
from workers.errors import DocumentError
from workers.geometry import MeshGeometry


def grid(n: int) -> tuple[Any, Any]:
    """Nodes and connectivity of n x n Q8 squares."""
    x, y = np.meshgrid(range(2 * n + 1), range(2 * n + 1))
    kept = (x % 2 == 0) | (y % 2 == 0)
    number = np.full(x.shape, -1)
    number[kept] = np.arange(kept.sum())
    steps = ((0, 0), (2, 0), (2, 2), (0, 2), (1, 0), (2, 1), (1, 2), (0, 1))
    corner = 2 * np.arange(n)
    connectivity = [number[dy:][corner][:, corner + dx].ravel() for dx, dy in steps]
    return np.column_stack([x[kept], y[kept]]) * 1.0625, np.column_stack(connectivity)


def document_of(n: int) -> dict[str, Any]:
    nodes, connectivity = grid(n)
    document = good("mesh")
    mesh = document["geometry"]["mesh"]
    mesh["nodes"] = nodes.tolist()
    mesh["blocks"] = [{"element": "Q8", "connectivity": connectivity.tolist(), "region": "web"}]
    return document


def test_arrays_have_the_numbers_of_the_document() -> None:
    nodes, connectivity = grid(12)
    geometry = read_document(orjson.dumps(document_of(12))).geometry
    assert isinstance(geometry, MeshGeometry)
    np.testing.assert_array_equal(geometry.nodes, nodes)
    np.testing.assert_array_equal(geometry.blocks[0].connectivity, connectivity)


@pytest.mark.parametrize("bad", [True, None, "1", 1.0, [1], 2**40, 10**30, -1])
def test_one_bad_node_number_among_thousands_is_found(bad: Any) -> None:
    document = document_of(20)
    document["geometry"]["mesh"]["blocks"][0]["connectivity"][333][5] = bad
    with pytest.raises(DocumentError) as caught:
        load(document)
    (fault,) = caught.value.faults
    assert fault.pointer == "/geometry/mesh/blocks/0/connectivity/333/5"


@pytest.mark.parametrize("bad", [True, None, "1", [1], float("nan"), float("-inf"), 10**400])
def test_one_bad_coordinate_among_thousands_is_found(bad: Any) -> None:
    document = document_of(20)
    document["geometry"]["mesh"]["nodes"][777][1] = bad
    with pytest.raises(DocumentError) as caught:
        load(document)
    (fault,) = caught.value.faults
    assert fault.pointer == "/geometry/mesh/nodes/777/1"


@pytest.mark.benchmark
def test_half_a_million_nodes_cost_at_most_three_times_their_json() -> None:
    """The ratio to orjson.loads of the same bytes, medians of five in the same run."""
    data = orjson.dumps(document_of(407))
    plain, whole = [], []
    for _ in range(5):
        for read, times in ((orjson.loads, plain), (read_document, whole)):
            gc.collect()
            start = perf_counter()
            read(data)
            times.append(perf_counter() - start)
    ratio = median(whole) / median(plain)
    print(f"document to job, 498 576 nodes, 165 649 Q8: {ratio:.2f} times orjson.loads")
    assert ratio <= 3
