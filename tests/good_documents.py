"""Good job documents, one for each kind of geometry, that between them use every key.

The plates stand in a boat-lift and slipway yard; all data are invented.
"""

import copy
from typing import Any

STEEL = {
    "youngs_modulus": "210 GPa",
    "poissons_ratio": 0.3,
    "yield_strength": 355,
    "density": "7850 kg/m3",
    "thermal_expansion": 1.2e-5,
}
BRONZE = {"youngs_modulus": 110_000, "poissons_ratio": 0.34, "yield_strength": "180 MPa"}

OUTLINE: dict[str, Any] = {
    "title": "Boat-lift lug plate",
    "label": "slipway, north berth",
    "units": {"length": "mm", "force": "N"},
    "materials": {"steel": STEEL, "bronze": BRONZE},
    "geometry": {
        "outline": [
            {"at": [0, 0], "side": "base"},
            {"at": [160, 0], "side": "right", "fillet": 8, "fillet_side": "round"},
            {"at": [160, 90], "side": "crown", "through": [80, 170]},
            {"at": [0, 90], "side": "left"},
        ],
        "holes": [
            {"name": "pin", "circle": {"centre": [80, 90], "radius": "2.5 cm"}},
            {
                "name": "slot",
                "outline": [
                    {"at": [20, 20], "side": "slot low"},
                    {"at": [30, 20]},
                    {"at": [30, 30]},
                ],
            },
        ],
        "regions": [
            {"name": "boss", "circle": {"centre": [80, 90], "radius": 45}, "thickness": 30},
            {
                "name": "insert",
                "outline": [{"at": [120, 20]}, {"at": [140, 20]}, {"at": [130, 40]}],
                "thickness": "20 mm",
                "material": "steel",
            },
        ],
        "points": {"tip": [80, 170]},
    },
    "plate": {"material": "steel", "thickness": 15},
    "meshing": {
        "element": "Q8",
        "method": "free",
        "size": 6,
        "sizes": {"pin": "2 mm", "boss": 4, "tip": 1, "round": 3},
        "target_error": 0.03,
        "max_dofs": 200_000,
    },
    "supports": [
        {"name": "foundation", "on": "base", "ux": 0, "uy": 0},
        {"on": "left", "normal": "0.1 mm", "case": "settled"},
        {"on": "left", "spring": {"x": "50 N/mm2", "tangential": 3}},
        {"on": "tip", "along": [1, 1], "displacement": 0.5, "spring": {"y": "5 kN/mm"}},
        {"on": {"segment": [[160, 0], [160, 90]], "tolerance": "0.1 mm"}, "ux": 0},
        {"on": {"box": [[10, 0], [0, 10]]}, "uy": 0},
        {"on": {"circle": {"centre": [80, 90], "radius": 25}}, "ux": 0},
    ],
    "load_cases": {
        "lift": [{"on": "pin", "bearing": [0, "80 kN"]}, {"on": "tip", "force": [1, -2]}],
        "self weight": [{"acceleration": [0, "-9.81 m/s2"]}],
        "wind": [
            {"on": "right", "total_force": [300, 0]},
            {"on": "right", "total_moment": "2 kN*m"},
            {"on": "crown", "traction": {"from": [1, 0], "to": [0, "1 MPa"]}},
            {"on": "crown", "pressure": {"from": 0, "to": "3 MPa"}},
            {"on": "slot", "shear": 2},
            {"on": "slot low", "line_load": ["5 kN/m", 0]},
        ],
        "sun": [{"on": "insert", "temperature_change": "20 degC"}],
        "turning": [
            {"spin": {"about": [0, 0], "speed": "30 rpm"}},
            {"on": "boss", "body_force": [0, 1e-6]},
        ],
        "settled": [],
    },
    "combinations": {"lift x 1.5": {"lift": 1.5, "self weight": 1.35}},
    "requests": {
        "probes": {"side of pin": [56, 90]},
        "lines": {"net section": {"from": [0, 90], "to": [55, 90], "points": 11}},
        "cuts": {"root": {"from": [0, 5], "to": [160, 5]}},
        "convergence": True,
        "hot_spots": {"toe": {"at": [0, 60], "direction": [3, 1], "thickness": "15 mm"}},
    },
    "limits": {"displacement": 1, "factor_on_yield": 1.5},
}

PATCHES: dict[str, Any] = {
    "title": "Slipway gusset",
    "units": {"length": "in", "force": "kip"},
    "materials": {"steel": {"youngs_modulus": 29_000, "poissons_ratio": 0.3}},
    "geometry": {
        "patches": [
            {
                "name": "web",
                "corners": [[0, 0], [10, 0], [10, 5], [0, 5]],
                "divisions": [8, 4],
                "grading": [2, 1],
                "sides": ["low", None, "high", "wall"],
                "through": [[5, -1], None, None, None],
            },
            {
                "name": "toe",
                "corners": [[10, 0], [16, 1], [16, 4], [10, 5]],
                "divisions": [5, 4],
                "sides": ["low", "end", "high", None],
                "region": "thick",
            },
        ],
        "regions": [{"name": "thick", "thickness": "30 mm"}],
        "points": {"A": [16, 1]},
    },
    "plate": {"material": "steel", "thickness": 0.5},
    "meshing": {"element": "T6"},
    "supports": [{"on": "wall", "ux": 0, "uy": 0}],
    "load_cases": {"pull": [{"on": "end", "total_force": [12, 0]}]},
}

MESH: dict[str, Any] = {
    "title": "Two quadrilaterals and a triangle",
    "units": {"length": "m", "force": "kN"},
    "materials": {"steel": {"youngs_modulus": "210 GPa", "poissons_ratio": 0.3}},
    "geometry": {
        "mesh": {
            "nodes": [[0, 0], [1, 0], [2, 0], [0, 1], [1, 1], [2, 1.5], [3, 0.5]],
            "blocks": [
                {"element": "Q4", "connectivity": [[0, 1, 4, 3], [1, 2, 5, 4]], "region": "web"},
                {"element": "T3", "connectivity": [[2, 6, 5]]},
            ],
            "sides": {"wall": [[3, 0]], "low": [[0, 1], [1, 2]]},
            "points": {"nose": 6},
        },
        "regions": [{"name": "web", "thickness": "8 mm"}],
    },
    "plate": {"material": "steel", "thickness": "12 mm"},
    "supports": [{"on": "wall", "ux": 0, "uy": 0}, {"on": {"nodes": [1, 2]}, "spring": {"y": 9}}],
    "load_cases": {"pull": [{"on": "nose", "force": [1, 0]}]},
}

_GOOD = {"outline": OUTLINE, "patches": PATCHES, "mesh": MESH}
KINDS = tuple(_GOOD)


def good(kind: str) -> dict[str, Any]:
    """A fresh copy of the good document of one kind of geometry."""
    return copy.deepcopy(_GOOD[kind])
