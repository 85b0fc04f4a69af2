"""A 3D model as binary glTF: surfaces as meshes with a colour at each vertex."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from pathlib import Path
from typing import Any

import numpy as np


@dataclass(frozen=True)
class ModelSurface:
    """A surface of the model.

    Attributes:
        name: of the node.
        vertices: (n, 3) east, north, up [m], from the model's origin.
        triangles: (m, 3) indices, facing up.
        colors: (n, 4) red, green, blue, alpha, 0 to 255.
    """

    name: str
    vertices: np.ndarray
    triangles: np.ndarray
    colors: np.ndarray


def write_glb(path: Path, surfaces: Sequence[ModelSurface], facts: dict[str, Any]) -> None:
    """Write the model: y is up, x is east, z is south, metres; ``facts`` are told in the file."""
    import trimesh

    scene = trimesh.Scene(metadata=dict(facts))
    for surface in surfaces:
        if not len(surface.triangles):
            continue
        east, north, up = surface.vertices.T
        mesh = trimesh.Trimesh(
            vertices=np.column_stack([east, up, -north]),
            faces=surface.triangles,
            vertex_colors=surface.colors.astype(np.uint8),
            process=False,
        )
        scene.add_geometry(mesh, node_name=surface.name, geom_name=surface.name)
    path.write_bytes(trimesh.exchange.gltf.export_glb(scene))
