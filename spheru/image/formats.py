"""Label images as files: OME-TIFF out, TIFF in; other formats come in by `spheru.image.read`.

The pixel size and the edges travel in the file; how a picture of a map looks is decided in
`spheru.output.plots`.
"""

from __future__ import annotations

import json
import logging
import math
import os
import struct
import tempfile
import uuid
import zlib
from contextlib import contextmanager
from decimal import Decimal, InvalidOperation
from pathlib import Path
from typing import TYPE_CHECKING, Any, Final
from xml.etree import ElementTree as ET

import numpy as np
from PIL import Image

from spheru.errors import CapacityError, DataError, FolderError, ValidityError
from spheru.image.frame import Frame
from spheru.image.label_image import LabelImage

if TYPE_CHECKING:
    from collections.abc import Iterator

    from numpy.typing import NDArray

__all__ = [
    "any_size",
    "common_edge",
    "frame_notes",
    "labels_on_frame",
    "read_labels",
    "refuse_claim",
    "write_labels",
]

_FORMAT: Final = "spheru labels 1"
_NAMESPACE: Final = uuid.uuid5(uuid.NAMESPACE_OID, "spheru")
_LARGEST_CLASSIC: Final = 2**32 - 2**25  # bytes that a TIFF with 32-bit offsets holds for certain
# What the reader raises for damaged files and foreign codecs; its own error is a ValueError.
_DAMAGED: Final = (ValueError, LookupError, TypeError, RuntimeError, struct.error, zlib.error)
_POWER: Final = {"m": 0, "cm": -2, "mm": -3, "µm": -6, "μm": -6, "um": -6, "nm": -9, "pm": -12}
_IMAGEJ_UNITS: Final = {"micron": "um", "microns": "um", "\\u00B5m": "um", "um": "um"}
_COLOURED: Final = ("RGB", "CMYK", "YCBCR", "CIELAB", "ICCLAB", "ITULAB")
_DENSEST: Final = 5000  # bytes out of one: more than deflate (1032) or LZW can pack

# What the reader finds odd is no line of its own on the screen; what it cannot read is raised here.
logging.getLogger("tifffile").addHandler(logging.NullHandler())


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
        "Description": json.dumps(frame_notes(frame)),
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


def read_labels(
    path: str | Path, *, pixel: float | None = None, memory: int | None = None
) -> LabelImage:
    """Read a label image from a TIFF.

    Files of `write_labels` come back whole, but for births and arrival. Those of other programs
    need labels as whole numbers, 0 for what belongs to no spherulite, and the edge of a pixel as
    OME or ImageJ metadata, or in `pixel`; their edges are taken as cut. A resolution in dots per
    inch is one for printers and is not taken for a scale.

    Parameters
    ----------
    path : path-like
        The file.
    pixel : float, optional
        Edge of a pixel [m], > 0, for a file that does not tell.
    memory : int, optional
        Bytes that the labels may take in memory; no limit without it.

    Returns
    -------
    image : LabelImage
        Labels on their frame, axis order z, y, x (or y, x).

    Raises
    ------
    DataError
        If the file cannot be read, holds no labels, or tells no pixel size, unequal ones, or
        another one than `pixel`.
    CapacityError
        If the labels need more than `memory`; nothing is allocated then.
    """
    import tifffile  # noqa: PLC0415 (as above)

    edge: float | None = None
    try:
        with tifffile.TiffFile(path, _multifile=False) as file:
            xml = file.ome_metadata
            series = file.series[0]
            _refuse_pictures(path, series, ome=bool(xml))
            refuse_claim(path, series.shape, series.dtype, file.filehandle.size, memory=memory)
            labels = _pixels_of(path, series)
            if file.is_imagej:
                edge = _imagej_edge(str(path), file, series.ndim)
    except DataError:
        raise
    except OSError as fault:
        raise DataError(f"{path}: cannot be read ({fault.strerror or fault})") from fault
    except _DAMAGED as fault:
        raise DataError(
            f"{path}: expected a TIFF of labels, whole and uncompressed, deflated or LZW "
            f"({'it is cut off' if isinstance(fault, LookupError) else fault}); save it that way "
            "again"
        ) from fault
    pixels = None if xml is None else _pixels_element(xml)
    more: dict[str, Any] = {}
    if pixels is not None:
        labels, edge, more = _from_ome(str(path), labels, *pixels)
    return labels_on_frame(path, labels, edge, pixel, **more)


def refuse_claim(
    path: str | Path,
    shape: tuple[int, ...],
    dtype: np.dtype[Any],
    size: int | None,
    *,
    memory: int | None,
) -> None:
    """Refuse what a header claims where it cannot be labels, before anything is allocated.

    Parameters
    ----------
    path : path-like
        The file, for the message.
    shape : tuple of int
        Number of pixels along each axis.
    dtype : numpy.dtype
        What a pixel is stored as.
    size : int or None
        Size of the file [bytes]; None where it tells nothing.
    memory : int or None
        Bytes that the labels may take in memory, with as many again to measure them.

    Raises
    ------
    DataError
        If the array is empty, holds no whole numbers, or is larger than the file can hold.
    CapacityError
        If the labels need more memory than there is.
    """
    claimed = " x ".join(map(str, shape[::-1]))
    if math.prod(shape) == 0 or not shape:
        raise DataError(f"{path}: expected labels, got an image without a pixel ({claimed})")
    if dtype.kind not in "iub":
        raise DataError(
            f"{path}: expected labels as whole numbers of 0 and up, got {dtype}; "
            "a picture must be segmented first"
        )
    if size is not None and math.prod(shape) * dtype.itemsize > _DENSEST * size:
        raise DataError(
            f"{path}: the header claims {claimed} pixels, which a file of {size} bytes cannot "
            "hold; it is damaged: save it again"
        )
    needed = 2 * 4 * math.prod(shape)  # uint32, and as much again to work with
    if memory is not None and needed > memory:
        raise CapacityError(
            f"{path}: {claimed} pixels need {needed / 1e9:.1f} GB of memory and "
            f"{memory / 1e9:.1f} GB are free; measure parts of it as several fields"
        )


def labels_on_frame(
    path: str | Path,
    labels: NDArray[Any],
    edge: float | None,
    pixel: float | None,
    **more: Any,
) -> LabelImage:
    """Return a label image, once labels and pixel are what they must be.

    Parameters
    ----------
    path : path-like
        The file, for the messages.
    labels : ndarray
        What it holds.
    edge : float or None
        Edge of a pixel that the file tells [m].
    pixel : float or None
        Edge of a pixel that the user gave [m].
    **more
        What `Frame` takes besides.

    Returns
    -------
    image : LabelImage
        Labels on their frame.

    Raises
    ------
    DataError
        If there are no 2 or 3 axes of whole numbers of 0 and up, or no pixel, or two of them.
    ValidityError
        If the pixel that was given is no length above 0.
    """
    if labels.ndim not in (2, 3):
        raise DataError(f"{path}: expected 2 or 3 axes of labels, got shape {labels.shape}")
    refuse_claim(path, labels.shape, labels.dtype, None, memory=None)
    if labels.dtype.kind == "i" and (lowest := labels.min()) < 0:
        raise DataError(
            f"{path}: expected labels as whole numbers of 0 and up, got {lowest} among them; "
            "give what belongs to no spherulite the label 0"
        )
    if labels.dtype.itemsize > 4 and (highest := labels.max()) >= 2**32:
        raise DataError(
            f"{path}: expected labels below {2**32}, got {highest}; number them anew from 1"
        )
    if pixel is not None and not (math.isfinite(pixel) and pixel > 0):
        raise ValidityError(f"pixel: expected a length above 0 such as '0.5 um', got {pixel:g} m")
    if edge is None:
        if pixel is None:
            raise DataError(
                f"{path}: the file does not tell the edge of a pixel (a resolution in dpi is for "
                "printers); give it with its unit, such as --pixel '0.5 um', or save the labels "
                "as OME-TIFF with PhysicalSizeX and PhysicalSizeY"
            )
        edge = pixel
    elif pixel is not None and not math.isclose(edge, pixel, rel_tol=1e-6):
        raise DataError(
            f"{path}: the file says {edge * 1e6:.6g} µm a pixel, but {pixel * 1e6:.6g} µm was "
            "given; leave it out, or correct the file"
        )
    if labels.dtype.kind == "b":
        labels = labels.astype(np.uint8)
    return LabelImage(labels=labels, frame=Frame(shape=labels.shape, pixel=edge, **more))


@contextmanager
def any_size() -> Iterator[None]:
    """Let Pillow open pictures of any size, where `refuse_claim` has judged it already."""
    limit, Image.MAX_IMAGE_PIXELS = Image.MAX_IMAGE_PIXELS, None
    try:
        yield
    finally:
        Image.MAX_IMAGE_PIXELS = limit


def common_edge(path: str | Path, edges: dict[str, float | None]) -> float | None:
    """Return the one edge of a pixel that metadata tell for all axes.

    Parameters
    ----------
    path : path-like
        The file, for the messages.
    edges : dict of str to float or None
        Edge of a pixel [m] by axis; None where it is not told.

    Returns
    -------
    edge : float or None
        The edge [m]; None where no axis has one.

    Raises
    ------
    DataError
        If only some axes have one, or they differ.
    """
    known = [edge for edge in edges.values() if edge is not None]
    if len(known) not in (0, len(edges)):
        missing = ", ".join(f"PhysicalSize{axis}" for axis, edge in edges.items() if edge is None)
        raise DataError(f"{path}: the file does not tell {missing}; complete its metadata")
    if known and not all(math.isclose(edge, known[0], rel_tol=1e-6) for edge in known):
        found = ", ".join(f"{axis} {1e6 * (edge or 0):.6g} µm" for axis, edge in edges.items())
        raise DataError(
            f"{path}: expected pixels with equal edges, got {found}; resample the labels (nearest "
            "neighbour) to the smallest edge first"
        )
    return known[-1] if known else None


def _refuse_pictures(path: str | Path, series: Any, *, ome: bool) -> None:
    """Refuse colours, and several pictures in one file; OME's own axes are judged later."""
    photometric = str(getattr(series.keyframe.photometric, "name", ""))
    if "S" in series.axes or photometric in _COLOURED:
        raise DataError(
            f"{path}: expected labels, one number a pixel, got a colour picture ({photometric}); "
            "a picture must be segmented first"
        )
    if not ome and series.ndim > 2 and (several := set("TC") & set(series.axes)):
        axis = series.axes.index(min(several))
        raise DataError(
            f"{path}: expected one image of labels, got {series.shape[axis]} "
            f"{'times' if series.axes[axis] == 'T' else 'channels'}; save the one that holds the "
            "labels alone"
        )


def _pixels_of(path: str | Path, series: Any) -> NDArray[Any]:
    """Return the pixels of a series; those packed by LZW through Pillow."""
    try:
        found: NDArray[Any] = series.asarray()
    except ValueError as fault:
        if "imagecodecs" not in str(fault) or series.keyframe.compression.name != "LZW":
            raise
        with any_size(), Image.open(path) as picture:
            pages = []
            for page in range(len(series.pages)):
                picture.seek(page)
                pages.append(np.asarray(picture))
        found = np.stack(pages).reshape(series.shape)
        if series.dtype.kind == "u" and found.dtype.kind == "i":  # Pillow has no unsigned 32 bits
            found = found.view(np.uint32)
    return found


def _imagej_edge(path: str, file: Any, dimension: int) -> float | None:
    """Return the edge of a pixel [m] that ImageJ's metadata tell."""
    notes = file.imagej_metadata or {}
    unit = str(notes.get("unit", ""))
    power = _POWER.get(_IMAGEJ_UNITS.get(unit, unit))
    tags = file.pages[0].tags
    if power is None or "XResolution" not in tags or "YResolution" not in tags:
        return None
    edges: dict[str, float | None] = {}
    if dimension == 3:
        depth = Decimal(str(notes.get("spacing", 0)))
        edges["Z"] = float(depth.scaleb(power)) if depth > 0 else None
    for axis in "YX":
        pixels, units = tags[f"{axis}Resolution"].value
        edges[axis] = float((Decimal(units) / Decimal(pixels)).scaleb(power)) if pixels else None
    return common_edge(path, edges)


def frame_notes(frame: Frame) -> dict[str, Any]:
    """Return what the metadata of a file of labels tell of the frame, but for the pixel."""
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
    edge = common_edge(path, {axis: _edge(attributes, axis) for axis in axes})
    more: dict[str, Any] = {}
    if ours:
        names = [notes["edges"][axis.lower()] for axis in axes]
        more = {
            "periodic": tuple(name == "periodic" for name in names),
            "closed": tuple(name == "closed" for name in names),
            "origin": tuple(notes["corner_m"]),
            "plane_z": notes["plane_z_m"],
        }
    return labels, edge, more


def _edge(attributes: dict[str, str], axis: str) -> float | None:
    unit = attributes.get(f"PhysicalSize{axis}Unit", "µm")  # the default of the OME schema
    try:
        value = Decimal(attributes[f"PhysicalSize{axis}"]).scaleb(_POWER[unit])
    except (KeyError, InvalidOperation):
        return None
    return float(value) if value > 0 else None
