"""What the results of a job look like, for the OpenAPI document.

The results are written by a worker and streamed as they are; the tests hold real results against
these schemas, so that neither can change without the other.
"""

from typing import Any

from marshmallow import fields, validate

from api.schemas import Answer, CautiousAnswer, text


def number(description: str, **options: Any) -> fields.Float:
    return fields.Float(required=True, metadata={"description": description}, **options)


def whole(description: str) -> fields.Integer:
    return fields.Integer(required=True, metadata={"description": description})


def numbers(description: str, length: int | None = None, **options: Any) -> fields.List:
    exactly = validate.Length(equal=length) if length else None
    return fields.List(
        fields.Float(),
        required=True,
        validate=exactly,
        metadata={"description": description},
        **options,
    )


def part(schema: type[Answer], description: str, **options: Any) -> fields.Nested:
    return fields.Nested(schema, required=True, metadata={"description": description}, **options)


def by_name(schema: Any, description: str) -> fields.Dict:
    values = schema if isinstance(schema, fields.Field) else fields.Nested(schema)
    return fields.Dict(
        keys=fields.String(), values=values, required=True, metadata={"description": description}
    )


def place() -> fields.List:
    return numbers("[x, y] [L]", 2)


# --- peaks and balances of one state -------------------------------------------------------------


class LeastSchema(Answer):
    value = number("The smallest value anywhere")


class SingularSchema(Answer):
    value = number("What the mesh shows at a place where the stress of the model is infinite")
    at = place()
    kind = text(
        "re-entrant-corner, fixed-end, thickness-step, point-load or point-support", required=True
    )
    exponent = number("The stress there goes as r to this power less one")
    radius = number("Of the neighbourhood that the peak leaves out [L]")
    element_size = number("Longest side of an element there [L]")
    confirmed = fields.Boolean(
        required=True,
        allow_none=True,
        metadata={"description": "Whether it grew as the mesh was refined; null with one mesh"},
    )


class _StressSchema(Answer):
    value = number("The extreme value outside the neighbourhoods of singular places")
    at = place()
    region = text("Region in which it is", required=True)
    error = number("Estimated discretisation error of the value, where known", allow_none=True)
    interval = numbers(
        "[low, high] that holds the true peak by all that is known; displacements have none",
        2,
        allow_none=True,
    )
    singular = part(
        SingularSchema, "The worse value at a singular place, if there is one", allow_none=True
    )


class PeakSchema(_StressSchema):
    least = part(LeastSchema, "The other end of the range")


class GoverningSchema(_StressSchema):
    governs = text("The case or combination", required=True)


class UtilisationSchema(Answer):
    value = number("Largest von Mises stress over yield strength")
    yield_strength = number("Of the material there [F/L^2]")
    at = place()
    region = text("Region in which it is", required=True)


class GoverningUtilisationSchema(UtilisationSchema):
    governs = text("The case or combination", required=True)


class ReactionSchema(Answer):
    force = numbers("[x, y] of the support on the plate [F]", 2)
    moment = number("About `about`, counter-clockwise [F L]")
    about = place()


class EquilibriumSchema(Answer):
    applied = numbers("[x, y, moment] of the loads [F, F, F L]", 3)
    reaction = numbers("[x, y, moment] of the supports", 3)
    residual = number("What is left of their sum, relative")
    about = place()


class ErrorEstimateSchema(Answer):
    relative = number("Energy norm of the error over that of the solution")
    energy_norm = number("Energy norm of the error [(F L)^1/2]")


class StateResultsSchema(Answer):
    von_mises = part(PeakSchema, "[F/L^2]")
    principal_max = part(PeakSchema, "Largest principal stress [F/L^2]")
    principal_min = part(PeakSchema, "Smallest principal stress [F/L^2]")
    shear_max = part(PeakSchema, "Largest shear stress in the plane [F/L^2]")
    displacement = part(PeakSchema, "Magnitude [L]")
    reactions = by_name(ReactionSchema, "By the name of the support")
    equilibrium = part(EquilibriumSchema, "Loads against reactions")
    error_estimate = part(ErrorEstimateSchema, "Of the whole plate (Zienkiewicz & Zhu 1992)")
    utilisation = part(
        UtilisationSchema, "Null where no material has a yield strength", allow_none=True
    )
    factors = fields.Dict(
        keys=fields.String(), values=fields.Float(),
        metadata={"description": "On the load cases, where the case is given so"},
    )  # fmt: skip


class CombinationResultsSchema(StateResultsSchema):
    factors = by_name(fields.Float(), "On its cases")


class EnvelopeSchema(Answer):
    von_mises = part(GoverningSchema, "[F/L^2]")
    principal_max = part(GoverningSchema, "[F/L^2]")
    principal_min = part(GoverningSchema, "The lowest of all [F/L^2]")
    shear_max = part(GoverningSchema, "[F/L^2]")
    displacement = part(GoverningSchema, "[L]")
    utilisation = part(GoverningUtilisationSchema, "Against yield", allow_none=True)


# --- what was asked for --------------------------------------------------------------------------


class ProbeResultSchema(Answer):
    at = place()
    stress = numbers("[xx, yy, xy] [F/L^2]", 3)
    displacement = numbers("[u, v] [L]", 2)
    principal = numbers("[largest, smallest] [F/L^2]", 2)
    von_mises = number("[F/L^2]")


class LineStateResultSchema(Answer):
    stress = fields.List(numbers("[xx, yy, xy] at each point", 3),
                         required=True)  # fmt: skip
    displacement = fields.List(numbers("[u, v] at each point", 2), required=True)
    von_mises = numbers("At each point")


class LineResultSchema(Answer):
    points = fields.List(place(), required=True)
    distance = numbers("Of each point from the start [L]")
    cases = by_name(LineStateResultSchema, "By case and combination")


class CutResultSchema(Answer):
    normal = number("Normal force, tension positive [F]")
    shear = number("Shear force [F]")
    moment = number("About `about` [F L]")
    about = place()


class HotSpotStateResultSchema(Answer):
    stress = number("Extrapolated to the toe, along the direction: 1.67 x nearer - 0.67 x farther")
    along = numbers("Stress along the direction at the two points [F/L^2]", 2)
    principal = fields.List(numbers("[largest, smallest] at each point", 2), required=True)


class HotSpotResultSchema(Answer):
    at = place()
    direction = numbers("From the toe into the plate, of length one", 2)
    thickness = number("t [L]")
    points = fields.List(
        place(), required=True, metadata={"description": "At 0.4 t and 1.0 t from the toe"}
    )
    cases = by_name(HotSpotStateResultSchema, "By case and combination")


# --- the job as a whole --------------------------------------------------------------------------


class AboutSchema(Answer):
    id = text("The job; absent when it was solved without a server")
    title = text("From the document", required=True)
    label = text("From the document", required=True, allow_none=True)
    checksum = text("sha256 of the document, byte for byte", required=True)
    fishplate = text("Version that made the results", required=True)
    made = text("When that was, RFC 3339", required=True)


class ResultUnitsSchema(Answer):
    length = text("Of all lengths", required=True)
    force = text("Of all forces", required=True)
    stress = text("Of all stresses", required=True)


class IterationSchema(Answer):
    tolerance = number("Allowed residual over the load")
    iterations = whole("Most of all load cases")
    energy_error = number("Largest of all cases, over the solution in the energy norm; estimated")


class SolverSchema(Answer):
    name = text("Of the solver", required=True)
    ordering = text("Of the unknowns", required=True)
    dofs = whole("Displacements in all")
    free_dofs = whole("Those not prescribed")
    factor_entries = whole("Numbers in the factor")
    residual = number("Largest relative residual of all cases")
    refinements = whole("Steps of iterative refinement")
    reciprocal_condition = number("Estimate; near zero where a part is barely held")
    iteration = part(
        IterationSchema, "Where there was no factor: what the iteration took", allow_none=True
    )
    seconds = by_name(fields.Float(), "By stage of the work")


class MeshRegionSchema(Answer):
    thickness = number("[L]")
    material = text("Its name", required=True)
    area = number("[L^2]")


class QualitySchema(Answer):
    value = number("The worst of all elements")
    at = place()
    limit = number("Beyond which an element counts as bad")
    bad = whole("Elements beyond the limit")


class MeshFiguresSchema(Answer):
    nodes = whole("Nodes")
    elements = by_name(fields.Integer(), "Number of each type")
    dofs = whole("Displacements")
    regions = by_name(MeshRegionSchema, "By name; `plate` is what no region overrides")
    quality = by_name(QualitySchema, "By measure")
    parts = whole("Unconnected parts")
    digest = text("Of nodes, elements and regions: jobs on the same mesh share it", required=True)


class EnvelopeFilesSchema(Answer):
    fields_ = fields.String(
        data_key="fields", metadata={"description": "Field file of the envelope, if made"}
    )
    previews = fields.Dict(
        keys=fields.String(), values=fields.String(), required=True,
        metadata={"description": "Pictures of what governs where, by measure"},
    )  # fmt: skip


class ConvergenceMeshSchema(Answer):
    dofs = whole("Displacements")
    elements = whole("Elements")
    relative_error = number("Largest estimated error of any case, relative, in the energy norm")
    case = text("Case or combination that has it", required=True)


class SeriesSchema(Answer):
    values = numbers("Of the peak on each mesh")
    at = fields.List(place(), required=True)
    sizes = numbers("Of the elements at the peak, on each mesh [L]")
    behaviour = text("converging, oscillating, growing or unresolved", required=True)
    observed_order = number("Of convergence with the element size", allow_none=True)
    extrapolated = number("What the peak tends to (Richardson)", allow_none=True)
    uncertainty = number("Grid convergence index (Roache 1994), as a value", allow_none=True)


class ConvergenceSchema(Answer):
    kind = text("adaptive, or series where the record was asked for", required=True)
    target_error = fields.Float(metadata={"description": "Of an adaptive run"})
    max_dofs = fields.Integer(metadata={"description": "Limit of an adaptive run"})
    stopped_by = text("target, max_dofs, steps, time, no-gain or mesh; of an adaptive run")
    message = text("The same in words")
    meshes = fields.List(fields.Nested(ConvergenceMeshSchema), required=True)
    peaks = by_name(
        fields.Dict(keys=fields.String(), values=fields.Nested(SeriesSchema)),
        "By case and combination, by quantity",
    )


class FilesSchema(Answer):
    convergence = text("Picture of the error over the unknowns, where there is a record")
    fields_ = fields.Dict(
        keys=fields.String(), values=fields.String(), required=True, data_key="fields",
        metadata={"description": "Made with the job; others are made when asked for"},
    )  # fmt: skip
    previews = fields.Dict(
        keys=fields.String(),
        values=fields.Dict(keys=fields.String(), values=fields.String()),
        required=True,
        metadata={"description": "Made with the job, by case and quantity"},
    )
    lines = fields.Dict(
        keys=fields.String(), values=fields.String(), required=True,
        metadata={"description": "Graphs of lines that were drawn with the job"},
    )  # fmt: skip
    envelope = part(EnvelopeFilesSchema, "Of all cases and combinations together")
    tables = fields.Dict(
        keys=fields.String(), values=fields.String(), required=True,
        metadata={"description": "Tables that have rows, by name"},
    )  # fmt: skip
    sheet = text("The review sheet", required=True)


class PicturesSchema(Answer):
    available = fields.Boolean(required=True)
    reason = text("Why the machine that made the results cannot draw")


class ResultsSchema(CautiousAnswer):
    job = part(AboutSchema, "What was solved")
    units = part(ResultUnitsSchema, "Of every number below")
    solver = part(SolverSchema, "How it was solved")
    mesh = part(MeshFiguresSchema, "What it was solved on")
    cases = by_name(StateResultsSchema, "By load case")
    combinations = by_name(CombinationResultsSchema, "By combination")
    envelope = part(EnvelopeSchema, "The worst of all, and which case governs")
    probes = by_name(
        fields.Dict(keys=fields.String(), values=fields.Nested(ProbeResultSchema)),
        "By name, by case",
    )
    lines = by_name(LineResultSchema, "By name")
    cuts = by_name(
        fields.Dict(keys=fields.String(), values=fields.Nested(CutResultSchema)), "By name, by case"
    )
    hot_spots = by_name(HotSpotResultSchema, "By name")
    convergence = part(
        ConvergenceSchema,
        "Record of refined meshes; null where the job was solved on one",
        allow_none=True,
    )
    files = part(FilesSchema, "Within the results folder")
    pictures = part(PicturesSchema, "Whether previews can be made")
