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
PEAK = {"value": 100.0, "at": [50.0, 20.0], "error": 0.5, "region": "plate"}
QUANTITIES = ("von_mises", "principal_max", "principal_min", "shear_max", "displacement")
STATE = {
    **dict.fromkeys(QUANTITIES, PEAK),
    "reactions": {"left": {"force": [-32000.0, 0.0], "moment": 0.0, "about": [0.0, 20.0]}},
    "equilibrium": {"applied": [32000.0, 0.0, 0.0], "reaction": [-32000.0, 0.0, 0.0],
                    "residual": 1e-15, "about": [50.0, 20.0]},
    "error_estimate": {"relative": 0.01, "energy_norm": 0.1},
    "utilisation": None,
}  # fmt: skip
RESULTS: dict[str, Any] = {
    "job": {"title": "Slipway tie strip", "checksum": "sha256:0", "fishplate": "0"},
    "units": {"length": "mm", "force": "N", "stress": "MPa"},
    "cases": {"pull": STATE},
    "combinations": {"pull, factored": STATE},
    "envelope": {},
    "probes": {"middle": {"pull": {"stress": [100.0, 0.0, 0.0], "displacement": [0.02, 0.0],
                                   "von_mises": 100.0, "principal": [100.0, 0.0]}}},
    "lines": {},
    "cuts": {},
    "convergence": None,
    "cautions": [CAUTION, *(caution.as_json() for caution in STANDING)],
    "files": {"fields": {"pull": "fields/pull.vtu"}, "previews": {"pull": {}}},
    "pictures": {"available": True},
}  # fmt: skip
