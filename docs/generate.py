"""Writes the parts of docs/ that follow from the code: site-file.md, site.schema.json, commands.md, typical-soils.md.

Run ``python docs/generate.py`` after a change of the models or the commands; ``--check`` only says what is
out of step.
"""

from __future__ import annotations

import json
import sys
from collections.abc import Iterator
from pathlib import Path
from typing import Any

DOCS = Path(__file__).parent
Schema = dict[str, Any]

#: Tables of the site file that are written with double brackets, one for each item.
_NAMED = {"material": "material.NAME"}


def main(arguments: list[str]) -> int:
    """Write the pages, or check them; the exit code."""
    pages = {
        "site.schema.json": schema_text(),
        "site-file.md": site_file(),
        "commands.md": commands(),
        "typical-soils.md": typical_soils(),
    }
    stale = [
        n for n, text in pages.items() if not (DOCS / n).is_file() or (DOCS / n).read_text(encoding="utf-8") != text
    ]
    if "--check" in arguments:
        for name in stale:
            print(f"docs/{name} is out of step with the code: run python docs/generate.py", file=sys.stderr)
        return 1 if stale else 0
    for name in stale:
        (DOCS / name).write_text(pages[name], encoding="utf-8")
        print(f"wrote docs/{name}")
    return 0


# --- the JSON Schema ------------------------------------------------------------------------------


def schema() -> Schema:
    """The JSON Schema of the site file, as editors read it: without nulls, which TOML does not have."""
    from earthwork.site.model import SiteModel

    made = _tidy(SiteModel.model_json_schema())
    return {
        "$schema": "https://json-schema.org/draft/2020-12/schema",
        "title": "earthwork site file",
        **made,
    }


def schema_text() -> str:
    """The schema as text; the units stand in the descriptions, where editors show them."""

    def with_units(node: Any) -> Any:
        if isinstance(node, list):
            return [with_units(n) for n in node]
        if not isinstance(node, dict):
            return node
        node = {k: with_units(v) for k, v in node.items()}
        unit = node.pop("x-unit", None)
        if unit and isinstance(node.get("description"), str):
            node["description"] += f" [{_units(unit)}]"
        return node

    return json.dumps(with_units(schema()), indent=1, ensure_ascii=False) + "\n"


def _tidy(node: Any, inside: str = "") -> Any:
    if isinstance(node, list):
        return [_tidy(n) for n in node]
    if not isinstance(node, dict):
        return node
    names = inside in ("properties", "$defs")
    kept = {}
    for key, value in node.items():
        if not names and (key in ("title", "discriminator") or (key == "default" and value is None)):
            continue
        kept[key] = _tidy(value, "" if names else key)
    if not names and "anyOf" in kept:
        rest = [s for s in kept["anyOf"] if s != {"type": "null"}]
        if len(rest) == 1:
            kept = {**rest[0], **{k: v for k, v in kept.items() if k != "anyOf"}}
        else:
            kept["anyOf"] = rest
    return kept


def _units(pair: list[str]) -> str:
    return pair[0] if pair[0] == pair[1] else f"{pair[0]} or {pair[1]}"


# --- the page of the site file --------------------------------------------------------------------

_HEAD = """\
# The site file

<!-- Written by docs/generate.py from the models in earthwork/site; change those, not this page. -->

One TOML file describes a site. `earthwork new DIR` writes a commented one that runs; `earthwork check
site.toml` lists every fault of yours in one message. File names are relative to the site file. Unknown keys
are an error that names the closest known key. Every table but `[site]` and `[ground]` may be left out; a
command that needs a missing one says which.

**Numbers** are in the units of `site.units`; a text carries its own unit and wins: `"8 in"`, `"150 mm"`,
`"120 lb/ft3"`. Below, *m or ft* means metres in a metric site and feet in a US one. Feet are international
feet, unless the coordinate reference system of the surfaces is in US survey feet. Percentages are numbers
such as 12, never fractions.

**A surface** is a file name, or one of the tables under [surfaces](#surfaces). A level or a plane has the
extent of the other surface. **An area** is a file name of polygons, or a table under [areas](#areas).

**In an editor**: [site.schema.json](site.schema.json) is a JSON Schema of this page. Editors that know JSON
Schema for TOML complete and check the file when its first line is `#:schema path/to/site.schema.json`.
"""


def site_file() -> str:
    """The reference of the site file."""
    made = schema()
    parts = [_HEAD]
    for name, field in made["properties"].items():
        parts.append(_section(made, name, field))
    for title, models in (
        ("Surfaces", ("RasterSurface", "LevelSurface", "PlaneSurface", "Plane")),
        ("Areas", ("AreaSpec",)),
    ):
        parts.append(f"## {title}\n")
        for model in models:
            definition = made["$defs"][model]
            parts.append(f"{definition.get('description', '')}\n\n{_keys(made, definition)}\n")
    return "\n".join(parts)


def _section(made: Schema, name: str, field: Schema) -> str:
    model, several = _model(made, field)
    path = _NAMED.get(name, name)
    title = f"`[[{path}]]`" if several else f"`[{path}]`"
    text = [f"## {title}\n", f"{model.get('description', field.get('description', ''))}\n", _keys(made, model) + "\n"]
    for inner_path, inner in _inner(made, path, model):
        text.append(f"### `{inner_path}`\n")
        text.append(f"{inner.get('description', '')}\n")
        text.append(_keys(made, inner) + "\n")
    return "\n".join(text)


def _model(made: Schema, field: Schema) -> tuple[Schema, bool]:
    """The table that a field holds, and whether there can be several of it."""
    if "additionalProperties" in field and isinstance(field["additionalProperties"], dict):
        return _resolve(made, field["additionalProperties"]), False
    if field.get("type") == "array":
        return _resolve(made, field["items"]), True
    return _resolve(made, field), False


def _resolve(made: Schema, node: Schema) -> Schema:
    return made["$defs"][node["$ref"].rsplit("/", 1)[1]] if "$ref" in node else node


_SHARED = ("RasterSurface", "LevelSurface", "PlaneSurface", "AreaSpec")


def _inner(made: Schema, path: str, model: Schema) -> Iterator[tuple[str, Schema]]:
    """The tables inside a table, deeper ones after the one that they are in."""
    for name, field in model.get("properties", {}).items():
        item = field.get("items", {}) if field.get("type") == "array" else field
        if "$ref" not in item or item["$ref"].rsplit("/", 1)[1] in _SHARED:
            continue
        inner = _resolve(made, item)
        inner_path = f"{path}.{name}" + ("[]" if field.get("type") == "array" else "")
        yield inner_path, inner
        yield from _inner(made, inner_path, inner)


def _keys(made: Schema, model: Schema) -> str:
    required = model.get("required", [])
    rows = ["| key | value | default | meaning |", "| --- | --- | --- | --- |"]
    for name, field in model.get("properties", {}).items():
        default = "**required**" if name in required else _default(field)
        rows.append(f"| `{name}` | {_cell(_kind(field))} | {default} | {_cell(field.get('description', ''))} |")
    return "\n".join(rows)


def _cell(text: str) -> str:
    return text.replace("|", "\\|").replace("\n", " ")


def _default(field: Schema) -> str:
    if "default" not in field or field["default"] in ({}, []):
        return ""
    value = field["default"]
    if isinstance(value, dict):
        return ""
    shown = f"`{json.dumps(value, ensure_ascii=False)}`"
    unit = field.get("x-unit")
    return f"{shown} {unit[0]}" if unit and value and unit[0] != "%" else shown


def _kind(field: Schema) -> str:
    """What a value is, in words."""
    if "x-unit" in field:
        return f"number, {_units(field['x-unit'])}"
    if "enum" in field:
        return ", ".join(f'`"{v}"`' for v in field["enum"])
    if "const" in field:
        return f'`"{field["const"]}"`'
    if "$ref" in field:
        model = field["$ref"].rsplit("/", 1)[1]
        return {"AreaSpec": "[area](#areas)"}.get(model, "table")
    if "anyOf" in field:
        refs = [s.get("$ref", "").rsplit("/", 1)[-1] for s in field["anyOf"]]
        if "RasterSurface" in refs:
            return "[surface](#surfaces)"
        if "AreaSpec" in refs:
            return "[area](#areas)"
        return " or ".join(dict.fromkeys(_kind(s) for s in field["anyOf"]))
    if field.get("type") == "array":
        if "prefixItems" in field:
            kinds = dict.fromkeys(_kind(s) for s in field["prefixItems"])
            return f"`[a, b]`, each {' / '.join(kinds)}"
        return f"list of {_plural(_kind(field['items']))}"
    if field.get("type") == "object":
        return "table"
    return _simple(field)


def _simple(field: Schema) -> str:
    kind = {"string": "text", "integer": "whole number", "number": "number", "boolean": "`true` or `false`"}[
        field["type"]
    ]
    low, high = field.get("minimum"), field.get("maximum")
    if "exclusiveMinimum" in field:
        kind += f", over {field['exclusiveMinimum']:g}"
    if low is not None and high is not None:
        return f"{kind}, {low:g} to {high:g}"
    if low is not None:
        return f"{kind}, {low:g} or more"
    return f"{kind}, at most {high:g}" if high is not None else kind


def _plural(kind: str) -> str:
    return {"table": "tables", "text": "texts"}.get(kind, kind)


# --- the page of the commands ---------------------------------------------------------------------

_COMMANDS_HEAD = """\
# The commands

<!-- Written by docs/generate.py from the commands' own help; change cli/commands.py, not this page. -->

The result goes to stdout, every number with its unit; progress and warnings go to stderr. With `--json`,
stdout has one JSON document in SI units and nothing else. Files named by `--out` appear whole or not at
all; see [outputs.md](outputs.md).

Exit codes: 0 done · 2 bad input, bad usage, or no room to write · 3 a warning, with `--strict`, after the
result · 130 interrupted. Anything else is a bug.
"""


def typical_soils() -> str:
    """The page of typical values by soil type."""
    from earthwork.soils.typical import TYPICAL, Range

    def span(value: Range | None) -> str:
        return "–" if value is None else f"{value.low:g} to {value.high:g}"

    lines = [
        "# Typical values by soil type",
        "",
        'The last resort: `typical = "lean clay"` in a material fills what was not tested with the middle of a range. Each use',
        "is a warning, is listed in `assumed`, and carries the whole range into the uncertainty. Natural "
        "dry densities and specific",
        "gravities are after [DAS](sources.md), compaction figures (standard effort) after "
        "[NAVFAC-DM7](sources.md), swell and the",
        "shrink of weathered rock after [FM-5-434](sources.md) with the range of other handbooks; all from "
        "memory. The shrink of blasted",
        "rock was read in [UFC-3-220-20](sources.md); the compaction figures agree with those that were read in "
        "[FHWA-NHI-05-037](sources.md),",
        "table 5-18, but for the optimum of sand, whose range holds both. Densities in kg/m³, the rest in percent; shrink "
        "is of bank volume, negative for",
        "bulking.",
        "",
        "| soil | groups | grains | bank dry density | swell | maximum | optimum | shrink |",
        "| --- | --- | --- | --- | --- | --- | --- | --- |",
    ]
    for soil in TYPICAL.values():
        spans = (
            soil.specific_gravity, soil.bank_dry_density_kg_m3, soil.swell_percent, soil.max_dry_density_kg_m3,
            soil.optimum_water_content_percent, soil.shrink_percent_of_bank,
        )  # fmt: skip
        lines.append(f"| {soil.name} | {' '.join(soil.symbols) or '–'} | " + " | ".join(map(span, spans)) + " |")
    return "\n".join(lines) + "\n"


def commands() -> str:
    """The reference of the commands."""
    import typer
    from earthwork_cli.commands import app

    group: Any = typer.main.get_command(app)
    parts = [_COMMANDS_HEAD]
    for name, command in group.commands.items():
        words = " ".join(_usage(p) for p in command.params if not p.opts[0].startswith("-"))
        parts.append(f"## earthwork {name}\n")
        parts.append(f"```\nearthwork {name} {words} [OPTIONS]\n```\n")
        parts.append(f"{(command.help or '').strip()}\n")
        rows = [f"| `{_spelled(p)}` | {_cell(p.help or '')} |" for p in command.params if p.help]
        parts.append("\n".join(["| | |", "| --- | --- |", *rows]) + "\n")
    return "\n".join(parts)


def _usage(parameter: Any) -> str:
    return parameter.metavar if parameter.required else f"[{parameter.metavar}]"


def _spelled(parameter: Any) -> str:
    if not parameter.opts[0].startswith("-"):
        return parameter.metavar
    value = "" if parameter.is_flag else f" {parameter.metavar}"
    return parameter.opts[0] + value.replace("|", "\\|")


if __name__ == "__main__":
    sys.exit(main(sys.argv[1:]))
