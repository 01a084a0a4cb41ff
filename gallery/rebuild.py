"""Rebuild every picture of the gallery: ``python gallery/rebuild.py``.

Each settings file in this folder, and the ones of `configs/` named below, is run; the pictures that
belong in the gallery are copied here under the name of the settings.
"""

from __future__ import annotations

import shutil
import subprocess
import sys
import tempfile
from pathlib import Path
from typing import Final

import spheru
from spheru.output.plots.material import save_material

HERE: Final = Path(__file__).parent
CONFIGS: Final = HERE.parent / "configs"
LARGEST: Final = 400 * 1024  # bytes of a picture

# settings in configs/ -> pictures of the run that are kept
PICTURES: Final = {
    "first-map": ("map", "sizes", "conversion"),
    "polypropylene-1-K-per-min": ("map",),
    "polypropylene-100-K-per-min": ("map",),
    "dosed-1000-ppm": ("map", "conversion"),
    "block": ("map",),
    "film": ("map",),
    "incomplete-quench": ("map",),
}
# series in configs/series/ -> pictures that are kept
SERIES: Final = {
    "cooling-rates": ("against-rate", "maps"),
    "doses": ("against-dose",),
}
MATERIALS: Final = ("isotactic-polypropylene-alpha", "poly-l-lactide")


def main() -> None:
    """Run the settings and keep their pictures."""
    with tempfile.TemporaryDirectory() as folder:
        for name, kinds in PICTURES.items():
            run = Path(folder) / name
            spheru.save_run(spheru.grow(spheru.read_settings(CONFIGS / f"{name}.toml")), run)
            for kind in kinds:
                shutil.copyfile(run / f"{kind}.png", HERE / f"{name}-{kind}.png")
        for name, kinds in SERIES.items():
            run = Path(folder) / name
            settings = CONFIGS / "series" / f"{name}.toml"
            command = [sys.executable, "-m", "spheru", "series", settings, "-o", run]
            subprocess.run(command, check=True)  # noqa: S603 (our own program)
            for kind in kinds:
                shutil.copyfile(run / f"{kind}.png", HERE / f"{name}-{kind}.png")
    for name in MATERIALS:
        save_material(spheru.read_record(name), HERE / f"{name}.png")
    for picture in sorted(HERE.glob("*.png")):
        size = picture.stat().st_size
        if size > LARGEST:
            raise SystemExit(f"{picture.name} is larger than {LARGEST // 1024} KiB")


if __name__ == "__main__":
    main()
