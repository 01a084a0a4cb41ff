"""Label images of every format, and what is refused: one clear line, nothing allocated."""

from __future__ import annotations

import struct
import zlib

import numpy as np
import pytest
import tifffile
from PIL import Image

from spheru.errors import CapacityError, DataError, MissingExtraError, ValidityError
from spheru.image.formats import write_labels
from spheru.image.frame import Frame
from spheru.image.label_image import LabelImage
from spheru.image.read import read_labels

LABELS = np.arange(1, 13, dtype=np.uint16).reshape(3, 4) * 400
PIXEL = 5e-7


def png(width, height, *, colour=0, bits=8, data=b""):
    def chunk(kind, body):
        whole = kind + body
        return struct.pack(">I", len(body)) + whole + struct.pack(">I", zlib.crc32(whole))

    head = struct.pack(">IIBBBBB", width, height, bits, colour, 0, 0, 0)
    body = chunk(b"IHDR", head) + chunk(b"IDAT", zlib.compress(data)) + chunk(b"IEND", b"")
    return b"\x89PNG\r\n\x1a\n" + body


def png16(path):
    Image.fromarray(LABELS).save(path, "PNG")


def lzw(path):
    Image.fromarray(LABELS).save(path, "TIFF", compression="tiff_lzw")


def lzw_pages(path):
    pages = [Image.fromarray(LABELS), Image.fromarray(LABELS + 1)]
    pages[0].save(path, "TIFF", compression="tiff_lzw", save_all=True, append_images=pages[1:])


def plain_npy(path):
    with path.open("wb") as stream:
        np.save(stream, LABELS.astype(np.int64))


def fortran_npy(path):
    with path.open("wb") as stream:
        np.save(stream, np.asfortranarray(LABELS))


@pytest.mark.parametrize("write", [png16, lzw, plain_npy, fortran_npy])
def test_labels_come_in_whatever_the_name_of_the_file(tmp_path, write):
    write(tmp_path / "labels.dat")
    image = read_labels(tmp_path / "labels.dat", pixel=PIXEL)
    np.testing.assert_array_equal(image.labels, LABELS)
    assert image.frame == Frame(shape=(3, 4), pixel=PIXEL)


def test_pages_of_an_lzw_tiff_are_the_planes_of_a_volume(tmp_path):
    lzw_pages(tmp_path / "a.tif")
    image = read_labels(tmp_path / "a.tif", pixel=PIXEL)
    np.testing.assert_array_equal(image.labels, [LABELS, LABELS + 1])


@pytest.mark.parametrize("top", [70_000, 2**31 + 5], ids=["below 2^31", "above"])
def test_an_lzw_tiff_of_32_bits_keeps_its_labels(tmp_path, top):
    labels = np.array([[0, top]], dtype=np.uint32)
    stored = Image.fromarray(labels.view(np.int32))
    stored.save(tmp_path / "a.tif", "TIFF", compression="tiff_lzw")
    if top < 2**31:
        assert read_labels(tmp_path / "a.tif", pixel=PIXEL).labels.tolist() == labels.tolist()
    else:  # Pillow writes them as signed
        with pytest.raises(DataError, match="0 and up"):
            read_labels(tmp_path / "a.tif", pixel=PIXEL)


@pytest.mark.parametrize("bits", [1, 2, 4])
def test_a_png_of_few_bits_keeps_the_values_of_its_labels(tmp_path, bits):
    packed = np.array([0, 1] if bits == 1 else [0, 2 if bits == 2 else 9])
    row = bytes([0, int(packed[0] << (8 - bits) | packed[1] << (8 - 2 * bits))])
    (tmp_path / "a.png").write_bytes(png(2, 1, bits=bits, data=row))
    assert read_labels(tmp_path / "a.png", pixel=PIXEL).labels.tolist() == [packed.tolist()]


@pytest.mark.parametrize(
    ("unit", "per_unit", "edge"),
    [("micron", 2.0, 5e-7), ("nm", 0.01, 1e-7), ("\\u00B5m", 4.0, 2.5e-7), ("mm", 100.0, 1e-5)],
)
def test_the_scale_of_imagej_is_read_with_its_unit(tmp_path, unit, per_unit, edge):
    tifffile.imwrite(
        tmp_path / "a.tif",
        LABELS,
        imagej=True,
        resolution=(per_unit, per_unit),
        metadata={"unit": unit},
    )
    assert read_labels(tmp_path / "a.tif").frame.pixel == pytest.approx(edge, rel=1e-6)


def test_a_resolution_in_dpi_is_no_scale(tmp_path):
    tifffile.imwrite(tmp_path / "a.tif", LABELS, resolution=(300, 300), resolutionunit="INCH")
    with pytest.raises(DataError, match=r"does not tell the edge of a pixel .*dpi.*--pixel"):
        read_labels(tmp_path / "a.tif")


def test_a_volume_of_imagej_with_flat_voxels_is_refused(tmp_path):
    tifffile.imwrite(
        tmp_path / "a.tif",
        np.stack([LABELS] * 3),
        imagej=True,
        resolution=(2.0, 2.0),
        metadata={"unit": "um", "spacing": 2.0, "axes": "ZYX"},
    )
    with pytest.raises(DataError, match=r"Z 2 µm, Y 0\.5 µm, X 0\.5 µm; resample"):
        read_labels(tmp_path / "a.tif")


def test_the_folder_of_a_run_gives_its_map_with_its_edges(tmp_path):
    image = LabelImage(labels=LABELS, frame=Frame(shape=(3, 4), pixel=PIXEL, periodic=True))
    write_labels(tmp_path / "labels.ome.tif", image, identity="x")
    assert read_labels(tmp_path).frame == image.frame


def write_zarr(path, array, scale, *, names="yx", unit="micrometer", version="0.5"):
    zarr = pytest.importorskip("zarr")
    group = zarr.open_group(str(path), mode="w", zarr_format=3 if version == "0.5" else 2)
    group.create_array("0", data=array)
    kinds = {"t": "time", "c": "channel"}
    axes = [
        {"name": n, "type": kinds[n]} if n in kinds else {"name": n, "type": "space", "unit": unit}
        for n in names
    ]
    change = [{"type": "scale", "scale": scale}]
    scales = [{"axes": axes, "datasets": [{"path": "0", "coordinateTransformations": change}]}]
    group.attrs.update(
        {"ome": {"version": version, "multiscales": scales}}
        if version == "0.5"
        else {"multiscales": scales}
    )
    return group


@pytest.mark.parametrize("version", ["0.4", "0.5"])
def test_ome_zarr_is_read_with_its_scale(tmp_path, version):
    write_zarr(tmp_path / "a.zarr", LABELS, [0.25, 0.25], version=version)
    image = read_labels(tmp_path / "a.zarr")
    np.testing.assert_array_equal(image.labels, LABELS)
    assert image.frame == Frame(shape=(3, 4), pixel=2.5e-7)


def test_axes_of_one_time_and_channel_fall_away(tmp_path):
    array = np.stack([LABELS, LABELS])[None, None]
    write_zarr(tmp_path / "a.zarr", array, [1, 1, 0.5, 0.5, 0.5], names="tczyx")
    assert read_labels(tmp_path / "a.zarr").frame == Frame(shape=(2, 3, 4), pixel=5e-7)


def test_of_a_picture_with_labels_the_labels_are_read(tmp_path):
    group = write_zarr(tmp_path / "a.zarr", LABELS.astype(np.float32), [0.5, 0.5])
    write_zarr(tmp_path / "a.zarr" / "labels" / "cells", LABELS, [0.5, 0.5])
    group.require_group("labels").attrs.update({"ome": {"labels": ["cells"]}})
    np.testing.assert_array_equal(read_labels(tmp_path / "a.zarr").labels, LABELS)


@pytest.mark.parametrize(
    ("array", "scale", "more", "message"),
    [
        pytest.param(LABELS, [0.5, 0.6], {}, "Y 0.5 µm, X 0.6 µm", id="unequal"),
        pytest.param(LABELS, [0.5, 0.5], {"unit": "parsec"}, "does not tell", id="no unit"),
        pytest.param(LABELS * 0.5, [0.5, 0.5], {}, "whole numbers", id="floats"),
        pytest.param(
            np.stack([LABELS] * 2), [1, 0.5, 0.5], {"names": "cyx"}, "axes cyx", id="channels"
        ),
    ],
)
def test_an_ome_zarr_without_a_scale_or_labels_is_refused(tmp_path, array, scale, more, message):
    write_zarr(tmp_path / "a.zarr", array, scale, **more)
    with pytest.raises(DataError, match=message):
        read_labels(tmp_path / "a.zarr")


def test_without_zarr_the_extra_is_named(tmp_path, monkeypatch):
    (tmp_path / "zarr.json").write_text("{}")
    monkeypatch.setitem(__import__("sys").modules, "zarr", None)
    with pytest.raises(MissingExtraError, match=r"spheru\[zarr\]"):
        read_labels(tmp_path)


def saved(array):
    def write(path):
        with path.open("wb") as stream:
            np.save(stream, array)

    return write


def cut_off(write, keep):
    def half(path):
        write(path)
        whole = path.read_bytes()
        path.write_bytes(whole[: int(len(whole) * keep)])

    return half


def noise_tiff(path):
    noise = np.random.default_rng(1).integers(0, 60_000, (200, 200), dtype=np.uint16)
    tifffile.imwrite(path, noise, compression="zlib")


def raw_tiff(path):
    tifffile.imwrite(path, np.ones((200, 200), np.uint16))


def noise_lzw(path):
    noise = np.random.default_rng(1).integers(0, 60_000, (200, 200), dtype=np.uint16)
    Image.fromarray(noise).save(path, "TIFF", compression="tiff_lzw")


def noise_png(path):
    noise = np.random.default_rng(1).integers(0, 60_000, (200, 200), dtype=np.uint16)
    Image.fromarray(noise).save(path, "PNG")


def rgb_tiff(path):
    tifffile.imwrite(path, np.zeros((5, 6, 3), np.uint8), photometric="rgb")


def planar_rgb_tiff(path):
    tifffile.imwrite(path, np.zeros((3, 5, 6), np.uint8), photometric="rgb", planarconfig=2)


def picture(mode):
    return lambda path: Image.new(mode, (4, 4)).save(path, "PNG")


def huge_tiff(path):
    tifffile.imwrite(path, np.zeros((10, 10), np.uint8))
    data = path.read_bytes()
    with tifffile.TiffFile(path) as file:
        for tag in ("ImageWidth", "ImageLength"):
            at = file.pages[0].tags[tag].valueoffset
            kind = "<H" if file.pages[0].tags[tag].dtype == 3 else "<I"
            packed = struct.pack(kind, 60_000)
            data = data[:at] + packed + data[at + len(packed) :]
    path.write_bytes(data)


def huge_npy(path):
    with path.open("wb") as stream:
        head = {"descr": "<u2", "fortran_order": False, "shape": (60_000, 60_000)}
        np.lib.format.write_array_header_1_0(stream, head)
        stream.write(b"\0" * 100)


FAULTS = {
    "floats": (saved(LABELS * 1.5), "whole numbers of 0 and up, got float64"),
    "negative": (saved(LABELS.astype(np.int32) - 500), "0 and up, got -100"),
    "labels of 64 bits": (saved(LABELS.astype(np.int64) + 2**40), "labels below 4294967296"),
    "text": (saved(np.array([["a"]])), "whole numbers"),
    "objects": (saved(np.array([[None]])), "whole numbers"),
    "no pixel": (saved(np.zeros((0, 5), np.uint8)), "without a pixel"),
    "one axis": (saved(np.arange(5)), "2 or 3 axes"),
    "four axes": (saved(np.ones((2, 2, 2, 2), np.uint8)), "2 or 3 axes"),
    "cut npy": (cut_off(saved(LABELS), 0.95), "cut off"),
    "cut header of npy": (cut_off(saved(LABELS), 0.3), "numpy array"),
    "cut deflated tiff": (cut_off(noise_tiff, 0.5), "expected a TIFF|cannot be read"),
    "cut raw tiff": (cut_off(raw_tiff, 0.5), "expected a TIFF|cannot be read"),
    "cut lzw tiff": (cut_off(noise_lzw, 0.5), "expected a TIFF|cannot be read"),
    "cut png": (cut_off(noise_png, 0.5), "whole PNG"),
    "cut head of png": (lambda path: path.write_bytes(png(4, 4)[:20]), "cut off"),
    "rgb tiff": (rgb_tiff, "colour picture"),
    "planar rgb tiff": (planar_rgb_tiff, "colour picture"),
    "rgb png": (picture("RGB"), r"colour picture \(RGB\)"),
    "rgba png": (picture("RGBA"), "colour picture"),
    "palette png": (picture("P"), r"colour picture \(palette\)"),
    "jpeg": (lambda path: Image.new("L", (4, 4)).save(path, "JPEG"), "does not keep labels"),
    "text file": (lambda path: path.write_text("label,x\n"), "TIFF, PNG, .npy"),
    "empty file": (lambda path: path.write_bytes(b""), "TIFF, PNG, .npy"),
    "claimed by png": (
        lambda path: path.write_bytes(png(60_000, 60_000)),
        "claims 60000 x 60000 pixels, which a file of",
    ),
    "claimed by tiff": (huge_tiff, "claims 60000 x 60000 pixels, which a file of"),
    "claimed by npy": (huge_npy, "claims 60000 x 60000 pixels of 2 bytes"),
}


@pytest.mark.parametrize(("write", "message"), FAULTS.values(), ids=FAULTS)
def test_what_is_no_label_image_gets_one_clear_line(tmp_path, write, message):
    write(tmp_path / "a.dat")
    with pytest.raises(DataError, match=message) as caught:
        read_labels(tmp_path / "a.dat", pixel=PIXEL, memory=10**10)
    assert "a.dat" in str(caught.value)
    assert "\n" not in str(caught.value)


def test_a_picture_beyond_memory_is_refused_before_it_is_read(tmp_path):
    row = b"\0" + b"\1" * 3000
    (tmp_path / "a.png").write_bytes(png(3000, 3000, data=row * 3000))
    with pytest.raises(CapacityError, match=r"3000 x 3000 pixels need 0\.1 GB"):
        read_labels(tmp_path / "a.png", pixel=PIXEL, memory=10**7)
    assert read_labels(tmp_path / "a.png", pixel=PIXEL, memory=10**9).frame.shape == (3000, 3000)


@pytest.mark.parametrize("pixel", [0.0, -1e-6, float("nan"), float("inf")])
def test_a_pixel_that_is_no_length_is_refused(tmp_path, pixel):
    png16(tmp_path / "a.png")
    with pytest.raises(ValidityError, match="above 0"):
        read_labels(tmp_path / "a.png", pixel=pixel)


@pytest.mark.parametrize("name", ["nowhere.tif", "."])
def test_a_missing_file_and_a_folder_without_labels_are_named(tmp_path, name):
    with pytest.raises(DataError, match=r"no such file|expected the folder of a run"):
        read_labels(tmp_path / name)


@pytest.mark.parametrize("kind", ["PNG", "TIFF"])
def test_the_limit_of_pillow_is_no_limit_here_and_stays_for_others(tmp_path, monkeypatch, kind):
    monkeypatch.setattr(Image, "MAX_IMAGE_PIXELS", 3)  # 12 pixels are then a decompression bomb
    packing = {"compression": "tiff_lzw"} if kind == "TIFF" else {}
    Image.fromarray(LABELS).save(tmp_path / "a.dat", kind, **packing)
    assert read_labels(tmp_path / "a.dat", pixel=PIXEL).frame.shape == (3, 4)
    assert Image.MAX_IMAGE_PIXELS == 3
