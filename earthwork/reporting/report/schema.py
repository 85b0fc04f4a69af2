"""The JSON Schema of report.json, from documents that reports have given.

Keys say their units, so a description follows from a key. What a document has in one place is allowed to be null in
all of them: a part that a site does not give is null, and so is what cannot be known. Further keys may come with later
versions; those that are named here stay.
"""

from __future__ import annotations

from collections.abc import Iterable
from typing import Any

from earthwork.reporting.display import suffix_of

Schema = dict[str, Any]

#: Units as they are read out, by the end of a key.
_UNITS = {
    "_l_per_m3": "litres per cubic metre", "_kg_m3": "kg/m³, dry unless the key says moist", "_l_min": "litres per minute",
    "_l_m2": "litres per square metre", "_t_km": "tonnes of dry mass × km", "_km_h": "km/h", "_m3": "m³", "_m2": "m²",
    "_km": "km", "_mm_day": "mm/day", "_m": "m", "_t": "tonnes, dry", "_l": "litres",
}  # fmt: skip
_KNOWN = {
    "command": "always report", "version": "of the program", "site": "name of the site",
    "display_units": "metric or us: of pages and tables; this document is SI throughout",
    "inputs": "every file that the site names", "warnings": "doubts, each with a stable code",
    "left_out": "commands that the site file does not give enough for, or whose plan could not be made",
    "hand_check": "sums to be followed with a pocket calculator, in the units of pages",
    "summary": "the answer box", "loads": "truck loads", "cost": "money", "sha256": "digest of the file",
    **{name: f"the result of the command {name}; null where it is left out"
       for name in ("volumes", "soil", "balance", "lifts", "water", "haul", "pads")},
}  # fmt: skip


def schema_of(documents: Iterable[dict[str, Any]]) -> Schema:
    """The schema that all of the documents keep to."""
    made: Schema = {}
    for document in documents:
        made = _merged(made, _of(document))
    made["required"] = ["command", "version", "site", "display_units", "inputs", "warnings", "result"]
    made["properties"]["command"]["const"] = "report"
    result = made["properties"]["result"]
    result["type"] = "object"
    result["required"] = sorted(result["properties"])
    return {
        "$schema": "https://json-schema.org/draft/2020-12/schema",
        "title": "earthwork report",
        "description": "All results of a site in one document: SI, the unit at the end of each key, null where absent.",
        **_described(made, ""),
    }


def _of(value: Any) -> Schema:
    if isinstance(value, dict):
        return {"type": ["object", "null"], "properties": {key: _of(inner) for key, inner in value.items()}}
    if isinstance(value, list):
        items: Schema = {}
        for inner in value:
            items = _merged(items, _of(inner))
        return {"type": ["array", "null"], "items": items}
    if value is None:
        return {}
    kind = "boolean" if isinstance(value, bool) else "number" if isinstance(value, int | float) else "string"
    return {"type": [kind, "null"]}


def _merged(a: Schema, b: Schema) -> Schema:
    if not a or not b:
        return a or b
    merged: Schema = {"type": sorted({*a["type"], *b["type"]})}
    if "properties" in a or "properties" in b:
        left, right = a.get("properties", {}), b.get("properties", {})
        merged["properties"] = {key: _merged(left.get(key, {}), right.get(key, {})) for key in {**left, **right}}
    if "items" in a or "items" in b:
        merged["items"] = _merged(a.get("items", {}), b.get("items", {}))
    return merged


def _described(schema: Schema, key: str) -> Schema:
    """The same with what each key is; a key of which nothing is known yet may hold anything."""
    made = dict(schema)
    text = _description(key)
    if text:
        made["description"] = text
    if "properties" in made:
        made["properties"] = {name: _described(made["properties"][name], name) for name in sorted(made["properties"])}
    if "items" in made:
        made["items"] = _described(made["items"], "")
    return made


def _description(key: str) -> str:
    if key in _KNOWN:
        return _KNOWN[key]
    suffix = suffix_of(key)
    if suffix is not None and suffix.text in _UNITS:
        return _UNITS[suffix.text]
    return "percent" if "percent" in key else ""


def undescribed(document: Any, schema: Schema, place: str = "") -> list[str]:
    """Places of a document that its schema does not name."""
    if isinstance(document, dict):
        known = schema.get("properties", {})
        found = [f"{place}.{key}" for key in document if key not in known]
        return found + [
            p for key in document if key in known for p in undescribed(document[key], known[key], f"{place}.{key}")
        ]
    if isinstance(document, list):
        return sorted({p for inner in document for p in undescribed(inner, schema.get("items", {}), f"{place}[]")})
    return []
