"""The plate's shape: an outline for free meshing, patches for mapped meshing, or a mesh."""

from collections.abc import Mapping
from typing import Any

from marshmallow import ValidationError, validates_schema

from workers.document.containers import ListOf, MapOf, Part, Vector
from workers.document.fields import Name, Number, Quantity, Whole
from workers.document.mesh import MeshSchema
from workers.document.record import Record, only_with
from workers.document.targets import CircleSchema
from workers.document.units import LENGTH
from workers.geometry import (
    CircleShape,
    Geometry,
    Hole,
    MeshGeometry,
    OutlineGeometry,
    Patch,
    PatchGeometry,
    Region,
    Vertex,
)

MOST_VERTICES = 20_000
MOST_PARTS = 20_000  # holes, regions, patches, points: each
MOST_DIVISIONS = 10_000
MOST_PATCH_ELEMENTS = 20_000_000


class VertexSchema(Record):
    """A corner of a loop and the side that leaves it."""

    makes = Vertex

    at = Vector(LENGTH, description="Position [x, y]", required=True)
    side = Name("Name of the side that leaves this vertex; sides of one name are one side")
    through = Vector(
        LENGTH, description="Makes that side the circular arc through this point [x, y]"
    )
    fillet = Quantity(LENGTH, description="Radius that rounds this vertex", above=0)
    fillet_side = Name("Name of the round")

    @validates_schema(pass_original=True, skip_on_field_errors=False)
    def _fillet_side_needs_fillet(self, data: Any, original: Any, **_: Any) -> None:
        only_with(original, "fillet_side", "fillet")


def _loop(description: str, **options: Any) -> ListOf:
    vertex = Part(VertexSchema, "A vertex and the side that leaves it")
    return ListOf(vertex, description, least=3, most=MOST_VERTICES, **options)


class _ShapedSchema(Record):
    """What a hole and a region have in common: a shape, written as circle or outline."""

    circle = Part(CircleSchema, "The shape is this circle")
    outline = _loop("The shape is this closed loop of vertices")

    def build(self, data: dict[str, Any]) -> Any:
        circle, outline = data.pop("circle", None), data.pop("outline", None)
        return super().build(data | {"shape": circle or outline})

    def unbuild(self, thing: Any) -> dict[str, Any]:
        key = "circle" if isinstance(thing.shape, CircleShape) else "outline"
        return {**vars(thing), key: thing.shape}


class HoleSchema(_ShapedSchema):
    """A hole: exactly one of circle and outline."""

    makes = Hole
    one_of = ("circle", "outline")

    name = Name("Name of the hole, and of its whole border", required=True)


class RegionSchema(_ShapedSchema):
    """A part with its own thickness or material, or one that loads and sizes refer to by name.

    With geometry.outline it takes circle or outline; with patches and mesh it takes neither, and
    the patch or block says by name that it belongs to the region.
    """

    makes = Region

    name = Name("Name of the region", required=True)
    thickness = Quantity(
        LENGTH, description="Thickness here; that of the plate if left out", above=0
    )
    material = Name("Material here; that of the plate if left out")


class PatchSchema(Record):
    """A four-sided block; its sides run corner 1-2, 2-3, 3-4, 4-1; coincident sides merge."""

    makes = Patch

    name = Name("Name of the patch", required=True)
    corners = ListOf(
        Vector(LENGTH, description="Corner [x, y]"),
        "Corners, counter-clockwise",
        least=4,
        most=4,
        required=True,
    )
    divisions = ListOf(
        Whole("Number of elements", least=1, most=MOST_DIVISIONS),
        "Numbers of elements along the sides 1-2 and 2-3",
        least=2,
        most=2,
        required=True,
    )
    grading = ListOf(
        Number("Ratio", least=1e-3, most=1e3),
        "Size at the end over size at the start, of sides 1-2 and 2-3; [1, 1] is even",
        least=2,
        most=2,
    )
    sides = ListOf(
        Name("Name of a side", allow_none=True),
        "Names of the four sides, or null; sides of one name are one side",
        least=4,
        most=4,
    )
    through = ListOf(
        Vector(LENGTH, description="Point on the arc [x, y]", allow_none=True),
        "For each side a point that makes it a circular arc, or null where it is straight",
        least=4,
        most=4,
    )
    region = Name("Region that the patch belongs to")


class GeometrySchema(Record):
    """Exactly one of outline, patches and mesh."""

    one_of = ("outline", "patches", "mesh")

    outline = _loop("Closed loop of vertices, for free meshing")
    holes = ListOf(Part(HoleSchema, "A hole"), "Holes; only with outline", most=MOST_PARTS)
    patches = ListOf(
        Part(PatchSchema, "A patch"), "Blocks for mapped meshing", least=1, most=MOST_PARTS
    )
    mesh = Part(MeshSchema, "A finished mesh")
    regions = ListOf(
        Part(RegionSchema, "A region"),
        "Parts with their own thickness or material, or that loads and sizes refer to by name",
        most=MOST_PARTS,
    )
    points = MapOf(
        Vector(LENGTH, description="Position [x, y]"),
        "Named points; with mesh they stand in mesh.points instead",
        most=MOST_PARTS,
    )

    @validates_schema(pass_original=True, skip_on_field_errors=False)
    def _parts_fit_the_kind(self, data: Any, original: Any, **_: Any) -> None:
        kinds = [k for k in self.one_of if isinstance(original, Mapping) and k in original]
        if len(kinds) != 1:
            return
        errors: dict[str, Any] = {}
        if kinds[0] != "outline" and "holes" in original:
            errors["holes"] = ["only an outline has holes; leave the space free in the mesh"]
        if kinds[0] == "mesh" and "points" in original:
            errors["points"] = ["points of a mesh stand in mesh.points, as node numbers"]
        regions = _misfit_regions(original.get("regions"), kinds[0])
        if regions:
            errors["regions"] = regions
        if sum(p.divisions[0] * p.divisions[1] for p in data.get("patches", ())) > (
            MOST_PATCH_ELEMENTS
        ):
            errors["patches"] = [f"make more than {MOST_PATCH_ELEMENTS} elements"]
        if errors:
            raise ValidationError(errors)

    def build(self, data: dict[str, Any]) -> Geometry:
        if "mesh" in data:
            return MeshGeometry(**data["mesh"], regions=data.get("regions", ()))
        return PatchGeometry(**data) if "patches" in data else OutlineGeometry(**data)

    def unbuild(self, thing: Geometry) -> dict[str, Any]:
        if isinstance(thing, MeshGeometry):
            mesh = {k: v for k, v in vars(thing).items() if k != "regions"}
            return {"mesh": mesh, "regions": thing.regions or None}
        return {key: value or None for key, value in vars(thing).items()}


def _misfit_regions(regions: Any, kind: str) -> dict[int, Any]:
    """Regions whose shape is missing, double, or not wanted."""
    errors = {}
    for i, region in enumerate(regions if isinstance(regions, list | tuple) else ()):
        shapes = {"circle", "outline"} & region.keys() if isinstance(region, Mapping) else None
        if shapes is None:
            continue
        if kind == "outline" and len(shapes) != 1:
            errors[i] = {"_schema": ["needs exactly one of circle, outline"]}
        if kind != "outline" and shapes:
            part = "patch" if kind == "patches" else "block"
            message = f'has no shape of its own here; say "region" in a {part} instead'
            errors[i] = {key: [message] for key in shapes}
    return errors
