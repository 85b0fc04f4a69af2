"""Size and digest of input files, so that a result says what it was made of."""

from __future__ import annotations

import hashlib
from pathlib import Path
from typing import Any


def file_facts(path: Path, *, hash_below: int | None = None) -> dict[str, Any]:
    """``bytes`` and ``sha256`` of a file.

    Args:
        path: the file.
        hash_below: files of this many bytes or more are not hashed; None hashes every file.

    Returns:
        both None where the path is not a plain file.
    """
    try:
        if not path.is_file():
            return {"bytes": None, "sha256": None}
        size = path.stat().st_size
        if hash_below is not None and size >= hash_below:
            return {"bytes": size, "sha256": None}
        with open(path, "rb") as file:
            return {"bytes": size, "sha256": hashlib.file_digest(file, "sha256").hexdigest()}
    except OSError:
        return {"bytes": None, "sha256": None}
