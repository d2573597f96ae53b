"""Documents of jobs that are refined: a panel with a corner, a strip with a hole. N and mm."""

from typing import Any

from tests.outlines import document

Json = dict[str, Any]


def panel(element: str, **meshing: Any) -> Json:
    """An L of legs 100 wide; one is pulled by 10 MPa, both stand on symmetry lines.

    Its only infinite stress is in the corner of 270 degrees at (100, 100).
    """
    outline = [
        {"at": [0, 0], "side": "low"}, {"at": [200, 0]}, {"at": [200, 100]}, {"at": [100, 100]},
        {"at": [100, 200], "side": "top"}, {"at": [0, 200], "side": "left"},
    ]  # fmt: skip
    supports = [{"on": "low", "uy": 0}, {"on": "left", "ux": 0}]
    made = document({"outline": outline}, supports, [{"on": "top", "traction": [0, 10]}])
    return {**made, "meshing": {"element": element, **meshing}}


def strip(element: str, radius: float = 10.0, **meshing: Any) -> Json:
    """300 x 100 with a hole in its middle, pulled by 10 MPa from a roller at its left end."""
    outline = [
        {"at": [0, 0]}, {"at": [300, 0], "side": "end"}, {"at": [300, 100]},
        {"at": [0, 100], "side": "left"},
    ]  # fmt: skip
    geometry = {
        "outline": outline,
        "holes": [{"name": "hole", "circle": {"centre": [150, 50], "radius": radius}}],
        "points": {"pin": [0, 0]},
    }
    supports = [{"on": "left", "ux": 0}, {"on": "pin", "uy": 0}]
    made = document(geometry, supports, [{"on": "end", "traction": [10, 0]}])
    return {**made, "meshing": {"element": element, **meshing}}


def ring(element: str, **meshing: Any) -> Json:
    """A quarter of a ring 20 to 60 under 10 MPa from inside, one patch on symmetry lines."""
    corner = 2**-0.5
    patch = {
        "name": "quarter", "corners": [[20, 0], [60, 0], [0, 60], [0, 20]], "divisions": [2, 4],
        "sides": ["low", "rim", "left", "bore"],
        "through": [None, [60 * corner] * 2, None, [20 * corner] * 2],
    }  # fmt: skip
    supports = [{"on": "low", "uy": 0}, {"on": "left", "ux": 0}]
    made = document({"patches": [patch]}, supports, [{"on": "bore", "pressure": 10}])
    return {**made, "meshing": {"element": element, **meshing}}
