"""Reads a site file: TOML in, a checked :class:`Site` out, every fault in one message."""

from __future__ import annotations

import copy
import difflib
import re
import tomllib
from collections.abc import Callable, Iterator
from dataclasses import dataclass
from pathlib import Path
from typing import Any

from pydantic import ValidationError
from pydantic_core import ErrorDetails

from earthwork.errors import SiteFileError
from earthwork.site.model import Section, SiteModel
from earthwork.site.rules import cross_faults
from earthwork.units import FOOT_M, UnitSystem

_SURFACE_KINDS = ("raster", "level", "plane")


@dataclass(frozen=True)
class Site:
    """A checked site: its model (all quantities SI), its units, and the folder that its paths are relative to."""

    model: SiteModel
    units: UnitSystem
    directory: Path
    path: Path | None = None

    @property
    def name(self) -> str:
        return self.model.site.name

    def resolve(self, file: str) -> Path:
        """Path of a file that the site names."""
        return self.directory / file

    @classmethod
    def open(cls, path: str | Path) -> Site:
        """Read and check a site file.

        Raises:
            SiteFileError: not readable, not TOML, or any rule broken; the message lists every fault.
        """
        return load_site(path)


def load_site(path: str | Path, foot_of: Callable[[dict[str, Any], Path], float] | None = None) -> Site:
    """Read and check a site file.

    Args:
        path: the TOML file.
        foot_of: gives the foot of the site [m] from the raw document and its folder (the CRS may say US survey feet);
            default: :func:`earthwork.files.rasters.foot_of_site`.
    """
    path = Path(path)
    try:
        text = path.read_bytes().decode("utf-8-sig")
    except FileNotFoundError:
        raise SiteFileError(f"{path}: no such site file. `earthwork new DIR` writes a starter") from None
    except IsADirectoryError:
        raise SiteFileError(f"{path} is a folder; give the site file in it, such as {path / 'site.toml'}") from None
    except UnicodeDecodeError as error:
        raise SiteFileError(f"{path}: not UTF-8 text ({error.reason} at byte {error.start}); save it as UTF-8") from None
    except OSError as error:
        raise SiteFileError(f"{path}: cannot be read ({error.strerror})") from None
    try:
        document = tomllib.loads(text)
    except tomllib.TOMLDecodeError as error:
        raise SiteFileError(f"{path}: not valid TOML: {error}") from None
    return check_site(document, path.parent, path=path, foot_of=foot_of)


def check_site(
    document: dict[str, Any],
    directory: Path,
    *,
    path: Path | None = None,
    foot_of: Callable[[dict[str, Any], Path], float] | None = None,
) -> Site:
    """Check a site document that is already parsed; see :func:`load_site`."""
    raw = document.get("site")
    system = raw.get("units") if isinstance(raw, dict) else None
    foot = FOOT_M
    if system == "us":
        from earthwork.files.rasters import foot_of_site

        foot = (foot_of or foot_of_site)(document, directory)
    units = UnitSystem("us" if system == "us" else "metric", foot)
    where = str(path) if path else "site"
    model, faults = _validate(document, units)
    if model is None and faults:
        repaired, _ = _validate(_without_faulty(document, units), units)
        more = cross_faults(repaired) if repaired else ()
        faults += [fault for fault in more if not _follows(fault, faults)]
    elif model is not None:
        faults += list(cross_faults(model))
    if faults or model is None:
        raise SiteFileError(_message(where, faults))
    return Site(model, units, directory, path)


def _validate(document: dict[str, Any], units: UnitSystem) -> tuple[SiteModel | None, list[str]]:
    try:
        return SiteModel.model_validate(document, context={"units": units}), []
    except ValidationError as error:
        return None, [_fault(e, document) for e in error.errors()]


def _without_faulty(document: dict[str, Any], units: UnitSystem) -> dict[str, Any]:
    """A copy without the faulty keys, so that the rules between tables can be checked in the same go."""
    rest = copy.deepcopy(document)
    try:
        SiteModel.model_validate(document, context={"units": units})
    except ValidationError as error:
        for fault in error.errors():
            location = _without_tags(fault["loc"], document)
            parent = _at(rest, location[:-1])
            if isinstance(parent, dict):
                parent.pop(location[-1], None)
    return rest


def _follows(fault: str, faults: list[str]) -> bool:
    """Whether a fault only says that a key is missing which was taken out because it is faulty itself."""
    table = re.split(r"[: ]", fault, maxsplit=1)[0]
    return "missing" in fault and any(re.match(re.escape(table) + r"[.: =]", other) for other in faults)


def _message(where: str, faults: list[str]) -> str:
    count = "1 fault" if len(faults) == 1 else f"{len(faults)} faults"
    return f"{where}: {count}\n" + "\n".join(f"  {fault}" for fault in faults)


def _fault(error: ErrorDetails, document: dict[str, Any]) -> str:
    """One line for one fault: the key, the value, the rule, and the nearest known key."""
    location = _without_tags(error["loc"], document)
    key = _dotted(location)
    kind = error["type"]
    if kind == "extra_forbidden":
        known = _known_keys(location[:-1])
        close = difflib.get_close_matches(str(location[-1]), known, n=1, cutoff=0.5)
        hint = f"; did you mean {close[0]!r}?" if close else f"; known here: {', '.join(sorted(known))}"
        return f"{key}: unknown key{hint}"
    if kind == "missing":
        present = _at(document, location[:-1])
        near = difflib.get_close_matches(str(location[-1]), list(present) if isinstance(present, dict) else [], n=1)
        return f"{key}: missing; it is required" + (f" (is {near[0]!r} meant for it?)" if near else "")
    rule = error["msg"].removeprefix("Value error, ")
    if kind in ("literal_error", "enum"):
        rule = "it must be " + error.get("ctx", {}).get("expected", rule)
    elif kind in ("string_pattern_mismatch", "string_too_short"):
        rule = "it must not be blank"
    elif rule.startswith("Input should be"):
        rule = "it must be" + rule.removeprefix("Input should be")
    elif not rule.startswith(("it must", "give ")):
        rule = rule[0].lower() + rule[1:]
    value = error["input"]
    if isinstance(value, dict):
        return f"{key}: {rule}"
    return f"{key} = {_shown(value)}: {rule}"


def _without_tags(location: tuple[int | str, ...], document: Any) -> list[int | str]:
    """A location without the names of union members, which stand in it though they are no keys of the document."""
    kept: list[int | str] = []
    for i, step in enumerate(location):
        is_tag = step in _SURFACE_KINDS and len(location) > i + 1
        if is_tag and (step == "raster" or location[i + 1] == step or step not in (_at(document, kept) or ())):
            continue
        kept.append(step)
    return kept


def _at(document: Any, location: list[int | str]) -> Any:
    for step in location:
        try:
            document = document[step]
        except (KeyError, IndexError, TypeError):
            return None
    return document


def _dotted(location: list[int | str]) -> str:
    """``section[2].thickness`` for ("section", 1, "thickness"): tables are counted from 1, as people do."""
    text = ""
    for part in location:
        text += f"[{part + 1}]" if isinstance(part, int) else f".{part}" if text else str(part)
    return text


def _shown(value: Any) -> str:
    if isinstance(value, bool):
        return str(value).lower()
    text = f'"{value}"' if isinstance(value, str) else str(value)
    return text if len(text) <= 80 else text[:77] + "..."


def _known_keys(location: list[int | str]) -> list[str]:
    """The keys that the model knows at a location of the document."""
    models: list[type[Section]] = [SiteModel]
    for step in location:
        if isinstance(step, int):
            continue
        found: list[type[Section]] = []
        for model in models:
            field = model.model_fields.get(str(step))
            found += list(_models_in(field.annotation)) if field else []
        models = found or models
    return sorted({name for model in models for name in model.model_fields})


def _models_in(annotation: Any) -> Iterator[type[Section]]:
    if isinstance(annotation, type) and issubclass(annotation, Section):
        yield annotation
    for inner in getattr(annotation, "__args__", ()):
        yield from _models_in(inner)


def site_from_files(
    existing: str | Path,
    finished: str | Path,
    *,
    limits: str | Path | None = None,
    zones: str | Path | None = None,
    zone_name: str | None = None,
    nodata: float | None = None,
    units: str = "metric",
) -> Site:
    """A site of two rasters without a site file; paths are relative to the current folder.

    Args:
        existing, finished: raster files.
        limits: polygons; only ground inside counts.
        zones: polygons to report by.
        zone_name: attribute with the name of a zone.
        nodata: value of missing data in both rasters, beside what they tag.
        units: "metric" or "us".

    Raises:
        SiteFileError: unknown units, or a zone name without zones.
    """
    if zone_name is not None and zones is None:
        raise SiteFileError(f'zone name is "{zone_name}", but no zones are given; give their file too')
    ground: dict[str, Any] = {"existing": {"file": str(existing)}, "finished": {"file": str(finished)}}
    if nodata is not None:
        for surface in ground.values():
            surface["nodata"] = float(nodata)
    if limits is not None:
        ground["limits"] = str(limits)
    name = f"{Path(existing).stem} to {Path(finished).stem}"
    document: dict[str, Any] = {"site": {"name": name, "units": units}, "ground": ground}
    if zones is not None:
        document["zones"] = {"area": str(zones)} | ({"name": zone_name} if zone_name is not None else {})
    return check_site(document, Path())
