"""A mesh as a file: kept with a finished job where its document alone does not give it again.

NumPy's own archive of plain arrays; names are kept as text, so that nothing is unpickled.
"""

from pathlib import Path
from typing import Any

import numpy as np

from elements.registry import get
from workers.analysis.mesh import Block, Mesh


def write_mesh(path: Path, mesh: Mesh) -> None:
    """Write a mesh; OSError if the file could not be written."""
    arrays: dict[str, Any] = {"nodes": mesh.nodes, "regions": np.array(mesh.regions)}
    for number, block in enumerate(mesh.blocks):
        arrays[f"element {number}"] = np.array(block.element.name)
        arrays[f"connectivity {number}"] = block.connectivity
        arrays[f"region {number}"] = block.region
    arrays["sides"] = np.array(list(mesh.sides), dtype=np.str_)
    for number, facets in enumerate(mesh.sides.values()):
        arrays[f"side {number}"] = facets
    arrays["points"] = np.array(list(mesh.points), dtype=np.str_)
    arrays["point nodes"] = np.array(list(mesh.points.values()), np.int64)
    np.savez(path, **arrays)


def read_mesh(path: Path) -> Mesh:
    """The mesh that was written, bit for bit.

    Raises
    ------
    UnknownElementError   an element type of the mesh is no longer installed.
    """
    # Opened here: of a damaged file the library would leave its own handle open.
    with path.open("rb") as file, np.load(file, allow_pickle=False) as arrays:
        count = sum(name.startswith("element ") for name in arrays.files)
        blocks = tuple(
            Block(
                get(str(arrays[f"element {number}"])),
                arrays[f"connectivity {number}"],
                arrays[f"region {number}"],
            )
            for number in range(count)
        )
        sides = {str(name): arrays[f"side {n}"] for n, name in enumerate(arrays["sides"])}
        nodes = arrays["point nodes"].tolist()
        points = dict(zip(arrays["points"].tolist(), nodes, strict=True))
        return Mesh(arrays["nodes"], blocks, tuple(arrays["regions"].tolist()), sides, points)
