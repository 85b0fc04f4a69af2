"""Reads a site file: TOML in, a checked :class:`Site` out, every fault in one message."""

from __future__ import annotations

import difflib
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

_UNION_TAGS = {"raster", "level", "plane", "constrained-str", "function-before", "literal"}


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
        if foot_of is None:
            from earthwork.files.rasters import foot_of_site as foot_of
        foot = foot_of(document, directory)
    units = UnitSystem("us" if system == "us" else "metric", foot)
    where = str(path) if path else "site"
    try:
        model = SiteModel.model_validate(document, context={"units": units})
    except ValidationError as error:
        raise SiteFileError(_message(where, [_fault(e, document) for e in error.errors()])) from None
    faults = list(cross_faults(model))
    if faults:
        raise SiteFileError(_message(where, faults))
    return Site(model, units, directory, path)


def _message(where: str, faults: list[str]) -> str:
    count = "1 fault" if len(faults) == 1 else f"{len(faults)} faults"
    return f"{where}: {count}\n" + "\n".join(f"  {fault}" for fault in faults)


def _fault(error: ErrorDetails, document: dict[str, Any]) -> str:
    """One line for one fault: the key, the value, the rule, and the nearest known key."""
    location = [part for part in error["loc"] if part not in _UNION_TAGS or _holds(document, error["loc"], part)]
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
    elif not rule.startswith(("it must", "give ")):
        rule = rule[0].lower() + rule[1:]
    value = error["input"]
    if isinstance(value, dict):
        return f"{key}: {rule}"
    return f"{key} = {_shown(value)}: {rule}"


def _holds(document: Any, location: tuple[int | str, ...], part: int | str) -> bool:
    """Whether a part of a location that looks like a union tag is really a key of the document."""
    here = document
    for step in location:
        if isinstance(here, dict) and step in here:
            if step == part:
                return True
            here = here[step]
        elif isinstance(here, list) and isinstance(step, int) and step < len(here):
            here = here[step]
    return False


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
