"""Lines with elevations as DXF, each on the layer of its kind, for those who build from them."""

from __future__ import annotations

import warnings
from collections.abc import Sequence
from pathlib import Path
from typing import Any

import numpy as np

from earthwork.errors import OutputError


def write_lines(path: Path, lines: Sequence[Any], layers: Sequence[str]) -> None:
    """Write lines as 3D polylines.

    Args:
        path: the file.
        lines: shapely LineStrings with elevations.
        layers: name of the layer of each: letters, digits, blanks and hyphens.

    Raises:
        OutputError: the file cannot be written.
    """
    import pyogrio
    import pyogrio.raw
    import shapely

    try:
        with warnings.catch_warnings():
            # DXF knows no coordinate reference system.
            warnings.filterwarnings("ignore", message="'crs' was not provided")
            pyogrio.raw.write(
                path,
                geometry=shapely.to_wkb(np.asarray(lines, dtype=object)),
                field_data=[np.asarray(layers, dtype=object)],
                fields=["Layer"],
                driver="DXF",
                geometry_type="LineString Z",
                crs=None,
            )
    except pyogrio.errors.DataSourceError as error:
        raise OutputError(f"{path.name}: cannot be written: {error}") from error
