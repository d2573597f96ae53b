"""For every caution: job documents that must raise it, and near-misses that must not.

All plates stand in a slipway yard, are small, and are made to be read, solved and reviewed as a
worker does it; all data are invented. N and mm. Where a threshold decides, the figure beside the
document says on which side it is and why.
"""

import math
from copy import deepcopy
from typing import Any

from tests.job_documents import QUARTER_WEB, STEEL, strip

Json = dict[str, Any]

WEB: Json = {
    "title": "Web with opening, a quarter",
    "units": {"length": "mm", "force": "N"},
    "materials": {"steel": {**STEEL, "thermal_expansion": 1.2e-5}},
    "geometry": QUARTER_WEB,
    "plate": {"material": "steel", "thickness": 8},
    "meshing": {"element": "Q8"},
    "supports": [{"on": "low", "uy": 0}, {"on": "left", "ux": 0}],
    "load_cases": {"pull": [{"on": "right", "traction": [40, 0]}]},
}


def changed(document: Json, changes: Json) -> Json:
    """A copy with other values at some places, e.g. {"plate/thickness": 5}; None removes a key."""
    result = deepcopy(document)
    for path, value in changes.items():
        *steps, last = path.split("/")
        place: Any = result
        for step in steps:
            place = place[int(step)] if isinstance(place, list) else place[step]
        if value is None:
            del place[last]
        else:
            place[int(last) if isinstance(place, list) else last] = value
    return result


def wedge(degrees: float) -> Json:
    """A triangular fender plate, held at its back; its tip has that many degrees."""
    return changed(
        WEB,
        {
            "geometry": {
                "outline": [
                    {"at": [0, 0], "side": "low"},
                    {"at": [200, 0], "side": "back"},
                    {"at": [200, 200 * math.tan(math.radians(degrees))]},
                ]
            },
            "meshing": {"element": "T6", "size": 20},
            "supports": [{"on": "back", "ux": 0, "uy": 0}],
            "load_cases": {"push": [{"on": "low", "pressure": 0.1}]},
        },
    )


def tie(**changes: Any) -> Json:
    """The strip 100 x 40 x 8, 100 MPa everywhere; with other values at places a__b for a/b."""
    return changed(strip(), {path.replace("__", "/"): value for path, value in changes.items()})


def web(**changes: Any) -> Json:
    return changed(WEB, {path.replace("__", "/"): value for path, value in changes.items()})


def bar(*, moment: float = 100_000.0, element: str = "Q8", **changes: Any) -> Json:
    """A bar 400 x 50 x 8 bent by a moment, held so that it can contract: 30 MPa at 100 N m."""
    document = changed(
        WEB,
        {
            "geometry": {
                "points": {"pin": [0, 25]},
                "patches": [
                    {
                        "name": "bar",
                        "corners": [[0, 0], [400, 0], [400, 50], [0, 50]],
                        "divisions": [16, 2],
                        "sides": ["low", "tip", "high", "root"],
                    }
                ],
            },
            "meshing": {"element": element},
            "supports": [{"on": "root", "ux": 0}, {"on": "pin", "uy": 0}],
            "load_cases": {"bend": [{"on": "tip", "total_moment": moment}]},
        },
    )
    return changed(document, {path.replace("__", "/"): value for path, value in changes.items()})


def stepped(thickness: float, material: str | None = None) -> Json:
    """A strip of two halves, the right one of another thickness."""
    halves = [
        {
            "name": name,
            "corners": [[x, 0], [x + 50, 0], [x + 50, 40], [x, 40]],
            "divisions": [4, 2],
            "sides": [None, right, None, left],
            **({"region": "doubled"} if x else {}),
        }
        for name, x, left, right in (("one", 0, "left", None), ("other", 50, None, "right"))
    ]
    region = {"name": "doubled", "thickness": thickness}
    if material:
        region["material"] = material
    return changed(
        strip(),
        {"geometry/patches": halves, "geometry/regions": [region],
         "materials/bronze": {"youngs_modulus": 110e3, "poissons_ratio": 0.34,
                              "yield_strength": 180}},
    )  # fmt: skip


def ring(load: Json) -> Json:
    """A quarter of an eye 40 to 120 mm across, on rollers, loaded at its bore."""
    corner = 2**-0.5
    return {
        **WEB,
        "title": "Eye of a hoist, the upper half",
        "geometry": {
            "patches": [
                {
                    "name": name,
                    "corners": [[20 * a, 20 * b], [60 * a, 60 * b], [60 * c, 60 * d],
                                [20 * c, 20 * d]],
                    "divisions": [6, 6],
                    "sides": [foot, "rim", end, "bore"],
                    "through": [None, [60 * s * corner, 60 * corner], None,
                                [20 * s * corner, 20 * corner]],
                }
                for name, (a, b), (c, d), s, foot, end in (
                    ("right", (1, 0), (0, 1), 1, "foot", None),
                    ("left", (0, 1), (-1, 0), -1, None, "foot"),
                )
            ],
            "points": {"heel": [20, 0]},
        },
        "supports": [{"on": "foot", "uy": 0}, {"on": "heel", "ux": 0}],
        "load_cases": {"lift": [load]},
    }  # fmt: skip


PULLED = [{"on": "right", "total_force": [32_000, 0]}]


def pushed(length: float, height: float, thickness: float, supports: list[Json]) -> Json:
    """A strip under 50 MPa of compression."""
    document = strip(length=length, height=height, thickness=thickness)
    return changed(
        document,
        {"supports": supports,
         "load_cases": {"push": [{"on": "right", "pressure": 50}]}},
    )  # fmt: skip


ROLLERS = [{"on": "left", "ux": 0}, {"on": "corner", "uy": 0}]
SOFT = {"youngs_modulus": 2e3, "poissons_ratio": 0.4, "yield_strength": 40,
        "thermal_expansion": 1e-4}  # fmt: skip
HOT = {"materials__steel__thermal_expansion": 1.2e-5}


def heated(*changes: float, **more: Any) -> Json:
    """The strip, free to expand, warmed by so many kelvin in cases "day 1", "day 2"..."""
    cases = {f"day {n}": [{"temperature_change": change}] for n, change in enumerate(changes, 1)}
    return tie(**HOT, load_cases={"pull": PULLED, **cases}, **more)


def enclosed(thickness: float) -> Json:
    """A plate 300 x 100 held all around and warmed by 20 K: -E alpha dT / (1 - nu) = -72 MPa."""
    document = strip(length=300, height=100, thickness=thickness)
    sides = ("low", "right", "high", "left")
    return changed(
        document,
        {"supports": [{"on": side, "ux": 0, "uy": 0} for side in sides],
         "materials/steel/thermal_expansion": 1.2e-5,
         "load_cases": {"sun": [{"temperature_change": 20}]}},
    )  # fmt: skip


def toed(size: int, **spot: Any) -> Json:
    """A hot spot in the strip, whose elements are 100/size long; t = 8, so 0.4 t = 3.2."""
    return tie(
        geometry__patches__0__divisions=[size, 14],
        requests={"hot_spots": {"toe": {"at": [20, 20], "direction": [1, 0], **spot}}},
    )


def panel(fillet: float | None = None, **meshing: Any) -> Json:
    """An L-shaped panel 200 x 200 x 8, legs 100 wide, one of them pulled, rollers at the other."""
    corner = {"at": [100, 100], **({"fillet": fillet} if fillet else {})}
    return {
        **WEB,
        "title": "Corner of a frame",
        "geometry": {
            "outline": [
                {"at": [0, 0], "side": "low"}, {"at": [200, 0]}, {"at": [200, 100]}, corner,
                {"at": [100, 200], "side": "top"}, {"at": [0, 200], "side": "left"},
            ]
        },
        "meshing": {"element": "Q8", **(meshing or {"size": 15})},
        "load_cases": {"pull": [{"on": "top", "traction": [0, 20]}]},
    }  # fmt: skip


FIXED = [{"on": "left", "ux": 0, "uy": 0}]

# Code -> documents that must raise it, documents that must not.
CASES: dict[str, tuple[list[Json], list[Json]]] = {
    "yield-exceeded": (
        # 355 N/mm2 x 320 mm2 = 113 600 N; Kirsch: over three times the traction at the opening
        [strip(force=113_700), web(load_cases={"pull": [{"on": "right", "traction": [120, 0]}]})],
        [strip(force=113_500), tie(materials__steel__yield_strength=460,
                                   load_cases={"pull": [{"on": "right", "traction": [450, 0]}]})],
    ),
    "limit-exceeded": (
        # the strip moves by 100/210000 x hypot(100, 0.3 x 40) = 0.04796; factor 355/100 = 3.55
        [tie(limits={"displacement": 0.0479}), tie(limits={"factor_on_yield": 3.6})],
        [tie(limits={"displacement": 0.0481}), tie(limits={"factor_on_yield": 3.5})],
    ),
    "no-yield-strength": (
        [tie(materials__steel__yield_strength=None),
         changed(stepped(8, "bronze"), {"materials/bronze/yield_strength": None})],
        [tie(), tie(materials__spare={"youngs_modulus": 1e5, "poissons_ratio": 0.3})],
    ),
    "large-displacement": (
        # strain 100/E: 2.5 %; rotation M L / (E I) = 1e5 x 400 / (210e3 x 83333) = 2.29e-3 rad
        [tie(materials__steel__youngs_modulus=4000), bar(moment=5e6)],
        [tie(materials__steel__youngs_modulus=5500), bar(moment=4e6)],
    ),
    "thick-plate": (
        # a quarter of the 40 mm width is 10; twice the radius of 30 is 60
        [strip(thickness=10.2), web(plate__thickness=61)],
        [strip(thickness=9.8), web(plate__thickness=24)],
    ),
    "error-high": (
        [bar(element="Q4"), web(meshing={"element": "T3"})],
        [bar(), web()],
    ),
    "coarse-at-peak": (
        [web(geometry__patches__0__divisions=[2, 2], geometry__patches__1__divisions=[2, 2],
             geometry__patches__0__grading=[1, 1], geometry__patches__1__grading=[1, 1]),
         web(geometry__patches__0__grading=[1, 1], geometry__patches__1__grading=[1, 1],
             meshing={"element": "Q4"})],
        # a quadratic element follows a linear stress however far it falls
        [web(), bar()],
    ),
    "stress-singularity": (
        # re-entrant by 90 degrees; clamped and free side at a right angle, which for a Poisson's
        # ratio of zero is no more than a corner of a strip in plain tension
        [panel(), tie(supports=FIXED)],
        [panel(fillet=20), tie(supports=FIXED, materials__steel__poissons_ratio=0)],
    ),
    "not-converged": (
        [panel(target_error=1e-3, max_dofs=1500),
         web(meshing={"element": "Q8", "target_error": 1e-5, "max_dofs": 3000})],
        [panel(target_error=0.05), tie(requests={"convergence": True})],
    ),
    "low-order-bending": (
        [bar(element="Q4"), bar(element="T3")],
        [bar(), tie(meshing={"element": "Q4"})],
    ),
    "distorted-elements": (
        # aspect 100/5 : 40/20 = 10 is the limit; a corner of 15 degrees and one of 45
        [tie(geometry__patches__0__divisions=[5, 22]),
         tie(geometry__patches__0__corners=[[0, 0], [100, 0], [250, 40], [150, 40]])],
        [tie(geometry__patches__0__divisions=[5, 18]),
         tie(geometry__patches__0__corners=[[0, 0], [100, 0], [140, 40], [40, 40]])],
    ),
    "point-load": (
        [tie(geometry__points={"corner": [0, 0], "tip": [100, 20]},
             load_cases={"pull": [{"on": "tip", "force": [9000, 0]}]}),
         web(geometry__points={"tip": [100, 100]},
             load_cases={"pull": [{"on": "tip", "force": [20_000, 0]}]})],
        [web(geometry__points={"tip": [100, 100]},
             load_cases={"pull": [{"on": "right", "traction": [40, 0]},
                                  {"on": "tip", "force": [20, 0]}]}),
         tie(geometry__points={"corner": [0, 0], "tip": [100, 20]},
             load_cases={"pull": [*PULLED, {"on": "tip", "force": [0, 0]}]})],
    ),
    "point-support": (
        [tie(supports=[{"on": "corner", "ux": 0, "uy": 0}, {"on": "low", "uy": 0}]),
         tie(geometry__points={"corner": [0, 0], "heel": [100, 0]},
             supports=[{"on": "corner", "ux": 0, "uy": 0}, {"on": "heel", "spring": {"y": 1e5}}],
             load_cases={"press": [{"on": "high", "pressure": 2}]})],
        # the pin only stops a rigid motion; the side carries the load
        [tie(), tie(supports=[{"on": "left", "ux": 0}, {"on": "low", "uy": 0}])],
    ),
    "over-restrained": (
        [tie(supports=[{"on": "left", "ux": 0, "uy": 0}],
             geometry__patches__0__divisions=[40, 16]),
         bar(supports=[{"on": "root", "normal": 0}, {"on": "root", "along": [0, 1]}],
             geometry__patches__0__divisions=[48, 12],
             load_cases={"press": [{"on": "tip", "total_force": [0, -500]}]})],
        # nothing contracts; the side slides
        [tie(supports=[{"on": "left", "ux": 0, "uy": 0}], materials__steel__poissons_ratio=0),
         tie(geometry__patches__0__divisions=[40, 16])],
    ),
    "compression-buckling": (
        # Euler, doubled behind the roller: pi^2 E / (12 (1 - nu^2)) (t / 200)^2 is 107 MPa for
        # t = 4.75 and 95 for 4.47; all edges held, across the short way k = (3 + 1/3)^2, b = 300:
        # 141 MPa for 2.45, 147 for 2.51
        [pushed(100, 40, 4.47, ROLLERS), enclosed(2.45)],
        [pushed(100, 40, 4.75, ROLLERS), enclosed(2.51)],
    ),
    "near-mechanism": (
        # F / (k 40) over the diagonal of 108 mm over the strain of 4.8e-4 is 15 600 / k
        [tie(supports=[{"on": "left", "spring": {"x": 1, "y": 1}}]),
         tie(supports=[{"on": "low", "uy": 0}, {"on": "left", "spring": {"x": 10}}])],
        [tie(supports=[{"on": "left", "spring": {"x": 100, "y": 100}}]),
         tie(supports=[{"on": "left", "ux": 200}, {"on": "corner", "uy": 0}])],
    ),
    "ill-conditioned": (
        [tie(supports=[{"on": "left", "spring": {"x": 1e-4, "y": 1e-4}}]),
         tie(supports=[{"on": "low", "uy": 0}, {"on": "left", "spring": {"x": 1e-5}}])],
        [tie(supports=[{"on": "left", "spring": {"x": 0.01, "y": 0.01}}]), tie()],
    ),
    "units-suspect": (
        [tie(materials__steel__youngs_modulus=210e9), tie(materials__steel__density=7850)],
        [tie(materials__steel=SOFT), tie(materials__steel__youngs_modulus="210 GPa")],
    ),
    "poisson-extreme": (
        [tie(materials__steel__poissons_ratio=0.47), tie(materials__steel__poissons_ratio=-0.05)],
        [tie(materials__steel__poissons_ratio=0.46), tie(materials__steel__poissons_ratio=0)],
    ),
    "unloaded-case": (
        [tie(load_cases__rest=[{"on": "right", "pressure": 0}]),
         tie(load_cases__push=[{"on": "right", "total_force": [-32_000, 0]}],
             combinations={"none": {"pull": 1, "push": 1}})],
        [tie(load_cases__rest=[{"on": "right", "pressure": 1e-6}]),
         tie(combinations={"part": {"pull": 1e-6}})],
    ),
    "settlement-factored": (
        [tie(supports=[{"on": "left", "ux": 0.01}, {"on": "corner", "uy": 0}],
             combinations={"design": {"pull": 1.35}}),
         tie(supports=[{"on": "left", "ux": 0}, {"on": "corner", "uy": 0.1}],
             load_cases__more=PULLED, combinations={"both": {"pull": 1, "more": 1}})],
        [tie(supports=[{"on": "left", "ux": 0.01, "case": "pull"}, {"on": "corner", "uy": 0}],
             combinations={"design": {"pull": 1.35}}),
         tie(supports=[{"on": "left", "ux": 0.01}, {"on": "corner", "uy": 0}],
             load_cases__more=PULLED, combinations={"mean": {"pull": 0.5, "more": 0.5}})],
    ),
    "thickness-step": (
        [stepped(12.1), stepped(5.2)],
        [stepped(11.9), stepped(8, "bronze")],
    ),
    "sharp-corner": (
        [wedge(29), wedge(15)],
        [wedge(31), wedge(45)],
    ),
    "bearing-contact-assumed": (
        [ring({"on": "bore", "bearing": [0, 9000]}), ring({"on": "bore", "bearing": [0, 1]})],
        [ring({"on": "bore", "pressure": 20}), ring({"on": "bore", "total_force": [0, 9000]})],
    ),
    "fatigue-not-checked": (
        [tie(load_cases__push=[{"on": "right", "total_force": [-8000, 0]}]),
         tie(combinations={"back": {"pull": -0.3}})],
        [tie(load_cases__push=[{"on": "right", "total_force": [-6000, 0]}]),
         tie(load_cases__more=[{"on": "right", "total_force": [16_000, 0]}],
             combinations={"both": {"pull": 1, "more": 0.5}})],
    ),
    "temperature-properties": (
        [heated(-81), heated(40, 45, combinations={"hot": {"day 1": 1, "day 2": 1}})],
        [heated(79), heated(40, 45, combinations={"difference": {"day 1": 1, "day 2": -1}})],
    ),
    "hot-spot-assumed": (
        [toed(40), toed(40, at=[0, 20])],
        [tie(), tie(requests={"lines": {"axis": {"from": [0, 20], "to": [100, 20]}}})],
    ),
    "hot-spot-mesh": (
        # 100/30 = 3.33 is longer than 3.2, 100/32 = 3.125 is not
        [toed(30), toed(32, thickness=7.5)],
        [toed(32), toed(30, thickness=8.5)],
    ),
    "margin-within-error": (
        [web(meshing={"element": "Q4"}, materials__steel__yield_strength=155),
         web(meshing={"element": "T3"}, materials__steel__yield_strength=170)],
        [web(materials__steel__yield_strength=160), web(meshing={"element": "Q4"})],
    ),
}  # fmt: skip
