"""Label images from any file that a laboratory has: TIFF, PNG, .npy, OME-Zarr, a run's folder.

Labels in, never pictures of light: those must be segmented first. A scale is never guessed.
"""

from __future__ import annotations

import math
import struct
from pathlib import Path
from typing import TYPE_CHECKING, Any, Final

import numpy as np
from PIL import Image

from spheru.errors import DataError, MissingExtraError
from spheru.image import formats
from spheru.image.formats import any_size, common_edge, labels_on_frame, refuse_claim

if TYPE_CHECKING:
    from collections.abc import Mapping

    from spheru.image.label_image import LabelImage

__all__ = ["read_labels"]

_RUN: Final = "labels.ome.tif"
_ZARR: Final = ("zarr.json", ".zgroup", ".zattrs")
_TIFF: Final = (b"II*\0", b"MM\0*", b"II+\0", b"MM\0+")
_PNG: Final = b"\x89PNG\r\n\x1a\n"
_NPY: Final = b"\x93NUMPY"
_POWER: Final = {
    "meter": 0,
    "centimeter": -2,
    "millimeter": -3,
    "micrometer": -6,
    "nanometer": -9,
    "picometer": -12,
}
_PNG_KINDS: Final = {2: "RGB", 3: "palette", 4: "grey with transparency", 6: "RGBA"}


def read_labels(
    path: str | Path, *, pixel: float | None = None, memory: int | None = None
) -> LabelImage:
    """Read a label image; what the file is is told by its first bytes, not by its name.

    Parameters
    ----------
    path : path-like
        A TIFF (also LZW), a grey PNG of 8 or 16 bits, a numpy array (.npy), an OME-Zarr group (0.4
        or 0.5, highest resolution; of a picture with labels, its labels), or the folder of a run.
    pixel : float, optional
        Edge of a pixel [m], > 0, for a file that does not tell.
    memory : int, optional
        Bytes that the labels may take in memory; no limit without it.

    Returns
    -------
    image : LabelImage
        Labels on their frame; the edges are cut but for files that spheru wrote.

    Raises
    ------
    DataError
        If the file cannot be read, holds no labels, or tells no pixel size, unequal ones, or
        another one than `pixel`.
    ValidityError
        If `pixel` is no length above 0.
    CapacityError
        If the labels need more than `memory`; nothing is allocated then.
    MissingExtraError
        If a library for this format is not installed.
    """
    source = Path(path)
    if source.is_dir():
        if (source / _RUN).is_file():
            return formats.read_labels(source / _RUN, pixel=pixel, memory=memory)
        if any((source / name).is_file() for name in _ZARR):
            return _read_zarr(source, pixel, memory)
        raise DataError(
            f"{path}: expected the folder of a run (with {_RUN}) or an OME-Zarr group; "
            "name the label image itself"
        )
    try:
        with source.open("rb") as stream:
            head = stream.read(32)
    except FileNotFoundError:
        raise DataError(f"{path}: there is no such file") from None
    except OSError as fault:
        raise DataError(f"{path}: cannot be read ({fault.strerror or fault})") from None
    if head.startswith(_TIFF):
        return formats.read_labels(source, pixel=pixel, memory=memory)
    if head.startswith(_PNG):
        return _read_png(source, head, pixel, memory)
    if head.startswith(_NPY):
        return _read_npy(source, pixel, memory)
    what = "a JPEG, which does not keep labels" if head.startswith(b"\xff\xd8\xff") else "neither"
    raise DataError(
        f"{path}: expected a label image as TIFF, PNG, .npy, OME-Zarr or a run's folder, "
        f"found {what}; save the labels as TIFF or PNG"
    )


def _read_png(path: Path, head: bytes, pixel: float | None, memory: int | None) -> LabelImage:
    try:
        width, height, bits, colour = struct.unpack(">IIBB", head[16:26])
    except struct.error:
        raise DataError(f"{path}: the file is cut off; save it again") from None
    if colour != 0:
        raise DataError(
            f"{path}: expected labels, one number a pixel, got a colour picture "
            f"({_PNG_KINDS.get(colour, colour)}); a picture must be segmented first, and labels "
            "saved as grey of 16 bits"
        )
    dtype = np.dtype(np.uint16 if bits == 16 else np.uint8)
    refuse_claim(path, (height, width), dtype, path.stat().st_size, memory=memory)
    try:
        with any_size(), Image.open(path) as picture:
            labels = np.asarray(picture)
    except (OSError, ValueError, SyntaxError) as fault:
        raise DataError(
            f"{path}: expected a whole PNG of labels ({fault}); save it again"
        ) from fault
    if 1 < bits < 8:  # Pillow spreads them over 8 bits
        labels = labels // (255 // (2**bits - 1))
    return labels_on_frame(path, labels, None, pixel)


def _read_npy(path: Path, pixel: float | None, memory: int | None) -> LabelImage:
    try:
        with path.open("rb") as stream:
            version = np.lib.format.read_magic(stream)
            read = (
                np.lib.format.read_array_header_1_0
                if version == (1, 0)
                else np.lib.format.read_array_header_2_0
            )
            shape, _, dtype = read(stream)
            held = path.stat().st_size - stream.tell()
    except (OSError, ValueError, EOFError) as fault:
        raise DataError(f"{path}: expected a numpy array of labels ({fault})") from fault
    refuse_claim(path, shape, dtype, None, memory=None)
    if held < dtype.itemsize * math.prod(shape):
        raise DataError(
            f"{path}: the header claims {' x '.join(map(str, shape[::-1]))} pixels of "
            f"{dtype.itemsize} bytes, the file holds {held} bytes; it is cut off: save it again"
        )
    refuse_claim(path, shape, dtype, None, memory=memory)
    return labels_on_frame(path, np.load(path, allow_pickle=False), None, pixel)


def _read_zarr(path: Path, pixel: float | None, memory: int | None) -> LabelImage:
    try:
        import zarr  # noqa: PLC0415 (an extra)
    except ImportError:
        raise MissingExtraError(f"{path}: reading OME-Zarr", "zarr") from None
    try:
        group, name = _labels_group(path, zarr.open_group(str(path), mode="r"))
        scales = _ome(group)["multiscales"][0]
        array = group[scales["datasets"][0]["path"]]
        axes = [dict(axis) for axis in scales["axes"]]
        scale = np.ones(len(axes))
        for holder in (scales, scales["datasets"][0]):
            for change in holder.get("coordinateTransformations", ()):
                if change["type"] == "scale":
                    scale *= np.asarray(change["scale"], dtype=np.float64)
        shape, dtype = tuple(array.shape), np.dtype(array.dtype)
    except (KeyError, IndexError, TypeError, ValueError, OSError) as fault:
        raise DataError(
            f"{path}: expected an OME-Zarr group with axes, scale and labels ({fault!r})"
        ) from fault
    kept = [k for k, axis in enumerate(axes) if axis.get("type", "space") == "space"]
    if len(axes) != len(shape) or any(n > 1 for k, n in enumerate(shape) if k not in kept):
        raise DataError(
            f"{name}: expected one image of labels, got shape {shape} on the axes "
            f"{''.join(str(axis.get('name', '?')) for axis in axes)}; save the labels alone"
        )
    refuse_claim(name, shape, dtype, None, memory=memory)
    try:
        labels = np.asarray(array[...])
    except (OSError, ValueError, RuntimeError) as fault:
        raise DataError(f"{name}: a part of the array cannot be read ({fault})") from fault
    labels = labels.reshape([shape[k] for k in kept])
    if labels.ndim == 3 and labels.shape[0] == 1:
        labels, kept = labels[0], kept[1:]
    edges = {str(axes[k].get("name", k)).upper(): _zarr_edge(axes[k], scale[k]) for k in kept}
    return labels_on_frame(name, labels, common_edge(name, edges), pixel)


def _ome(group: Any) -> Mapping[str, Any]:
    """Return the OME metadata of a group: version 0.5 keeps them under a key of their own."""
    attributes = dict(group.attrs)
    found: Mapping[str, Any] = attributes.get("ome", attributes)
    return found


def _labels_group(path: Path, group: Any) -> tuple[Any, str]:
    """Return the group that holds labels, and its name: that within a picture, or the one given."""
    if "labels" not in group:
        return group, str(path)
    names = list(_ome(group["labels"]).get("labels", ()))
    if len(names) != 1:
        raise DataError(
            f"{path}: expected one label image, found {len(names)} ({', '.join(names)}); name one "
            f"of them, such as {path / 'labels' / names[0] if names else path}"
        )
    return group["labels"][names[0]], str(path / "labels" / names[0])


def _zarr_edge(axis: Mapping[str, Any], scale: float) -> float | None:
    power = _POWER.get(str(axis.get("unit", "")))
    return None if power is None or not scale > 0 else float(f"{scale:.15g}e{power}")
