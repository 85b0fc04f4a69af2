"""The documentation is in step with the code, and its links lead somewhere."""

import importlib.util
import json
import re
import tomllib
from pathlib import Path

import jsonschema
import pytest

from earthwork.files.starter_text import site_text

ROOT = Path(__file__).parents[1]
SITES = {
    "starter metric": site_text("metric", pit_at=(1.0, 2.0), tip_at=(3.0, 4.0)),
    "starter us": site_text("us", pit_at=(1.0, 2.0), tip_at=(3.0, 4.0)),
    **{p.parent.name: p.read_text(encoding="utf-8") for p in sorted(ROOT.glob("samples/*/site.toml"))},
}


@pytest.fixture(scope="module")
def generate():
    spec = importlib.util.spec_from_file_location("generate", ROOT / "docs" / "generate.py")
    module = importlib.util.module_from_spec(spec)
    spec.loader.exec_module(module)
    return module


@pytest.fixture(scope="module")
def schema():
    return json.loads((ROOT / "docs" / "site.schema.json").read_text(encoding="utf-8"))


def _document(text):
    """A site file as a JSON Schema sees it: dates of TOML are texts there."""
    return json.loads(json.dumps(tomllib.loads(text), default=str))


def test_generated_pages_are_in_step(generate, capsys):
    assert generate.main(["--check"]) == 0, capsys.readouterr().err


def test_the_schema_is_one(schema):
    jsonschema.Draft202012Validator.check_schema(schema)


@pytest.mark.parametrize("name", SITES)
def test_the_schema_takes_every_site_file(schema, name):
    jsonschema.validate(_document(SITES[name]), schema, cls=jsonschema.Draft202012Validator)


@pytest.mark.parametrize(
    ("old", "new"),
    [
        ("depth = 0.15", "depht = 0.15"),
        ('units = "metric"', 'units = "imperial"'),
        ('existing = "existing.tif"', "existing = 3"),
        ('use = "fill"', 'use = "fil"'),
        ('measured_from = "lower"', 'measured_from = "top"'),
        ("[[strip]]", "[strip]"),
        ("step = 0.01", "step = true"),
    ],
)
def test_the_schema_finds_faults(schema, old, new):
    text = SITES["starter metric"]
    assert old in text
    with pytest.raises(jsonschema.ValidationError, match=r".+"):
        jsonschema.validate(_document(text.replace(old, new, 1)), schema, cls=jsonschema.Draft202012Validator)


def test_every_key_of_the_site_file_has_a_meaning(generate):
    made = generate.schema()
    bare = [
        f"{name}.{key}"
        for name, model in made["$defs"].items()
        for key, field in model.get("properties", {}).items()
        if not field.get("description")
    ]
    assert bare == []


def _anchor(heading):
    return re.sub(r"[^\w\- ]", "", heading.strip().lower()).replace(" ", "-")


@pytest.mark.parametrize(
    "page", sorted(p.relative_to(ROOT).as_posix() for p in ROOT.glob("**/*.md") if ".venv" not in p.parts)
)
def test_links_lead_somewhere(page):
    text = (ROOT / page).read_text(encoding="utf-8")
    for target in re.findall(r"\]\(([^)\s]+)\)", re.sub(r"```.*?```", "", text, flags=re.S)):
        if re.match(r"[a-z]+:", target):
            continue
        path, _, anchor = target.partition("#")
        file = (ROOT / page).parent / path if path else ROOT / page
        assert file.exists(), f"{page}: {target}"
        if anchor:
            headings = re.findall(r"^#+ (.*)$", file.read_text(encoding="utf-8"), flags=re.M)
            assert anchor in {_anchor(h) for h in headings}, f"{page}: {target}"
