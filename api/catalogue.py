"""What this installation offers: element types, and the rules behind the cautions."""

from typing import Any

from api.openapi import Blueprint
from api.schemas import ElementsSchema, RulesSchema
from elements import registry
from workers.cautions import SEVERITIES
from workers.review.catalogue import catalogue

blueprint = Blueprint(
    "catalogue", __name__, url_prefix="/v1", description="What this installation offers"
)


@blueprint.get("/elements")
@blueprint.response(200, ElementsSchema)
def list_elements() -> dict[str, Any]:
    """Element types that jobs may use

    Plug-ins that are installed but cannot be used are named with the reason.
    """
    return {
        "elements": [
            {
                "name": name,
                "corners": element.corners,
                "order": element.order,
                "nodes": element.node_count,
                "vtk_cell_type": element.vtk_cell_type,
            }
            for name, element in sorted(registry.available().items())
        ],
        "unusable": registry.problems(),
    }


@blueprint.get("/cautions")
@blueprint.response(200, RulesSchema)
def list_rules() -> dict[str, Any]:
    """Rules that raise cautions

    The cautions of this answer itself are the standing ones, which hold for every job.
    """
    return {"rules": catalogue(), "severities": dict(SEVERITIES)}
