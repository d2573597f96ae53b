"""Documents with the client's own mesh, as large as wanted: quadratic, nodes numbered at random."""

from typing import Any

import numpy as np
import orjson

# Corners and mid-sides in half steps of a cell.
_QUAD = [(0, 0), (2, 0), (2, 2), (0, 2), (1, 0), (2, 1), (1, 2), (0, 1)]
_TRIANGLES = [
    [(0, 0), (2, 0), (2, 2), (1, 0), (2, 1), (1, 1)],
    [(0, 0), (2, 2), (0, 2), (1, 1), (1, 2), (0, 1)],
]


def own_mesh(cells: int, *, mixed: bool = False) -> tuple[np.ndarray, list[dict[str, Any]]]:
    """Nodes (N, 2) and blocks of a wavy square of 1000 by 1000 with straight sides.

    cells : each way; their Q8 have 3 cells^2 nodes, about
    mixed : T6 in the right half
    """
    i, j = np.meshgrid(*[np.arange(2 * cells + 1)] * 2, indexing="ij")
    quads = cells // 2 if mixed else cells
    used = (i % 2 == 0) | (j % 2 == 0) | (i > 2 * quads)
    number = np.full(i.shape, -1)
    count = int(used.sum())
    number[used] = np.random.default_rng(8).permutation(count)
    x, y = i / (2 * cells), j / (2 * cells)
    wave = 0.02 * np.sin(np.pi * x) * np.sin(np.pi * y)
    nodes = np.empty((count, 2))
    nodes[number[used]] = 1000 * np.stack((x + wave, y - wave), axis=-1)[used]

    def connect(shapes: list[list[tuple[int, int]]], first: int, last: int) -> np.ndarray:
        a, b = 2 * np.arange(first, last)[:, None], 2 * np.arange(cells)
        rows = [[number[a + di, b + dj].ravel() for di, dj in shape] for shape in shapes]
        return np.concatenate([np.stack(row, axis=1) for row in rows])

    blocks = [{"element": "Q8", "connectivity": connect([_QUAD], 0, quads)}]
    if mixed:
        blocks.append({"element": "T6", "connectivity": connect(_TRIANGLES, quads, cells)})
    return nodes, blocks


def large_document(cells: int, *, mixed: bool = False, decimals: int = 6) -> bytes:
    """A job on `own_mesh`: held on the left and pulled on the right, sides found by selectors."""
    nodes, blocks = own_mesh(cells, mixed=mixed)
    document = {
        "title": "Shell plate from another program",
        "units": {"length": "mm", "force": "N"},
        "materials": {"steel": {"youngs_modulus": 210000, "poissons_ratio": 0.3}},
        "geometry": {"mesh": {"nodes": nodes.round(decimals), "blocks": blocks}},
        "plate": {"material": "steel", "thickness": 10},
        "supports": [{"on": {"segment": [[0, 0], [0, 1000]]}, "ux": 0, "uy": 0}],
        "load_cases": {"pull": [{"on": {"box": [[1000, 0], [1000, 1000]]}, "pressure": -10}]},
    }
    return orjson.dumps(document, option=orjson.OPT_SERIALIZE_NUMPY)
