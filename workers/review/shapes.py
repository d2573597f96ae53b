"""Rules about the shape that was drawn: corners into which elements fit only badly."""

from collections.abc import Iterator

from workers.analysis.meshing.corners import sharp_corners
from workers.analysis.meshing.outline import draw
from workers.geometry import OutlineGeometry
from workers.review.context import ReviewContext
from workers.review.rule import Finding, finding, rule

# An element in a corner can have no larger angle; below 30 degrees errors grow quickly (Babuska &
# Aziz, SIAM J. Numer. Anal. 13, 1976, for the part that the angles play; the limit is practice).
SHARP = 30.0  # degrees


@rule(
    "sharp-corner",
    "check",
    title="Corners sharper than 30 degrees",
    looks_at="The angle of every corner of the plate and of every region in it.",
    action="Read no stress in the tip; blunt the corner or round it if the real one is, or if "
    "it only comes from how a region was drawn.",
)
def sharp_corner(context: ReviewContext) -> Iterator[Finding]:
    if not isinstance(context.job.geometry, OutlineGeometry):
        return
    found = sharp_corners(draw(context.job.geometry).edges, SHARP)
    if found:
        x, y = found[0].at
        more = f"; {len(found)} corners are sharper than {SHARP:g} degrees" if found[1:] else ""
        yield finding(
            f"The corner at ({x:.4g}, {y:.4g}) has {found[0].degrees:.1f} degrees, and elements in "
            f"it can be no better shaped{more}.",
            value=found[0].degrees,
            limit=SHARP,
            at=[x, y],
            corners=len(found),
        )
