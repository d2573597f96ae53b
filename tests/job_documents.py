"""Job documents of plates that have a closed-form answer, in N and mm."""

from typing import Any

STEEL = {
    "youngs_modulus": 210_000,
    "poissons_ratio": 0.3,
    "yield_strength": 355,
    "density": 7.85e-9,
}


def strip(
    *, length: float = 100.0, height: float = 40.0, thickness: float = 8.0, force: float = 32_000.0
) -> dict[str, Any]:
    """A strip pulled at its right end, held at the left so that it can contract freely.

    The stress is force / (height thickness) everywhere, the right end moves by stress / E length.
    """
    return {
        "title": "Slipway tie strip",
        "units": {"length": "mm", "force": "N"},
        "materials": {"steel": dict(STEEL)},
        "geometry": {
            "patches": [
                {
                    "name": "strip",
                    "corners": [[0, 0], [length, 0], [length, height], [0, height]],
                    "divisions": [5, 2],
                    "sides": ["low", "right", "high", "left"],
                }
            ],
            "points": {"corner": [0, 0]},
        },
        "plate": {"material": "steel", "thickness": thickness},
        "meshing": {"element": "Q8"},
        "supports": [{"on": "left", "ux": 0}, {"on": "corner", "uy": 0}],
        "load_cases": {"pull": [{"on": "right", "total_force": [force, 0]}]},
    }
