"""The reference in README.md, written from the schemas and the review rules.

    python -m api.reference README.md

replaces what stands between the markers `<!-- document -->`, `<!-- results -->` and
`<!-- cautions -->` and the `<!-- end -->` behind each. A test compares.
"""

import json
import re
import sys
import tempfile
from collections.abc import Callable, Iterator, Mapping
from pathlib import Path
from typing import Any

from api.app import create_app
from workers.cautions import STANDING
from workers.review.catalogue import catalogue
from workers.settings import Settings

Schema = Mapping[str, Any]
REFERENCE = "#/components/schemas/"


def sections() -> dict[str, str]:
    """Markdown of each generated section, by the name of its marker."""
    with tempfile.TemporaryDirectory() as store:
        application = create_app(Settings(store=Path(store)))
        described = application.test_client().get("/openapi.json").get_json()
    schemas = described["components"]["schemas"]
    return {
        "document": "".join(_tables("Job", schemas)),
        "results": "".join(_tables("Results", schemas)),
        "cautions": _cautions(),
    }


def rewrite(text: str) -> str:
    """A page with its generated sections written anew; KeyError for an unknown marker."""
    written = sections()

    def replaced(match: re.Match[str]) -> str:
        return f"<!-- {match[1]} -->\n\n{written[match[1]]}\n<!-- end -->"

    return re.sub(r"<!-- (\w+) -->\n.*?<!-- end -->", replaced, text, flags=re.DOTALL)


# --- objects ----------------------------------------------------------------------------------


def _tables(root: str, schemas: Mapping[str, Schema]) -> Iterator[str]:
    """A table of keys for every object that can be reached from one, each once, outer first."""
    waiting, seen = [root], {root}
    while waiting:
        name = waiting.pop(0)
        schema = schemas[name]
        yield f"**{name}**: {_cell(schema.get('title', ''))}\n\n"
        yield "| key | value | meaning |\n|---|---|---|\n"
        for key, value in schema.get("properties", {}).items():
            needed = "" if key in schema.get("required", ()) else " (optional)"
            yield f"| `{key}`{needed} | {_kind(value)} | {_cell(value.get('description', ''))} |\n"
            for found in _references(value):
                if found not in seen:
                    seen.add(found)
                    waiting.append(found)
        yield "\n"


def _references(schema: Any) -> Iterator[str]:
    if isinstance(schema, dict):
        if "$ref" in schema:
            yield schema["$ref"].removeprefix(REFERENCE)
        for value in schema.values():
            yield from _references(value)
    elif isinstance(schema, list):
        for value in schema:
            yield from _references(value)


# --- kinds of value ---------------------------------------------------------------------------


def _kind(schema: Schema) -> str:
    """What a value is, in words and limits."""
    for key, words in _KINDS.items():
        if key in schema:
            return words(schema)
    kind = schema.get("type", "any")
    if isinstance(kind, list):
        return " or ".join(str(k) for k in kind)
    return _PLAIN.get(kind, lambda s: str(kind))(schema)


def _union(schema: Schema) -> str:
    kinds = list(dict.fromkeys(_kind(part) for part in schema["anyOf"]))
    return " or ".join(kinds)


def _object(schema: Schema) -> str:
    if "properties" in schema:
        return "{" + ", ".join(f"`{key}`" for key in schema["properties"]) + "}"
    inner = schema.get("additionalProperties")
    return f"{{name: {_kind(inner)}}}" if isinstance(inner, dict) and inner else "object"


def _array(schema: Schema) -> str:
    items = schema.get("items", {})
    low, high = schema.get("minItems"), schema.get("maxItems")
    if low is not None and low == high and low <= 4:
        return (
            "[" + ", ".join([_kind(items)] * low) + "]" if low <= 2 else f"{low} x {_kind(items)}"
        )
    return f"[{_kind(items)}, ...]"


def _number(schema: Schema) -> str:
    words = "whole number" if schema.get("type") == "integer" else "number"
    limits = [
        f"{sign} {schema[key]:g}"
        for key, sign in (
            ("minimum", "≥"), ("exclusiveMinimum", ">"),
            ("maximum", "≤"), ("exclusiveMaximum", "<"),
        )
        if isinstance(schema.get(key), int | float)
    ]  # fmt: skip
    return f"{words} {', '.join(limits)}".rstrip()


def _string(schema: Schema) -> str:
    if "examples" in schema:
        return f"`{json.dumps(schema['examples'][0], ensure_ascii=False)}`"
    return "text"


_KINDS: Mapping[str, Callable[[Schema], str]] = {
    "$ref": lambda s: s["$ref"].removeprefix(REFERENCE),
    "enum": lambda s: " or ".join(f"`{value}`" for value in s["enum"]),
    "anyOf": _union,
}
_PLAIN: Mapping[str, Callable[[Schema], str]] = {
    "object": _object,
    "array": _array,
    "number": _number,
    "integer": _number,
    "string": _string,
    "boolean": lambda s: "true or false",
    "null": lambda s: "null",
}


# --- cautions ---------------------------------------------------------------------------------


def _cautions() -> str:
    rows = [
        f"| `{rule['code']}` | {rule['severity']} | {_cell(rule['looks_at'])} "
        f"| {_cell(rule['action'])} |\n"
        for rule in catalogue()
    ]
    standing = {caution.code for caution in STANDING}
    assert standing <= {rule["code"] for rule in catalogue()}
    return "| code | severity | looks at | what to do |\n|---|---|---|---|\n" + "".join(rows)


def _cell(text: str) -> str:
    return text.strip().replace("|", "\\|").replace("\n", " ")


def main() -> int:
    path = Path(sys.argv[1])
    path.write_text(rewrite(path.read_text()))
    return 0


if __name__ == "__main__":
    sys.exit(main())
