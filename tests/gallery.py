"""Plates as an office in a boat-lift and slipway yard would draw them; all shapes are invented.

`GALLERY` maps a name to the `geometry` of a job document; `drawn` turns one into what the mesher
takes. Lengths in mm.
"""

import math
from collections.abc import Sequence
from typing import Any, cast

from workers.document.read import load
from workers.geometry import OutlineGeometry

Json = dict[str, Any]
Place = Sequence[float]


def drawn(geometry: Json) -> OutlineGeometry:
    """The geometry as the rest of the program gets it, pointers included."""
    first = geometry["outline"][0].get("side")
    named = geometry if first else {**geometry, "outline": _named(geometry["outline"])}
    document = {
        "title": "gallery",
        "units": {"length": "mm", "force": "N"},
        "materials": {"steel": {"youngs_modulus": 210_000, "poissons_ratio": 0.3}},
        "geometry": named,
        "plate": {"material": "steel", "thickness": 10},
        "supports": [{"on": named["outline"][0]["side"], "ux": 0, "uy": 0}],
        "load_cases": {"push": [{"on": named["outline"][0]["side"], "pressure": 1}]},
    }
    return cast(OutlineGeometry, load(document).geometry)


def _named(loop: list[Json]) -> list[Json]:
    return [{**loop[0], "side": "first"}, *loop[1:]]


def circle(x: float, y: float, radius: float) -> Json:
    return {"circle": {"centre": [x, y], "radius": radius}}


def hole(name: str, x: float, y: float, radius: float) -> Json:
    return {"name": name, **circle(x, y, radius)}


def loop(*places: Place) -> list[Json]:
    return [{"at": list(place)} for place in places]


def rectangle(x: float, y: float, width: float, height: float, fillet: float = 0) -> list[Json]:
    corners = loop((x, y), (x + width, y), (x + width, y + height), (x, y + height))
    return [{**c, "fillet": fillet} for c in corners] if fillet else corners


def disc(x: float, y: float, radius: float) -> list[Json]:
    """A round outline as three arcs."""
    return [
        {"at": polar(x, y, radius, 120 * i), "through": polar(x, y, radius, 120 * i + 60)}
        for i in range(3)
    ]


def slot(x: float, y: float, length: float, radius: float) -> list[Json]:
    """An upright-ended slot: two straight sides and two half turns, centred, lying along x."""
    a, b, r = x - length / 2, x + length / 2, radius
    return [
        {"at": [a, y - r]},
        {"at": [b, y - r], "through": [b + r, y]},
        {"at": [b, y + r]},
        {"at": [a, y + r], "through": [a - r, y]},
    ]


def polar(x: float, y: float, radius: float, degrees: float) -> list[float]:
    angle = math.radians(degrees)
    return [x + radius * math.cos(angle), y + radius * math.sin(angle)]


def _lifting_lug() -> Json:
    return {
        "outline": [
            {"at": [0, 0], "side": "base"},
            {"at": [160, 0], "side": "right"},
            {"at": [160, 90], "side": "crown", "through": [80, 170]},
            {"at": [0, 90], "side": "left"},
        ],
        "holes": [hole("pin", 80, 90, 25)],
        "regions": [{"name": "boss", **circle(80, 90, 45), "thickness": 30}],
        "points": {"tip": [80, 170], "heart": [80, 20]},
    }


def _clipped_gusset() -> Json:
    return {
        "outline": loop((20, 0), (240, 0), (240, 30), (40, 260), (0, 260), (0, 20)),
        "holes": [hole(f"bolt {i}", 60 + 60 * i, 30, 11) for i in range(3)]
        + [hole(f"bolt {i + 3}", 30, 90 + 60 * i, 11) for i in range(3)],
    }


def _filleted_bracket() -> Json:
    outline = loop((0, 0), (200, 0), (200, 50), (60, 50), (60, 220), (0, 220))
    outline[3] |= {"fillet": 25, "fillet_side": "throat"}
    outline[2] |= {"fillet": 12}
    outline[4] |= {"fillet": 20}
    return {
        "outline": outline,
        "holes": [hole("bolt low", 170, 25, 9), hole("bolt high", 30, 190, 9)],
        "points": {"gauge": [45, 45]},
    }


def _slotted_link() -> Json:
    return {
        "outline": slot(0, 0, 240, 45),
        "holes": [{"name": "slot", "outline": slot(60, 0, 90, 16)}, hole("pin", -115, 0, 22)],
    }


def _perforated_strip() -> Json:
    places = [(20 + 20 * i, 20 + 20 * j) for i in range(15) for j in range(4)]
    return {
        "outline": rectangle(0, 0, 320, 100),
        "holes": [hole(f"drain {i}", x, y, 6) for i, (x, y) in enumerate(places)],
    }


def _web_with_openings() -> Json:
    return {
        "outline": rectangle(0, 0, 900, 300),
        "holes": [
            {"name": "duct", "outline": rectangle(120, 80, 180, 140, 20)},
            {"name": "hatch", "outline": loop((390, 150), (430, 80), (510, 80), (550, 150),
                                              (510, 220), (430, 220))},
            hole("pipe", 690, 150, 70),
        ],
        "regions": [{"name": "stiffened", "outline": rectangle(580, 0, 220, 300),
                     "thickness": 16}],
    }  # fmt: skip


def _ring() -> Json:
    return {
        "outline": disc(0, 0, 100),
        "holes": [hole("bore", 0, 0, 60)],
    }


def _doubler_plate() -> Json:
    return {
        "outline": rectangle(0, 0, 300, 200),
        "holes": [hole("hawse", 150, 100, 35)],
        "regions": [
            {"name": "doubler", "outline": rectangle(75, 35, 150, 130, 30), "thickness": 20},
            {"name": "collar", **circle(150, 100, 48), "thickness": 32},
        ],
    }


def _clamp_frame() -> Json:
    outline = loop((0, 0), (260, 0), (260, 70), (90, 70), (90, 250), (260, 250), (260, 320),
                   (0, 320))  # fmt: skip
    outline[3] |= {"fillet": 40, "fillet_side": "inner low"}
    outline[4] |= {"fillet": 40, "fillet_side": "inner high"}
    outline[0] |= {"fillet": 60}
    outline[7] |= {"fillet": 60}
    return {"outline": outline, "points": {"jaw low": [230, 70], "jaw high": [230, 250]}}


def _tapered_arm() -> Json:
    big, small = 60.0, 24.0
    lean = math.degrees(math.asin((big - small) / 380))
    return {
        "outline": [
            {"at": polar(0, 0, big, 90 - lean), "through": [-big, 0], "side": "hub"},
            {"at": polar(0, 0, big, lean - 90), "side": "lower edge"},
            {"at": polar(380, 0, small, lean - 90), "through": [380 + small, 0], "side": "eye"},
            {"at": polar(380, 0, small, 90 - lean), "side": "upper edge"},
        ],
        "holes": [hole("shaft", 0, 0, 34), hole("eye pin", 380, 0, 11),
                  hole("window 1", 130, 0, 26), hole("window 2", 215, 0, 20),
                  hole("window 3", 285, 0, 15)],
        "regions": [{"name": "hub ring", **circle(0, 0, 50), "thickness": 24}],
    }  # fmt: skip


def _thin_ligament() -> Json:
    return {
        "outline": rectangle(0, 0, 200, 120),
        "holes": [hole("large", 62, 41, 40), hole("near", 132.3, 52, 30),
                  hole("edge", 178, 97, 19)],
    }  # fmt: skip


def _eye_plate() -> Json:
    """A keyhole: a round bore with a slot out of its top; the outline has an eye at its end."""
    x = math.sqrt(28**2 - 8**2)
    keyhole = [
        {"at": [x, -8]},
        {"at": [95, -8], "through": [103, 0]},
        {"at": [95, 8]},
        {"at": [x, 8], "through": [-28, 0]},
    ]
    return {
        "outline": [{"at": [-70, -70]}, {"at": [120, -55], "through": [175, 0], "side": "nose"},
                    {"at": [120, 55]}, {"at": [-70, 70], "fillet": 15}],
        "holes": [{"name": "keyhole", "outline": keyhole}],
    }  # fmt: skip


def _comb() -> Json:
    outline = [{"at": [0, 0]}, {"at": [310, 0]}, {"at": [310, 150]}]
    for i in reversed(range(7)):
        x = 40 + 38 * i
        outline += [{"at": [x + 6, 150]}, {"at": [x + 6, 60], "through": [x, 54]},
                    {"at": [x - 6, 60]}, {"at": [x - 6, 150]}]  # fmt: skip
    return {"outline": [*outline, {"at": [0, 150]}]}


def _two_material_strip() -> Json:
    return {
        "outline": rectangle(0, 0, 300, 24),
        "regions": [{"name": "bronze", "outline": rectangle(0, 12, 300, 12), "material": "steel"}],
    }


def _keel_cradle() -> Json:
    """A saddle under a round hull, its upper layer of another material along the whole bow."""
    return {
        "outline": [
            {"at": [0, 0], "side": "floor"},
            {"at": [500, 0]},
            {"at": [500, 220]},
            {"at": [450, 220], "through": [250, 70], "side": "hull"},
            {"at": [50, 220]},
            {"at": [0, 220]},
        ],
        "holes": [{"name": "lift 1", "outline": slot(120, 50, 50, 18)},
                  {"name": "lift 2", "outline": slot(380, 50, 50, 18)}],
        "regions": [
            {"name": "rubber", "thickness": 40, "outline": [
                {"at": [20, 220], "through": [250, 45]},
                {"at": [480, 220]},
                {"at": [450, 220], "through": [250, 70]},
                {"at": [50, 220]},
            ]},
        ],
        "points": {"keel": [250, 20]},
    }  # fmt: skip


def _coupling_flange() -> Json:
    holes = [hole(f"bolt {i}", *polar(0, 0, 90, 22.5 + 45 * i), 9) for i in range(8)]
    return {
        "outline": disc(0, 0, 120),
        "holes": [hole("bore", 0, 0, 45), *holes],
        "regions": [{"name": "hub", **circle(0, 0, 65), "thickness": 40}],
    }


def _winch_sector() -> Json:
    """A quarter of a drum flange with curved slots between two radii."""
    slots = []
    for i, (low, high) in enumerate(((12, 38), (52, 78))):
        slots.append({"name": f"window {i + 1}", "outline": [
            {"at": polar(0, 0, 160, low), "through": polar(0, 0, 160, (low + high) / 2)},
            {"at": polar(0, 0, 160, high)},
            {"at": polar(0, 0, 200, high), "through": polar(0, 0, 200, (low + high) / 2)},
            {"at": polar(0, 0, 200, low)},
        ]})  # fmt: skip
    for window in slots:
        for vertex in window["outline"]:
            vertex["fillet"] = 8
    return {
        "outline": [
            {"at": [90, 0], "side": "cut"},
            {"at": [260, 0], "through": polar(0, 0, 260, 45), "side": "rim"},
            {"at": [0, 260]},
            {"at": [0, 90], "through": polar(0, 0, 90, 45), "side": "drum"},
        ],
        "holes": slots,
    }


def _notched_coupon() -> Json:
    return {
        "outline": [
            {"at": [0, 0]},
            {"at": [140, 0]}, {"at": [140, 20], "through": [150, 30]}, {"at": [160, 20]},
            {"at": [160, 0]},
            {"at": [300, 0]}, {"at": [300, 80]},
            {"at": [165, 80]}, {"at": [150, 50], "fillet": 2}, {"at": [135, 80]},
            {"at": [0, 80]},
        ],
    }  # fmt: skip


def _patched_deck() -> Json:
    """Three thicknesses that meet in one point; a hatch on the border of two of them."""
    return {
        "outline": rectangle(0, 0, 400, 260),
        "holes": [{"name": "hatch", "outline": rectangle(250, 60, 90, 70, 14)}],
        "regions": [
            {"name": "bow", "outline": loop((0, 0), (180, 0), (180, 130), (0, 130)),
             "thickness": 8},
            {"name": "port", "outline": loop((0, 130), (180, 130), (400, 260), (0, 260)),
             "thickness": 14},
            {"name": "insert", "outline": rectangle(40, 30, 90, 60, 10), "thickness": 20},
        ],
        "points": {"pillar": [300, 180], "meeting": [180, 130]},
    }  # fmt: skip


def _mooring_hook() -> Json:
    """A hook from arcs alone but for two short ends."""
    return {
        "outline": [
            {"at": [-40, 140], "side": "shank left"},
            {"at": [-40, 30], "through": polar(20, 0, 67.0820393249937, 270)},
            {"at": [80, 30], "side": "point"},
            {"at": [62, 50]},
            {"at": [50, 20], "through": [20, -26]},
            {"at": [0, 50]},
            {"at": [0, 140]},
        ],
    }


def _wedge() -> Json:
    """A skeg: one corner of 20 degrees, one of 28."""
    return {
        "outline": loop((0, 0), (300, 0), (300, 109.19)),
        "holes": [hole("eye", 240, 40, 14)],
    }


GALLERY: dict[str, Json] = {
    "lifting lug": _lifting_lug(),
    "clipped gusset": _clipped_gusset(),
    "filleted bracket": _filleted_bracket(),
    "slotted link": _slotted_link(),
    "perforated strip": _perforated_strip(),
    "web with openings": _web_with_openings(),
    "ring": _ring(),
    "doubler plate": _doubler_plate(),
    "clamp frame": _clamp_frame(),
    "tapered arm": _tapered_arm(),
    "thin ligament": _thin_ligament(),
    "eye plate": _eye_plate(),
    "comb": _comb(),
    "two-material strip": _two_material_strip(),
    "keel cradle": _keel_cradle(),
    "coupling flange": _coupling_flange(),
    "winch sector": _winch_sector(),
    "notched coupon": _notched_coupon(),
    "patched deck": _patched_deck(),
    "mooring hook": _mooring_hook(),
    "wedge": _wedge(),
}
