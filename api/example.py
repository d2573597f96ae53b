"""The example of the documentation: small, complete, and its answer is known by hand.

A strip of 100 x 40 x 8 mm, pulled with 32 kN: 32000 / (40 x 8) = 100 MPa everywhere.
"""

from typing import Any

EXAMPLE: dict[str, Any] = {
    "title": "Slipway tie strip",
    "units": {"length": "mm", "force": "N"},
    "materials": {
        "S355": {"youngs_modulus": "210 GPa", "poissons_ratio": 0.3, "yield_strength": "355 MPa"}
    },
    "geometry": {
        "patches": [
            {
                "name": "strip",
                "corners": [[0, 0], [100, 0], [100, 40], [0, 40]],
                "divisions": [10, 4],
                "sides": [None, "right", None, "left"],
            }
        ],
        "points": {"corner": [0, 0]},
    },
    "plate": {"material": "S355", "thickness": 8},
    "supports": [{"on": "left", "ux": 0}, {"on": "corner", "uy": 0}],
    "load_cases": {"pull": [{"on": "right", "total_force": [32000, 0]}]},
}
