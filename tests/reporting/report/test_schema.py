"""report.json keeps to its published schema, and the schema names all that it holds."""

from __future__ import annotations

import json
from pathlib import Path

import jsonschema
import pytest

from earthwork.reporting.report.schema import schema_of, undescribed

SCHEMA = json.loads((Path(__file__).parents[3] / "docs" / "report.schema.json").read_text(encoding="utf-8"))


@pytest.mark.parametrize("name", ["sample", "hostile"])
def test_reports_keep_to_the_schema(name, request):
    result = request.getfixturevalue(name)
    document = json.loads((result.directory / "report.json").read_text(encoding="utf-8"))
    jsonschema.Draft202012Validator.check_schema(SCHEMA)
    jsonschema.validate(document, SCHEMA, cls=jsonschema.Draft202012Validator)
    assert undescribed(document, SCHEMA) == []


def test_a_wrong_document_is_told(sample):
    document = json.loads((sample.directory / "report.json").read_text(encoding="utf-8"))
    document["result"]["volumes"]["total"]["cut_m3"] = "plenty"
    with pytest.raises(jsonschema.ValidationError, match="'plenty' is not of type"):
        jsonschema.validate(document, SCHEMA)
    del document["result"]["volumes"]
    with pytest.raises(jsonschema.ValidationError, match="'volumes' is a required property"):
        jsonschema.validate(document, SCHEMA)


def test_what_two_documents_have_is_joined():
    head = {"command": "report", "version": "1", "site": "a", "display_units": "us", "inputs": [], "warnings": []}
    made = schema_of([{**head, "result": {"a_m3": None, "b": [1]}}, {**head, "result": {"a_m3": 2.5, "b": []}}])
    result = made["properties"]["result"]["properties"]
    assert result["a_m3"] == {"type": ["number", "null"], "description": "m³"}
    assert result["b"]["items"] == {"type": ["number", "null"]}
    assert made["properties"]["result"]["required"] == ["a_m3", "b"]
