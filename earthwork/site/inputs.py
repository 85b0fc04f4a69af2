"""Which files a site names."""

from __future__ import annotations

from collections.abc import Iterator
from typing import Any

from pydantic import BaseModel

from earthwork.site.model import SiteModel
from earthwork.site.values import InputFile


def named_files(model: SiteModel) -> list[tuple[str, str]]:
    """(key, file name) of every file that a site names, in the order of the site file; a name may come again.

    >>> ground = {"existing": "a.tif", "finished": {"file": "b.tif"}}
    >>> named_files(SiteModel.model_validate({"site": {"name": "x", "units": "metric"}, "ground": ground}))
    [('ground.existing.file', 'a.tif'), ('ground.finished.file', 'b.tif')]
    """
    return list(_files(model, ""))


def _files(value: Any, key: str) -> Iterator[tuple[str, str]]:
    if isinstance(value, BaseModel):
        for name, field in type(value).model_fields.items():
            inner = getattr(value, name)
            path = f"{key}.{name}" if key else name
            if isinstance(inner, str):
                if _is_file(field):
                    yield path, inner
            else:
                yield from _files(inner, path)
    elif isinstance(value, dict):
        for name, inner in value.items():
            yield from _files(inner, f"{key}.{name}")
    elif isinstance(value, tuple):
        for i, inner in enumerate(value):
            yield from _files(inner, f"{key}[{i + 1}]")


def _is_file(field: Any) -> bool:
    """Whether a field is of :data:`earthwork.site.values.FileName`, alone or among the members of a union."""
    return any(isinstance(mark, InputFile) for mark in field.metadata) or any(
        isinstance(mark, InputFile)
        for member in getattr(field.annotation, "__args__", ())
        for mark in getattr(member, "__metadata__", ())
    )
