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


def hanging_bar(*, height: float = 200.0, width: float = 20.0) -> dict[str, Any]:
    """A bar that hangs from its upper end under its own weight, without lateral contraction.

    With w = density x gravity the stress is w y, the lower end moves down by w height^2 / (2 E).
    Poisson's ratio is zero, so that the held end stays plane and the answer is exact.
    """
    document = strip(length=width, height=height)
    document["title"] = "Fender bar under its own weight"
    document["materials"]["steel"]["poissons_ratio"] = 0
    document["supports"] = [{"on": "high", "uy": 0}, {"on": "corner", "ux": 0}]
    document["load_cases"] = {"self weight": [{"acceleration": [0, "-9.81 m/s2"]}]}
    return document


# A quarter of a slipway stiffener web with a round opening, 200 x 200 mm, opening 60 mm across.
QUARTER_WEB: dict[str, Any] = {
    "patches": [
        {
            "name": "right",
            "corners": [[30, 0], [100, 0], [100, 100], [21.2132034, 21.2132034]],
            "divisions": [10, 8],
            "grading": [4, 1],
            "sides": ["low", "right", None, "opening"],
            "through": [None, None, None, [27.7163860, 11.4805030]],
        },
        {
            "name": "top",
            "corners": [[21.2132034, 21.2132034], [100, 100], [0, 100], [0, 30]],
            "divisions": [10, 8],
            "grading": [4, 1],
            "sides": [None, "top", "left", "opening"],
            "through": [None, None, None, [11.4805030, 27.7163860]],
        },
    ]
}
