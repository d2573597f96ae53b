"""All review rules, and what they say of themselves."""

from types import ModuleType

from workers.cautions import STANDING
from workers.review import (
    assumptions,
    discretisation,
    equations,
    fatigue,
    inputs,
    kinematics,
    loading,
    model_validity,
    refinement,
    restraint,
    shapes,
    stability,
    strength,
)
from workers.review.rule import Rule

MODULES: tuple[ModuleType, ...] = (
    strength,
    stability,
    fatigue,
    kinematics,
    equations,
    model_validity,
    discretisation,
    refinement,
    shapes,
    restraint,
    loading,
    assumptions,
    inputs,
)

RULES: tuple[Rule, ...] = tuple(
    value for module in MODULES for value in vars(module).values() if isinstance(value, Rule)
)

# Raised by `review` itself when a rule breaks down: a check that was not made must be visible.
INCOMPLETE = {
    "code": "review-incomplete",
    "severity": "check",
    "title": "A check could not be made",
    "looks_at": "Whether every rule of this list ran to its end.",
    "action": "Make this check by hand, and report the job to whoever runs the server.",
}


def catalogue() -> list[dict[str, str]]:
    """Code, severity, title, what it looks at and action of every caution there can be."""
    standing = [
        {
            "code": caution.code,
            "severity": caution.severity,
            "title": caution.message,
            "looks_at": "Nothing: it holds for every job.",
            "action": caution.action,
        }
        for caution in STANDING
    ]
    return [*standing, *(rule.as_json() for rule in RULES), INCOMPLETE]
