"""Messages about paths: what is missing, and the name in the same folder that was probably meant."""

from __future__ import annotations

import difflib
import os
from pathlib import Path

from earthwork.errors import FileError


def is_virtual(path: str | Path) -> bool:
    """True for names that only GDAL understands (``/vsizip/…``, ``/vsimem/…``)."""
    return str(path).startswith("/vsi")


def require_file(path: str | Path, what: str) -> None:
    """Raise a FileError when a path does not exist; the message names the nearest name of its folder.

    Args:
        path: the path; those of GDAL's virtual file systems are not judged here.
        what: what the file is to the user, such as ``"ground.existing"``.
    """
    path = Path(path)
    if is_virtual(path) or path.exists():
        return
    folder = path.parent
    if not folder.is_dir():
        raise FileError(f"{what}: {path}: no such file; its folder {folder} does not exist either")
    names = sorted(entry.name for entry in os.scandir(folder))
    folded = {name.lower(): name for name in names}
    close = difflib.get_close_matches(path.name.lower(), list(folded), n=1, cutoff=0.5)
    hint = f"did you mean {folded[close[0]]!r}?" if close else "paths are relative to the site file's folder"
    raise FileError(f"{what}: {path}: no such file; {hint}")


def nearest(name: str, known: list[str]) -> str:
    """``did you mean 'x'? `` with the list of what there is, for a name that was not found."""
    close = difflib.get_close_matches(name.lower(), [k.lower() for k in known], n=1, cutoff=0.5)
    meant = next((k for k in known if close and k.lower() == close[0]), None)
    listed = ", ".join(known) if known else "none"
    return f"there are: {listed}" + (f". Did you mean {meant!r}?" if meant else "")
