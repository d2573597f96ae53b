"""A shear panel of a slipway cradle, as fine and with as many load cases as wanted."""

from typing import Any

CELLS_WITH = {"Q8": 6, "Q4": 2}  # unknowns for each cell of a large panel


def panel(cells: int, element: str = "Q8", cases: int = 1) -> dict[str, Any]:
    """A slanted quadrilateral, held along its sill and pushed at its head; N and mm."""
    push = {
        f"push {i}": [{"on": "head", "total_force": [50_000 - 7 * i, 11 * i - 20_000]}]
        for i in range(cases)
    }
    return {
        "title": "Shear panel of a slipway cradle",
        "units": {"length": "mm", "force": "N"},
        "materials": {
            "S355": {"youngs_modulus": 210000, "poissons_ratio": 0.3, "yield_strength": 355}
        },
        "geometry": {
            "patches": [
                {
                    "name": "panel",
                    "corners": [[0, 0], [1000, 0], [1100, 900], [-50, 1000]],
                    "divisions": [cells, cells],
                    "sides": ["sill", None, "head", None],
                }
            ]
        },
        "plate": {"material": "S355", "thickness": 10},
        "meshing": {"element": element},
        "supports": [{"on": "sill", "ux": 0, "uy": 0}],
        "load_cases": push,
        "requests": {"fields": "envelope" if cases > 1 else "all"},
    }


def cells_for(dofs: int, element: str = "Q8") -> int:
    """Cells each way of a panel with about so many unknowns."""
    return round((dofs / CELLS_WITH[element]) ** 0.5)
