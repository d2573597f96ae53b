"""What is to be analysed: the job and its parts, as frozen data.

Numbers are in the job's own consistent units (length [L], force [F]); time is in seconds,
temperature in kelvin. How a job is written as JSON is in `workers/document/`; what is done with it
is in `workers/analysis/`. Every part that can be wrong on the mesh carries the JSON pointer of the
place it came from, so that a late fault is as clear as an early one.
"""

from collections.abc import Mapping
from dataclasses import dataclass, field

from workers.geometry import Geometry, Region, Vector

STRESS_LABELS: Mapping[tuple[str, str], str] = {
    ("mm", "N"): "MPa",
    ("mm", "kN"): "GPa",
    ("m", "N"): "Pa",
    ("m", "kN"): "kPa",
    ("m", "MN"): "MPa",
    ("in", "lbf"): "psi",
    ("in", "kip"): "ksi",
}


@dataclass(frozen=True)
class Units:
    """The declared units, e.g. "mm" and "N"; everything else follows from them."""

    length: str
    force: str

    @property
    def stress(self) -> str:
        """Label of a stress in these units: MPa for N and mm, else force/length^2."""
        return STRESS_LABELS.get((self.length, self.force), f"{self.force}/{self.length}2")


@dataclass(frozen=True)
class Material:
    name: str
    youngs_modulus: float  # [F/L^2]
    poissons_ratio: float
    yield_strength: float | None = None  # [F/L^2]
    density: float | None = None  # [F s^2/L^4]
    thermal_expansion: float | None = None  # [1/K]


@dataclass(frozen=True)
class Plate:
    """The section of whatever no region overrides."""

    material: str
    thickness: float  # [L]


@dataclass(frozen=True)
class Meshing:
    element: str = "Q8"
    size: float | None = None  # [L]
    sizes: Mapping[str, float] = field(default_factory=dict)
    target_error: float | None = None  # relative energy norm
    max_dofs: int | None = None


@dataclass(frozen=True)
class Named:
    """A side, hole, region or point by name."""

    name: str


@dataclass(frozen=True)
class Segment:
    """The boundary on the straight line between two points."""

    start: Vector
    end: Vector
    tolerance: float | None = None


@dataclass(frozen=True)
class Box:
    """Everything inside an upright box."""

    low: Vector
    high: Vector
    tolerance: float | None = None


@dataclass(frozen=True)
class OnCircle:
    """The boundary on a circle."""

    centre: Vector
    radius: float
    tolerance: float | None = None


@dataclass(frozen=True)
class Nodes:
    """Nodes by number (own meshes only)."""

    numbers: tuple[int, ...]


Target = Named | Segment | Box | OnCircle | Nodes


@dataclass(frozen=True)
class Spring:
    """Elastic support: [F/L^2] on sides (force per length per length), [F/L] at points."""

    x: float = 0.0
    y: float = 0.0
    normal: float = 0.0
    tangential: float = 0.0


@dataclass(frozen=True)
class Support:
    """What holds the plate. None means that the direction is free.

    With `case` the support still holds in every case, but its prescribed values act in that case
    only; in the others they are zero.
    """

    label: str  # key of this support in the results, unique in the job
    on: Target
    ux: float | None = None
    uy: float | None = None
    normal: float | None = None
    along: Vector | None = None  # direction of a skew support, any length but zero
    displacement: float | None = None  # prescribed along `along`
    spring: Spring | None = None
    case: str | None = None
    pointer: str = ""


@dataclass(frozen=True, kw_only=True)
class Load:
    """Base of all loads; on is None where the whole plate is meant."""

    on: Target | None = None
    pointer: str = ""


@dataclass(frozen=True, kw_only=True)
class PointForce(Load):
    """A force at a point [F]."""

    force: Vector


@dataclass(frozen=True, kw_only=True)
class TotalForce(Load):
    """A force spread evenly over the length of a side [F]."""

    force: Vector


@dataclass(frozen=True, kw_only=True)
class TotalMoment(Load):
    """A moment spread linearly over a side [F L], counter-clockwise positive."""

    moment: float


@dataclass(frozen=True, kw_only=True)
class Traction(Load):
    """Force per area [F/L^2], in x and y; linear from start to end of the side."""

    start: Vector
    end: Vector


@dataclass(frozen=True, kw_only=True)
class Pressure(Load):
    """Force per area [F/L^2], positive into the material."""

    start: float
    end: float


@dataclass(frozen=True, kw_only=True)
class Shear(Load):
    """Force per area [F/L^2] along the side, boundary traversed with the material on the left."""

    start: float
    end: float


@dataclass(frozen=True, kw_only=True)
class LineLoad(Load):
    """Force per length of side [F/L], in x and y."""

    start: Vector
    end: Vector


@dataclass(frozen=True, kw_only=True)
class Bearing(Load):
    """A pin's force on a hole [F]: cosine pressure over the loaded half."""

    force: Vector


@dataclass(frozen=True, kw_only=True)
class Acceleration(Load):
    """Body force = density x acceleration [L/s^2]; (0, -9.81 m/s^2) is self weight."""

    acceleration: Vector


@dataclass(frozen=True, kw_only=True)
class BodyForce(Load):
    """Force per volume [F/L^3]."""

    force: Vector


@dataclass(frozen=True, kw_only=True)
class Spin(Load):
    """Rotation about a point [rad/s]: body force density * speed^2 * r outward."""

    about: Vector
    speed: float


@dataclass(frozen=True, kw_only=True)
class TemperatureChange(Load):
    """Uniform temperature change of the plate or of a region [K]."""

    change: float


@dataclass(frozen=True)
class LoadCase:
    name: str
    loads: tuple[Load, ...]
    pointer: str = ""


@dataclass(frozen=True)
class Combination:
    """A sum of other cases, each times a factor."""

    name: str
    factors: Mapping[str, float]
    pointer: str = ""


@dataclass(frozen=True)
class Line:
    start: Vector
    end: Vector
    points: int = 41
    pointer: str = ""


@dataclass(frozen=True)
class Cut:
    start: Vector
    end: Vector
    pointer: str = ""


@dataclass(frozen=True)
class HotSpot:
    """A weld toe, and the way from it into the plate along which stress is extrapolated back."""

    at: Vector
    direction: Vector  # of any length but zero
    thickness: float | None = None  # [L]; the plate's if None
    pointer: str = ""


@dataclass(frozen=True)
class Requests:
    """field_files : whose field files are made with the job: "all", "envelope" for none but that of
    the envelope, or names of cases and combinations; None leaves it to the size of the job.
    convergence : solve on three meshes, for a record of what the peaks tend to.
    """

    probes: Mapping[str, Vector] = field(default_factory=dict)
    lines: Mapping[str, Line] = field(default_factory=dict)
    cuts: Mapping[str, Cut] = field(default_factory=dict)
    field_files: str | tuple[str, ...] | None = None
    hot_spots: Mapping[str, HotSpot] = field(default_factory=dict)
    convergence: bool = False


@dataclass(frozen=True)
class Limits:
    displacement: float | None = None  # [L]
    factor_on_yield: float | None = None  # required yield strength over von Mises


@dataclass(frozen=True, eq=False)
class Job:
    """One plate with all its load cases.

    cases : cases given as factors on the load cases. Where there are any, the load cases are only
        the patterns that these are made of, and do not appear in the results themselves.
    combinations : of `cases`, or of the load cases where there are none.
    """

    title: str
    units: Units
    materials: Mapping[str, Material]
    geometry: Geometry
    plate: Plate
    supports: tuple[Support, ...]
    load_cases: tuple[LoadCase, ...]
    combinations: tuple[Combination, ...] = ()
    meshing: Meshing = Meshing()
    requests: Requests = Requests()
    limits: Limits = Limits()
    label: str | None = None
    cases: tuple[Combination, ...] = ()

    def region(self, name: str) -> Region | None:
        return next((r for r in self.geometry.regions if r.name == name), None)

    def thickness_of(self, region: str) -> float:
        """Thickness of a region, or of the plate where the region does not override it [L]."""
        found = self.region(region)
        return found.thickness if found and found.thickness is not None else self.plate.thickness

    def material_of(self, region: str) -> Material:
        found = self.region(region)
        return self.materials[found.material if found and found.material else self.plate.material]
