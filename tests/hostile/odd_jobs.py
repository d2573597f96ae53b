"""Jobs that are valid in form and odd in everything else, from any source of random numbers.

Nobody would send them, and nothing forbids them: sizes from a micrometre to a thousand kilometres,
far from the origin, of materials like foam or like nothing, with loads from nothing to more than
anything bears, under names that file systems, tables and pages of HTML could misread. Most can be
solved. Those that cannot must be told so in words.
"""

import math
from random import Random
from typing import Any

from tests.random_plates import LENGTH, random_plate

Json = dict[str, Any]

# Names that the rule for names admits, and what they might be taken for.
NAMES = (
    "=1+1", "+cmd", "-2", "#REF", "(x)", "1e5", "null", "NaN", "true", "con", "nul.png", "a.vtu",
    "results.json", "e\u0301", "\u00e9", "\u0430", "a", "A", "\u0131", "\ufb01", "\u05d0\u05d1",
    "点", "x" * 80, "ä" * 80, "_schema", "__proto__", "envelope", "all", "default",
    "line, with commas", "trailing ", "in  between", "-", "0", "model", "von_mises",
)  # fmt: skip
FACTORS = (0.0, -0.0, 1.0, -1.0, 1e-300, 1e-12, 1e12, 1.5, 1 / 3)
PRESCRIBED = ("ux", "uy", "normal", "displacement")
ELEMENTS = ("T3", "T6", "Q4", "Q8")


def odd_job(rng: Random) -> Json:
    """A job document; most are accepted and solved."""
    return _Maker(rng).document()


class _Maker:
    """One document: its random numbers, its scales, and what is on the plate."""

    def __init__(self, rng: Random) -> None:
        self.rng = rng
        self.names = iter(rng.sample(NAMES, len(NAMES)))
        self.length = self.pick((1.0, 1.0, 1e-6, 1e-3, 1e3, 1e6))
        self.stress = self.pick((1.0, 1.0, 1e-9, 1e-3, 1e6, 1e12))
        self.sides: list[str] = []
        self.straight: list[str] = []
        self.holes: list[str] = []
        self.round: list[str] = []
        self.regions: list[str] = []
        self.points: list[str] = []
        self.places: list[list[float]] = [[0.0, 0.0]]
        self.far = self.pick((0.0, 0.0, 0.0, 1e3, 1e6)) * LENGTH

    def pick(self, among: Any) -> Any:
        return self.rng.choice(among)

    def often(self, share: float) -> bool:
        return self.rng.random() < share

    def magnitude(self) -> float:
        """From nothing to far beyond yield, either sign."""
        return self.pick((1, -1)) * self.pick((0.0, 1.0, 10 ** self.rng.uniform(-9, 9), 1.0))

    def place(self, x: float, y: float) -> list[float]:
        return [self.length * (x + self.far), self.length * (y - self.far)]

    # --- the whole ---------------------------------------------------------------------------

    def document(self) -> Json:
        kind = self.pick(("outline", "patches", "mesh"))
        geometry = getattr(self, f"_{kind}")()
        cases = {next(self.names): self._loads() for _ in range(self.pick((1, 1, 2, 5)))}
        document: Json = {
            "title": self.pick(("odd", "<b>&amp;'\"", "=HYPERLINK(1)", "\u202egnp.exe", "x" * 200)),
            "units": {
                "length": self.pick(("mm", "m", "in", "ft", "cm")),
                "force": self.pick(("N", "kN", "lbf", "kip", "MN")),
            },
            "materials": {"stuff": self._material(), "other": self._material()},
            "geometry": geometry,
            "plate": {"material": "stuff", "thickness": self._thickness()},
            "supports": self._supports(list(cases)),
            "load_cases": cases,
        }
        if kind != "mesh":
            document["meshing"] = self._meshing(kind)
        if self.often(0.5):
            document["combinations"] = {
                next(self.names): {case: self.pick(FACTORS) for case in cases}
                for _ in range(self.pick((1, 2)))
            }
        if self.often(0.6):
            document["requests"] = self._requests(kind)
        if self.often(0.3):
            document["limits"] = {
                "displacement": self.length * 10 ** self.rng.uniform(-9, 3),
                "factor_on_yield": 10 ** self.rng.uniform(-3, 6),
            }
        return document

    def _thickness(self) -> float:
        return float(self.length * self.pick((1.0, 1e-4, 10.0, 1e3, 5.0)))

    def _material(self) -> Json:
        stiff = 200_000 * self.stress
        return {
            "youngs_modulus": stiff * self.pick((1, 1, 1e-9, 1e6)),
            "poissons_ratio": self.pick((0.3, 0.0, -0.0, 0.499999, -0.9, -0.999, 0.3)),
            "yield_strength": stiff * self.pick((1e-3, 1e-12, 1e3)),
            "density": self.pick((0.0, 7.85e-9, 1e-30, 1e3)),
            "thermal_expansion": self.pick((0.0, 1.2e-5, -1e-5, 1e3)),
        }

    def _meshing(self, kind: str) -> Json:
        found: Json = {"element": self.pick(ELEMENTS)}
        if kind == "patches":
            return found
        if self.often(0.7):
            found["size"] = self.length * self.pick((5.0, 20.0, 50.0, 1000.0))
        if self.often(0.2):
            found |= {"target_error": self.pick((0.5, 0.1, 0.999)), "max_dofs": 4000}
        if self.often(0.2):
            on = self.pick(self.sides + self.holes + self.points + self.regions)
            found["sizes"] = {on: self.length * self.pick((2.0, 5.0, 1000.0))}
        return found

    # --- the plate ---------------------------------------------------------------------------

    def _outline(self) -> Json:
        plate = random_plate(self.rng, narrow=0.1)
        for vertex in plate["outline"]:
            if not self.sides or self.often(0.4):
                vertex["side"] = next(self.names)
                self.sides.append(vertex["side"])
        for hole in plate["holes"]:
            hole["name"] = next(self.names)
            self.holes.append(hole["name"])
            if "circle" in hole:
                self.round.append(hole["name"])
        for region in plate.get("regions", ()):
            region |= {
                "name": next(self.names),
                "thickness": self._thickness(),
                "material": "other",
            }
            self.regions.append(region["name"])
        self.places = [vertex["at"] for vertex in plate["outline"] if "fillet" not in vertex]
        self.places += [[0.0, 0.0]] * (2 - len(self.places))
        points = {next(self.names): at for at in plate.get("points", {}).values()}
        self.points += points
        self.places += points.values()
        return {**self._moved(plate), **({"points": self._moved(points)} if points else {})}

    def _moved(self, part: Any) -> Any:
        """Lengths and places at this plate's scale and place."""
        if isinstance(part, dict):
            return {
                key: value * self.length if key in ("radius", "fillet")
                else value if key in ("thickness", "name") else self._moved(value)
                for key, value in part.items()
            }  # fmt: skip
        if isinstance(part, list):
            if len(part) == 2 and all(isinstance(x, int | float) for x in part):
                return self.place(*part)
            return [self._moved(item) for item in part]
        return part

    def _patches(self) -> Json:
        """Two blocks side by side, more or less skew; the second may be of another stuff."""
        height, skew = self.pick((1.0, 50.0, 1000.0)), self.pick((0.0, 0.0, 30.0, -49.0))
        corners = [(0, 0), (60, 0), (60 + skew, height), (skew, height), (100, 0),
                   (100 + skew, height)]  # fmt: skip
        at = [self.place(*corner) for corner in corners]
        low, left, right, high = self.sides = [next(self.names) for _ in range(4)]
        self.straight = [left, right]
        rows = self.rng.randint(1, 5)
        grading = [self.pick((1, 1e3, 1e-3, 3)), self.pick((1, 1, 20))]
        first = {
            "name": "one", "corners": [at[0], at[1], at[2], at[3]], "grading": grading,
            "divisions": [self.rng.randint(1, 6), rows], "sides": [low, None, high, left],
        }  # fmt: skip
        second = {
            "name": "two", "corners": [at[1], at[4], at[5], at[2]], "grading": [1, grading[1]],
            "divisions": [self.rng.randint(1, 6), rows], "sides": [low, right, high, None],
        }  # fmt: skip
        found: Json = {"patches": [first, second], "points": {next(self.names): at[0]}}
        if self.often(0.4):
            self.regions = [next(self.names)]
            second["region"] = self.regions[0]
            found["regions"] = [
                {"name": self.regions[0], "thickness": self._thickness(), "material": "other"}
            ]
        self.points, self.places = list(found["points"]), [list(c) for c in corners]
        return found

    def _mesh(self) -> Json:
        """A grid of quadrilaterals, its nodes shaken, some of them split; with a loose node."""
        m, n = self.rng.randint(1, 6), self.rng.randint(1, 4)
        shake = self.pick((0.0, 0.1, 0.3))
        grid = [(i + self.rng.uniform(-shake, shake), j + self.rng.uniform(-shake, shake))
                for j in range(n + 1) for i in range(m + 1)]  # fmt: skip
        quads, triangles = [], []
        for j in range(n):
            for i in range(m):
                a, b = j * (m + 1) + i, (j + 1) * (m + 1) + i
                if self.often(0.3):
                    triangles += [[a, a + 1, b + 1], [a, b + 1, b]]
                else:
                    quads.append([a, a + 1, b + 1, b])
        blocks = [
            {"element": e, "connectivity": c} for e, c in (("Q4", quads), ("T3", triangles)) if c
        ]
        if self.often(0.3):
            self.regions = [next(self.names)]
            blocks[-1]["region"] = self.regions[0]
        left, right = self.sides = [next(self.names), next(self.names)]
        step = m + 1
        sides = {
            left: [[(j + 1) * step, j * step] for j in range(n)],
            right: [[j * step + m, (j + 1) * step + m] for j in range(n)],
        }
        points = {next(self.names): self.rng.randrange(len(grid))}
        self.points = list(points)
        self.places = [[20 * x, 20 * y] for x, y in grid]
        nodes = [self.place(*at) for at in self.places]
        if self.often(0.1):
            nodes.append(self.place(-500, -500))
        found: Json = {"mesh": {"nodes": nodes, "blocks": blocks, "sides": sides, "points": points}}
        if self.regions:
            found["regions"] = [{"name": self.regions[0], "thickness": self._thickness()}]
        return found

    # --- what is put on it -------------------------------------------------------------------

    def _supports(self, cases: list[str]) -> list[Json]:
        first: Json = {"on": self.sides[0], "ux": 0, "uy": 0}
        if self.often(0.1):
            del first[self.pick(("ux", "uy"))]
        found = [first]
        for _ in range(self.pick((0, 0, 1, 2))):
            found.append({"on": self.pick(self.sides + self.holes), **self._holds()})
        if self.points and self.often(0.3):
            spring = {"x": 10 ** self.rng.uniform(-12, 12) * self.stress * self.length, "y": 0}
            found.append({"on": self.pick(self.points), "spring": spring})
        for support in found:
            if any(support.get(key) for key in PRESCRIBED) and self.often(0.5):
                support["case"] = self.pick(cases)
        if self.often(0.2):
            found[0]["name"] = next(self.names)
        return found

    def _holds(self) -> Json:
        moved = self.length * self.magnitude() if self.often(0.3) else 0
        stiff = 10 ** self.rng.uniform(-12, 12) * self.stress
        return dict(
            self.pick((
                {"ux": 0}, {"uy": moved}, {"ux": 0, "uy": moved}, {"normal": 0},
                {"normal": moved}, {"along": [1e-3, 1e9]}, {"along": [1, 1], "displacement": moved},
                {"spring": {"normal": stiff}}, {"spring": {"x": stiff, "tangential": stiff}},
            ))
        )  # fmt: skip

    def _loads(self) -> list[Json]:
        found = [self._load() for _ in range(self.pick((1, 1, 2, 4)))]
        if self.often(0.1):  # what cancels itself
            found = [{"on": self.sides[-1], "traction": [f * self.stress, 0]} for f in (7, -7)]
        return found

    def _load(self) -> Json:
        stress, length = self.stress * self.magnitude(), self.length
        other = self.stress * self.magnitude()
        force = stress * length**2
        side = self.pick(self.sides + self.holes)
        choices: list[Json] = [
            {"on": side, "total_force": [force, other * length**2]},
            {"on": side, "traction": {"from": [stress, 0], "to": [0, other]}},
            {"on": side, "pressure": stress},
            {"on": side, "pressure": {"from": stress, "to": other}},
            {"on": side, "shear": stress},
            {"on": side, "line_load": [stress * length, 0]},
            {"acceleration": [0, stress * length]},
            {"body_force": [stress / length, other / length]},
            {"spin": {"about": self.place(0, 0), "speed": stress}},
            {"temperature_change": self.magnitude()},
        ]
        if self.straight:
            choices.append({"on": self.pick(self.straight), "total_moment": force * length})
        if self.round:
            choices.append({"on": self.pick(self.round), "bearing": [force, other * length**2]})
        if self.points:
            choices.append({"on": self.pick(self.points), "force": [force, 0]})
        load: Json = self.pick(choices)
        if "on" not in load and self.regions and self.often(0.5):
            load["on"] = self.regions[0]
        return load

    def _requests(self, kind: str) -> Json:
        found: Json = {}
        near = [self.place(*at) for at in self.places]
        if self.often(0.5):
            found["probes"] = {next(self.names): self.pick(near)}
        x, y = (sum(axis) / len(self.places) for axis in zip(*self.places, strict=True))
        tilt = self.rng.uniform(0, math.pi)
        reach = [2000 * math.cos(tilt), 2000 * math.sin(tilt)]
        ends = {
            "from": self.place(x - reach[0], y - reach[1]),
            "to": self.place(x + reach[0], y + reach[1]),
        }
        if self.often(0.5):
            found["cuts"] = {next(self.names): ends}
        if self.often(0.5):
            border = {"from": near[0], "to": near[1], "points": self.pick((2, 41, 200))}
            found["lines"] = {next(self.names): border}
        if self.often(0.2):
            found["hot_spots"] = {
                next(self.names): {
                    "at": self.pick(near),
                    "direction": [self.rng.uniform(-1, 1), self.rng.uniform(-1, 1)],
                    "thickness": self.length * self.pick((1.0, 5.0)),
                }
            }
        if self.often(0.1) and kind != "mesh":
            found["convergence"] = True
        if self.often(0.3):
            found["fields"] = self.pick(("all", "envelope"))
        return found
