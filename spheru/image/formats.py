"""Label images as files: OME-TIFF out and in.

The pixel size and the edges travel in the file; how a picture of a map looks is decided in
`spheru.output.plots`.
"""

from __future__ import annotations

import json
import math
import os
import struct
import tempfile
import uuid
import zlib
from decimal import Decimal, InvalidOperation
from pathlib import Path
from typing import TYPE_CHECKING, Any, Final
from xml.etree import ElementTree as ET

import numpy as np

from spheru.errors import DataError, FolderError
from spheru.image.frame import Frame
from spheru.image.label_image import LabelImage

if TYPE_CHECKING:
    from numpy.typing import NDArray

__all__ = ["read_labels", "write_labels"]

_FORMAT: Final = "spheru labels 1"
_NAMESPACE: Final = uuid.uuid5(uuid.NAMESPACE_OID, "spheru")
_LARGEST_CLASSIC: Final = 2**32 - 2**25  # bytes that a TIFF with 32-bit offsets holds for certain
# What the reader raises for damaged files and foreign codecs; its own error is a ValueError.
_DAMAGED: Final = (ValueError, LookupError, TypeError, RuntimeError, struct.error, zlib.error)
_POWER: Final = {"m": 0, "cm": -2, "mm": -3, "µm": -6, "μm": -6, "um": -6, "nm": -9, "pm": -12}


def write_labels(path: str | Path, image: LabelImage, *, identity: str) -> None:
    """Write a label image as OME-TIFF, plane by plane.

    Labels stand as uint16 where the highest fits, else as uint32, deflated without predictor, on
    the axes YX or ZYX. The metadata name the edge of a pixel in µm; the description holds the
    edges of the frame, its corner and, for a section, its height.

    Parameters
    ----------
    path : path-like
        The file, by custom ``.ome.tif``; replaced where it is there, in one step.
    image : LabelImage
        The labels and their frame.
    identity : str
        What the unique identifier of the file is made from (UUID version 5): the same identity
        and labels give the same bytes.

    Raises
    ------
    FolderError
        If the disk or the folder refuses; nothing half written is left then.
    """
    import tifffile  # noqa: PLC0415 (0.2 s that a command which writes no image need not spend)

    frame = image.frame
    planes = image.labels.reshape(-1, *frame.shape[-2:])
    dtype = np.dtype(np.uint16 if int(planes.max()) <= np.iinfo(np.uint16).max else np.uint32)
    axes = "ZYX"[-frame.dimension :]
    metadata: dict[str, Any] = {
        "axes": axes,
        "Creator": "spheru",
        "UUID": str(uuid.uuid5(_NAMESPACE, identity)),
        "Name": "labels of spherulites",
        "Description": json.dumps(_notes(frame)),
    }
    edge = Decimal(repr(frame.pixel)).scaleb(6)
    for axis in axes:
        metadata[f"PhysicalSize{axis}"] = f"{edge:f}"
        metadata[f"PhysicalSize{axis}Unit"] = "µm"
    per_centimetre = 1e-2 / frame.pixel
    target = Path(path)
    temporary: Path | None = None
    try:
        handle, name = tempfile.mkstemp(dir=target.parent, prefix=f".{target.name}.")
        os.close(handle)
        temporary = Path(name)
        tifffile.imwrite(
            temporary,
            (plane.astype(dtype) for plane in planes),
            shape=frame.shape,
            dtype=dtype,
            ome=True,
            bigtiff=image.labels.size * dtype.itemsize > _LARGEST_CLASSIC,
            photometric="minisblack",
            compression="zlib",
            software="spheru",
            resolution=(per_centimetre, per_centimetre),
            resolutionunit="CENTIMETER",
            metadata=metadata,
        )
        temporary.chmod(0o644)
        temporary.replace(target)
    except BaseException as fault:
        if temporary is not None:
            temporary.unlink(missing_ok=True)
        if isinstance(fault, OSError):
            raise FolderError(
                f"{target}: cannot write the labels ({fault.strerror or fault}); "
                "choose a folder that can be written and has room"
            ) from fault
        raise


def read_labels(path: str | Path, *, pixel: float | None = None) -> LabelImage:
    """Read a label image from a TIFF.

    Files of `write_labels` come back whole, but for births and arrival. Those of other programs
    need labels as whole numbers, 0 for what belongs to no spherulite, and the edge of a pixel as
    OME metadata, or in `pixel`; their edges are taken as cut.

    Parameters
    ----------
    path : path-like
        The file.
    pixel : float, optional
        Edge of a pixel [m], > 0, for a file that does not tell.

    Returns
    -------
    image : LabelImage
        Labels on their frame, axis order z, y, x (or y, x).

    Raises
    ------
    DataError
        If the file cannot be read, holds no labels, or tells no pixel size, unequal ones, or
        another one than `pixel`.
    """
    import tifffile  # noqa: PLC0415 (as above)

    try:
        with tifffile.TiffFile(path, _multifile=False) as file:
            xml = file.ome_metadata
            labels = file.series[0].asarray()
    except OSError as fault:
        raise DataError(f"{path}: cannot be read ({fault.strerror or fault})") from fault
    except _DAMAGED as fault:
        raise DataError(
            f"{path}: expected a TIFF of labels, uncompressed or deflated ({fault}); "
            "save it that way again"
        ) from fault
    if labels.dtype.kind not in "iu" or (labels.dtype.kind == "i" and labels.min() < 0):
        raise DataError(
            f"{path}: expected labels as whole numbers of 0 and up, got {labels.dtype}; "
            "a picture must be segmented first"
        )
    pixels = None if xml is None else _pixels_element(xml)
    edge: float | None = None
    more: dict[str, Any] = {}
    if pixels is not None:
        labels, edge, more = _from_ome(str(path), labels, *pixels)
    if labels.ndim not in (2, 3):
        raise DataError(f"{path}: expected 2 or 3 axes of labels, got shape {labels.shape}")
    if edge is None:
        if pixel is None:
            raise DataError(
                f"{path}: the file does not tell the edge of a pixel; give it with its unit, "
                "or save the labels as OME-TIFF with PhysicalSizeX and PhysicalSizeY"
            )
        edge = pixel
    elif pixel is not None and not math.isclose(edge, pixel, rel_tol=1e-6):
        raise DataError(
            f"{path}: the file says {edge * 1e6:.6g} µm a pixel, but {pixel * 1e6:.6g} µm was "
            "given; leave it out, or correct the file"
        )
    return LabelImage(labels=labels, frame=Frame(shape=labels.shape, pixel=edge, **more))


def _notes(frame: Frame) -> dict[str, Any]:
    edges = [
        "periodic" if periodic else "closed" if closed else "cut"
        for periodic, closed in zip(frame.periodic, frame.closed, strict=True)
    ]
    return {
        "format": _FORMAT,
        "background": "0 = not crystallised",
        "edges": dict(zip("zyx"[-frame.dimension :], edges, strict=True)),
        "corner_m": frame.origin,
        "plane_z_m": frame.plane_z,
    }


def _pixels_element(xml: str) -> tuple[dict[str, str], str] | None:
    try:
        root = ET.fromstring(xml)  # noqa: S314 (expat itself bounds the growth of entities)
    except ET.ParseError:
        return None
    pixels = root.find("{*}Image/{*}Pixels")
    if pixels is None or not all(pixels.get(f"Size{axis}", "").isdecimal() for axis in "TCZYX"):
        return None
    return dict(pixels.attrib), root.findtext("{*}Image/{*}Description") or ""


def _from_ome(
    path: str, labels: NDArray[Any], attributes: dict[str, str], description: str
) -> tuple[NDArray[Any], float | None, dict[str, Any]]:
    """Return labels with the axes of the metadata, the pixel [m] and what the frame needs more."""
    try:
        notes = json.loads(description)
    except ValueError:
        notes = None
    ours = isinstance(notes, dict) and notes.get("format") == _FORMAT
    size = {axis: int(attributes[f"Size{axis}"]) for axis in "TCZYX"}
    if size["T"] != 1 or size["C"] != 1:
        raise DataError(
            f"{path}: expected one image of labels, got {size['T']} times and {size['C']} "
            "channels; save the one that holds the labels alone"
        )
    axes = "ZYX" if size["Z"] > 1 or (ours and "z" in notes["edges"]) else "YX"
    shape = [size[axis] for axis in axes]
    if labels.size != math.prod(shape):
        raise DataError(
            f"{path}: the metadata tell of {shape} pixels, the file holds {labels.shape}; "
            "save the labels again, in one file"
        )
    labels = labels.reshape(shape)
    edges = {axis: _edge(attributes, axis) for axis in axes}
    known = [edge for edge in edges.values() if edge is not None]
    if len(known) not in (0, len(axes)):
        missing = ", ".join(f"PhysicalSize{axis}" for axis in axes if edges[axis] is None)
        raise DataError(f"{path}: the file does not tell {missing}; complete its metadata")
    if known and not all(math.isclose(edge, known[0], rel_tol=1e-6) for edge in known):
        found = ", ".join(f"{axis} {1e6 * (edges[axis] or 0):.6g} µm" for axis in axes)
        raise DataError(
            f"{path}: expected pixels with equal edges, got {found}; resample the labels (nearest "
            "neighbour) to the smallest edge first"
        )
    more: dict[str, Any] = {}
    if ours:
        names = [notes["edges"][axis.lower()] for axis in axes]
        more = {
            "periodic": tuple(name == "periodic" for name in names),
            "closed": tuple(name == "closed" for name in names),
            "origin": tuple(notes["corner_m"]),
            "plane_z": notes["plane_z_m"],
        }
    return labels, known[-1] if known else None, more


def _edge(attributes: dict[str, str], axis: str) -> float | None:
    unit = attributes.get(f"PhysicalSize{axis}Unit", "µm")  # the default of the OME schema
    try:
        value = Decimal(attributes[f"PhysicalSize{axis}"]).scaleb(_POWER[unit])
    except (KeyError, InvalidOperation):
        return None
    return float(value) if value > 0 else None
