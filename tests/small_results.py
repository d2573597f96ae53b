"""Results as a worker publishes them, invented and small, for tests of what serves them."""

from typing import Any

from workers.cautions import STANDING

CAUTION = {
    "code": "a-rule",
    "severity": "check",
    "message": "Something was noticed.",
    "evidence": {"value": 1.0},
    "action": "Look at it.",
}
AT = [50.0, 20.0]
_WORST = {
    "value": 100.0, "at": AT, "error": 0.5, "region": "plate",
    "interval": [99.5, 100.5], "singular": None,
}  # fmt: skip
PEAK = {**_WORST, "least": {"value": 0.0}}
GOVERNING = {**_WORST, "governs": "pull"}
QUANTITIES = ("von_mises", "principal_max", "principal_min", "shear_max", "displacement")
STATE = {
    **dict.fromkeys(QUANTITIES, PEAK),
    "reactions": {"left": {"force": [-32000.0, 0.0], "moment": 0.0, "about": [0.0, 20.0]}},
    "equilibrium": {
        "applied": [32000.0, 0.0, 0.0],
        "reaction": [-32000.0, 0.0, 0.0],
        "residual": 1e-15,
        "about": AT,
    },
    "error_estimate": {"relative": 0.01, "energy_norm": 0.1},
    "utilisation": None,
}
PROBE = {
    "at": AT,
    "stress": [100.0, 0.0, 0.0],
    "displacement": [0.02, 0.0],
    "von_mises": 100.0,
    "principal": [100.0, 0.0],
}
LINE = {
    "points": [[0.0, 20.0], [100.0, 20.0]],
    "distance": [0.0, 100.0],
    "cases": {
        "pull": {
            "stress": [[100.0, 0.0, 0.0], [99.5, 0.0, 0.25]],
            "displacement": [[0.0, 0.0], [0.04, 0.0]],
            "von_mises": [100.0, 99.5],
        }
    },
}
RESULTS: dict[str, Any] = {
    "job": {
        "title": "Slipway tie strip",
        "label": None,
        "checksum": "sha256:0",
        "fishplate": "0",
        "made": "2031-04-05T06:07:08.910Z",
    },
    "units": {"length": "mm", "force": "N", "stress": "MPa"},
    "solver": {
        "name": "SuperLU",
        "ordering": "none",
        "dofs": 16,
        "free_dofs": 12,
        "factor_entries": 100,
        "residual": 1e-15,
        "refinements": 0,
        "reciprocal_condition": 1e-4,
        "iteration": None,
        "seconds": {"solve": 0.1},
    },
    "mesh": {
        "nodes": 8,
        "elements": {"Q8": 1},
        "dofs": 16,
        "regions": {"plate": {"thickness": 8.0, "material": "steel", "area": 4000.0}},
        "quality": {"max_aspect": {"value": 2.5, "at": AT, "limit": 10.0, "bad": 0}},
        "parts": 1,
        "digest": "0123456789abcdef",
    },
    "cases": {"pull": STATE},
    "combinations": {"pull, factored": {**STATE, "factors": {"pull": 1.0}}},
    "envelope": {**dict.fromkeys(QUANTITIES, GOVERNING), "utilisation": None},
    "probes": {"middle": {"pull": PROBE}},
    "lines": {"axis": LINE},
    "cuts": {"root": {"pull": {"normal": 32000.0, "shear": 0.0, "moment": 0.0, "about": AT}}},
    "hot_spots": {
        "toe": {
            "at": [0.0, 20.0],
            "direction": [1.0, 0.0],
            "thickness": 8.0,
            "points": [[3.2, 20.0], [8.0, 20.0]],
            "cases": {
                "pull": {
                    "stress": 103.35,
                    "along": [101.0, 99.0],
                    "principal": [[101.0, 0.5], [99.0, 0.25]],
                }
            },
        }
    },
    "convergence": None,
    "cautions": [CAUTION, *(caution.as_json() for caution in STANDING)],
    "files": {
        "fields": {"pull": "fields/pull.vtu"},
        "previews": {"pull": {"model": "x"}},
        "lines": {"axis": "lines/axis.png"},
        "envelope": {"fields": "envelope/fields.vtu", "previews": {"von_mises": "x"}},
        "tables": {"peaks": "tables/peaks.csv"},
        "sheet": "sheet.html",
    },
    "pictures": {"available": True},
}
