"""Draws the pictures of the README from the samples, small enough for the repository.

Run ``python docs/pictures.py`` after a change of the maps or the samples, and look at them.
"""

from __future__ import annotations

import tempfile
from pathlib import Path

from PIL import Image

from earthwork.reporting.runner import run_command
from earthwork.site import load_site

ROOT = Path(__file__).parents[1]
PICTURES = {
    "larkspur-campus": ("balance_map.png", "balance_curve.png", "water_days.png"),
    "cooper-ridge": ("balance_map.png",),
}
_WIDTH = 1200


def main() -> None:
    """Draw all pictures into docs/pictures."""
    for sample, names in PICTURES.items():
        with tempfile.TemporaryDirectory() as folder:
            for command in dict.fromkeys(name.split("_")[0] for name in names):
                run_command(command, load_site(ROOT / "samples" / sample / "site.toml"), out=folder)
            for name in names:
                target = ROOT / "docs" / "pictures" / f"{sample}-{name.replace('_', '-')}"
                small(Path(folder) / name, target)
                print(f"wrote {target.relative_to(ROOT)}: {target.stat().st_size // 1000} kB")


def small(source: Path, target: Path) -> None:
    """A picture at most 1200 pixels wide, in 128 colours."""
    with Image.open(source) as picture:
        plain = picture.convert("RGB")
        if plain.width > _WIDTH:
            plain = plain.resize((_WIDTH, round(plain.height * _WIDTH / plain.width)), Image.Resampling.LANCZOS)
        plain.quantize(128, dither=Image.Dither.NONE).save(target, optimize=True)


if __name__ == "__main__":
    main()
