"""The options that every command takes, each spelled once."""

from __future__ import annotations

import functools
import inspect
from collections.abc import Callable
from dataclasses import dataclass
from pathlib import Path
from typing import Annotated, Any, get_type_hints

import typer

SiteFile = Annotated[Path, typer.Argument(metavar="SITE", help="The site file, such as site.toml.")]


@dataclass(frozen=True)
class Shared:
    """The shared options of one call."""

    json: bool = False
    out: Path | None = None
    overwrite: bool = False
    quiet: bool = False
    strict: bool = False
    threads: int | None = None


_DECLARED: dict[str, tuple[Any, Any]] = {
    "json": (
        Annotated[bool, typer.Option("--json", help="Print one JSON document, and nothing else, on stdout.")],
        False,
    ),
    "out": (
        Annotated[
            Path | None,
            typer.Option("--out", metavar="DIR", help="Write tables (CSV) and maps (GeoTIFF, GeoPackage, PNG) there."),
        ],
        None,
    ),
    "overwrite": (
        Annotated[bool, typer.Option("--overwrite", help="Replace files of an earlier run in that folder.")],
        False,
    ),
    "quiet": (
        Annotated[bool, typer.Option("--quiet", help="No progress and no list of files on stderr.")],
        False,
    ),
    "strict": (
        Annotated[bool, typer.Option("--strict", help="End with exit code 3 when there is a warning.")],
        False,
    ),
    "threads": (
        Annotated[
            int | None,
            typer.Option("--threads", metavar="N", min=1, help="Threads; the result is the same for any number."),
        ],
        None,
    ),
}


def with_shared(command: Callable[..., None]) -> Callable[..., None]:
    """Give a command the shared options: its parameter ``how: Shared`` is filled from them."""
    hints = get_type_hints(command, include_extras=True)
    own = [
        p.replace(annotation=hints[p.name]) for p in inspect.signature(command).parameters.values() if p.name != "how"
    ]
    extra = [
        inspect.Parameter(name, inspect.Parameter.KEYWORD_ONLY, default=default, annotation=annotation)
        for name, (annotation, default) in _DECLARED.items()
    ]

    @functools.wraps(command)
    def called(**given: Any) -> None:
        how = Shared(**{name: given.pop(name) for name in _DECLARED})
        command(**given, how=how)

    parameters = [p.replace(kind=inspect.Parameter.KEYWORD_ONLY) for p in own] + extra
    called.__signature__ = inspect.Signature(parameters)  # type: ignore[attr-defined]
    called.__annotations__ = {p.name: p.annotation for p in parameters}
    del called.__wrapped__  # type: ignore[attr-defined]
    return called
