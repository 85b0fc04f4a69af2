"""The JSON document that every command gives: its envelope, its input files, and the result in SI."""

from __future__ import annotations

import json
import math
from typing import Any

import earthwork
from earthwork.files.hashing import file_facts
from earthwork.results import Result
from earthwork.site import Site
from earthwork.site.inputs import named_files

#: Above this size, only the commands that are asked for it spend the time to hash a file.
LARGEST_HASHED_BYTES = 64_000_000
#: Commands that hash every file.
_HASH_ALL = ("check", "report")


def document(command: str, site: Site, result: Result) -> dict[str, Any]:
    """The JSON document of a result.

    Args:
        command: name of the command.
        site: what it ran on.
        result: what it gave.

    Returns:
        ``command``, ``version``, ``site``, ``display_units``, ``inputs``, ``warnings`` and ``result``; numbers
        that are not finite are None.
    """
    return {
        "command": command,
        "version": earthwork.__version__,
        "site": site.name,
        "display_units": site.units.name,
        "inputs": inputs(site, hash_all=command in _HASH_ALL),
        "warnings": [{"code": w.code, "message": w.message} for w in result.warnings],
        "result": clean(result.to_dict()),
    }


def inputs(site: Site, *, hash_all: bool = False) -> list[dict[str, Any]]:
    """Every file that the site names, the site file first, each once: ``path``, ``bytes``, ``sha256``.

    ``sha256`` is None for files of 64 MB or more unless ``hash_all``. Both are None for what is not a plain
    file, such as a folder that holds a data set.
    """
    files = {site.path.name: site.path} if site.path else {}
    for _, name in named_files(site.model):
        files.setdefault(name, site.resolve(name))
    most = None if hash_all else LARGEST_HASHED_BYTES
    return [{"path": name, **file_facts(path, hash_below=most)} for name, path in files.items()]


def clean(value: Any) -> Any:
    """Plain JSON values: numpy numbers become numbers, tuples lists, and what is not finite None.

    >>> clean({"a": float("nan"), "b": (1, 2.0), "c": None})
    {'a': None, 'b': [1, 2.0], 'c': None}
    """
    if isinstance(value, dict):
        return {str(k): clean(v) for k, v in value.items()}
    if isinstance(value, list | tuple):
        return [clean(v) for v in value]
    if hasattr(value, "tolist"):
        return clean(value.tolist())
    if isinstance(value, float):
        if not math.isfinite(value):
            return None
        return value + 0.0  # −0.0 becomes 0.0
    return value


def to_json(content: dict[str, Any]) -> str:
    """The text of a document; the same document gives the same bytes."""
    return json.dumps(content, ensure_ascii=False, indent=2, allow_nan=False) + "\n"
