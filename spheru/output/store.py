"""A volume of labels on the disk, chunk by chunk: an OME-Zarr 0.5 image of labels.

The metadata are written by hand: axes, the edge of a pixel in µm, that the values are labels, and
what makes a frame again. Which chunks are done is kept in `spheru.output.unfinished`.
"""

from __future__ import annotations

import os
from decimal import Decimal
from pathlib import Path
from typing import TYPE_CHECKING, Any, Final

import numpy as np

from spheru.errors import DataError, MissingExtraError
from spheru.image.formats import frame_notes
from spheru.image.frame import Frame

if TYPE_CHECKING:
    from numpy.typing import NDArray

__all__ = ["CHUNK", "LabelStore", "require_zarr"]

CHUNK: Final = 128  # pixels along the edge of a chunk: whole blocks of the engine, 8 MB
_ARRAY: Final = "0"  # full resolution, and the only one


class LabelStore:
    """Labels of a volume in a folder; any part can be written and read.

    Parameters
    ----------
    path : path-like
        The folder, by custom ``.ome.zarr``; it must hold a store, see `create`.

    Raises
    ------
    DataError
        If there is no store of this program.
    MissingExtraError
        If zarr is not installed.
    """

    def __init__(self, path: str | Path) -> None:
        self.path = Path(path)
        zarr = require_zarr()
        try:
            group = zarr.open_group(self.path, mode="r+")
            self._array = group[_ARRAY]
            notes = group.attrs["spheru"]
            names = [notes["edges"][axis] for axis in "zyx"]
            self.frame = Frame(
                shape=self._array.shape,
                pixel=notes["pixel_m"],
                origin=tuple(notes["corner_m"]),
                periodic=tuple(name == "periodic" for name in names),
                closed=tuple(name == "closed" for name in names),
            )
        except (OSError, LookupError, TypeError, ValueError) as fault:
            raise DataError(
                f"{path}: expected labels of a volume as spheru stores them (OME-Zarr), found "
                f"none ({fault})"
            ) from fault

    @classmethod
    def create(cls, path: str | Path, frame: Frame, *, chunk: int = CHUNK) -> LabelStore:
        """Make an empty store.

        Parameters
        ----------
        path : path-like
            The folder.
        frame : Frame
            The grid, of three axes.
        chunk : int, optional
            Pixels along the edge of a chunk.

        Returns
        -------
        store : LabelStore
            The store, all labels 0.

        Raises
        ------
        MissingExtraError
            If zarr is not installed.
        """
        zarr = require_zarr()
        group = zarr.create_group(Path(path), attributes=_attributes(frame))
        group.create_array(
            _ARRAY,
            shape=frame.shape,
            chunks=tuple(min(chunk, n) for n in frame.shape),
            dtype="<u4",
            compressors=zarr.codecs.ZstdCodec(level=1),  # level 3 gave no smaller files
            fill_value=0,
            dimension_names=("z", "y", "x"),
            config={"write_empty_chunks": True},  # a chunk of melt is a finished chunk as well
        )
        return cls(path)

    @property
    def chunk(self) -> tuple[int, ...]:
        """Edges of a chunk in pixels."""
        return tuple(self._array.chunks)

    def read(self, window: tuple[slice, ...]) -> NDArray[np.uint32]:
        """Return the labels of a part of the volume.

        Parameters
        ----------
        window : tuple of slice
            One slice per axis.

        Returns
        -------
        labels : ndarray of uint32
            The part, in memory.
        """
        return np.asarray(self._array[window], dtype=np.uint32)

    def write(self, window: tuple[slice, ...], labels: NDArray[np.uint32]) -> None:
        """Write one chunk, safely on the disk before this returns.

        Parameters
        ----------
        window : tuple of slice
            The chunk, one slice per axis.
        labels : ndarray of uint32
            Its labels.

        Raises
        ------
        OSError
            If the disk refuses.
        """
        self._array[window] = labels
        with self.chunk_file(window).open("rb+") as stream:
            os.fsync(stream.fileno())

    def chunk_file(self, window: tuple[slice, ...]) -> Path:
        """Return where a chunk stands."""
        place = (str(part.start // edge) for part, edge in zip(window, self.chunk, strict=True))
        return self.path.joinpath(_ARRAY, "c", *place)


def require_zarr() -> Any:
    """Return the library behind the store.

    Raises
    ------
    MissingExtraError
        If it is not installed.
    """
    try:
        import zarr  # noqa: PLC0415 (an extra, and half a second that other runs need not spend)
    except ImportError:
        raise MissingExtraError("a map larger than memory", "zarr") from None
    return zarr


def _attributes(frame: Frame) -> dict[str, Any]:
    edge = float(Decimal(repr(frame.pixel)).scaleb(6))
    scale = [{"type": "scale", "scale": [edge] * 3}]
    return {
        "ome": {
            "version": "0.5",
            "multiscales": [
                {
                    "name": "labels of spherulites",
                    "axes": [
                        {"name": name, "type": "space", "unit": "micrometer"} for name in "zyx"
                    ],
                    "datasets": [{"path": _ARRAY, "coordinateTransformations": scale}],
                }
            ],
            "image-label": {"properties": [{"label-value": 0, "class": "not crystallised"}]},
        },
        "spheru": {**frame_notes(frame), "pixel_m": frame.pixel},
    }
