"""Label images out to OME-TIFF and back, read by others as well."""

from __future__ import annotations

import errno
import json
from xml.etree import ElementTree as ET

import numpy as np
import pytest
import tifffile
from PIL import Image

from spheru.errors import DataError, FolderError
from spheru.image.formats import read_labels, write_labels
from spheru.image.frame import Frame
from spheru.image.label_image import LabelImage


def image_of(shape, *, highest=200, **frame):
    labels = np.random.default_rng(3).integers(0, highest + 1, size=shape)
    labels.flat[0] = highest
    return LabelImage(labels=labels, frame=Frame(**{"shape": shape, "pixel": 1e-6} | frame))


@pytest.mark.parametrize(
    "shape",
    [
        pytest.param((1, 1), id="one pixel"),
        pytest.param((1, 7), id="one row"),
        pytest.param((7, 1), id="one column"),
        pytest.param((33, 17), id="odd"),
        pytest.param((5, 3, 7), id="odd volume"),
        pytest.param((1, 4, 5), id="volume of one plane"),
        pytest.param((3, 1, 1), id="column of voxels"),
        pytest.param((700, 701), id="many strips"),
    ],
)
def test_labels_and_frame_come_back(tmp_path, shape):
    image = image_of(shape, pixel=1e-3 / 333, origin=tuple(1e-6 * k for k in range(len(shape))))
    write_labels(tmp_path / "a.ome.tif", image, identity="x")
    back = read_labels(tmp_path / "a.ome.tif")
    np.testing.assert_array_equal(back.labels, image.labels)
    assert back.frame == image.frame


@pytest.mark.parametrize(
    "edges",
    [
        pytest.param({"periodic": (False, True)}, id="periodic in x"),
        pytest.param({"closed": (True, False)}, id="closed in y"),
        pytest.param({"periodic": True, "plane_z": 2.5e-5}, id="section"),
    ],
)
def test_edges_travel_in_the_file(tmp_path, edges):
    image = image_of((4, 5), **edges)
    write_labels(tmp_path / "a.ome.tif", image, identity="x")
    assert read_labels(tmp_path / "a.ome.tif").frame == image.frame


@pytest.mark.parametrize(
    ("highest", "dtype"),
    [
        pytest.param(65_535, "uint16", id="last that fits 16 bits"),
        pytest.param(65_536, "uint32", id="first that does not"),
        pytest.param(70_000, "uint32", id="70 000"),
    ],
)
def test_labels_take_16_bits_where_they_fit(tmp_path, highest, dtype):
    labels = np.arange(300 * 300).reshape(300, 300) % (highest + 1)
    labels[0, 0] = highest
    image = LabelImage(labels=labels, frame=Frame(shape=(300, 300), pixel=1e-6))
    write_labels(tmp_path / "a.ome.tif", image, identity="x")
    assert tifffile.imread(tmp_path / "a.ome.tif").dtype == dtype
    np.testing.assert_array_equal(read_labels(tmp_path / "a.ome.tif").labels, labels)


def test_metadata_as_an_independent_reader_finds_them(tmp_path):
    write_labels(tmp_path / "a.ome.tif", image_of((3, 20, 30), pixel=2.5e-7), identity="x")
    with tifffile.TiffFile(tmp_path / "a.ome.tif") as file:
        assert file.series[0].axes == "ZYX"
        assert file.pages[0].tags["Software"].value == "spheru"
        assert file.pages[0].compression.name == "ADOBE_DEFLATE"
        assert file.pages[0].predictor == 1
        xml = ET.fromstring(file.ome_metadata)  # noqa: S314 (our own file)
    pixels = xml.find("{*}Image/{*}Pixels")
    for axis in "XYZ":
        assert pixels.get(f"PhysicalSize{axis}") == "0.25"
        assert pixels.get(f"PhysicalSize{axis}Unit") == "µm"
    with Image.open(tmp_path / "a.ome.tif") as picture:
        assert picture.n_frames == 3
        assert picture.size == (30, 20)
        # 40 000 pixels a cm are 101 600 a inch
        assert picture.info["dpi"] == pytest.approx((101_600, 101_600))


def test_same_identity_gives_the_same_bytes_and_another_one_another_uuid(tmp_path):
    image = image_of((3, 40, 50))
    for name, identity in (("a", "one"), ("b", "one"), ("c", "two")):
        write_labels(tmp_path / name, image, identity=identity)
    a, b, c = ((tmp_path / name).read_bytes() for name in "abc")
    assert a == b
    assert a != c
    assert len(a) == len(c)


def test_a_write_that_fails_leaves_the_former_file(tmp_path, monkeypatch):
    path = tmp_path / "a.ome.tif"
    path.write_bytes(b"former")

    def full(*args, **kwargs):
        raise OSError(errno.ENOSPC, "No space left on device")

    monkeypatch.setattr(tifffile, "imwrite", full)
    with pytest.raises(FolderError, match="No space left on device") as caught:
        write_labels(path, image_of((2, 2)), identity="x")
    assert "\n" not in str(caught.value)
    assert [p.name for p in tmp_path.iterdir()] == ["a.ome.tif"]
    assert path.read_bytes() == b"former"


def test_a_missing_folder_is_named(tmp_path):
    with pytest.raises(FolderError, match="nowhere"):
        write_labels(tmp_path / "nowhere" / "a.ome.tif", image_of((2, 2)), identity="x")


def foreign(path, array, **metadata):
    tifffile.imwrite(path, array, ome=True, photometric="minisblack", metadata=metadata)
    return path


SIZE = {"PhysicalSizeX": 0.5, "PhysicalSizeY": 0.5}
LABELS = np.arange(12, dtype=np.uint8).reshape(3, 4)


@pytest.mark.parametrize(
    ("unit", "pixel"),
    [
        pytest.param({}, 0.5e-6, id="default of the schema"),
        pytest.param({"PhysicalSizeXUnit": "nm", "PhysicalSizeYUnit": "nm"}, 0.5e-9, id="nm"),
        pytest.param({"PhysicalSizeXUnit": "mm", "PhysicalSizeYUnit": "mm"}, 0.5e-3, id="mm"),
    ],
)
def test_labels_of_other_programs_are_read_with_their_unit(tmp_path, unit, pixel):
    path = foreign(tmp_path / "a.ome.tif", LABELS, axes="YX", **SIZE, **unit)
    image = read_labels(path)
    assert image.frame == Frame(shape=(3, 4), pixel=pixel)
    np.testing.assert_array_equal(image.labels, LABELS)


def test_a_given_pixel_serves_a_plain_tiff(tmp_path):
    tifffile.imwrite(tmp_path / "a.tif", LABELS)
    assert read_labels(tmp_path / "a.tif", pixel=2e-6).frame.pixel == 2e-6


@pytest.mark.parametrize(
    ("metadata", "message"),
    [
        pytest.param({}, "does not tell the edge of a pixel", id="no pixel"),
        pytest.param({"PhysicalSizeX": 1.0}, "does not tell PhysicalSizeY", id="half a pixel"),
        pytest.param(SIZE | {"PhysicalSizeX": 0.6}, "Y 0.5 µm, X 0.6 µm; resample", id="unequal"),
        pytest.param(
            SIZE | {"PhysicalSizeXUnit": "pixel", "PhysicalSizeYUnit": "pixel"},
            "does not tell the edge of a pixel",
            id="a unit that is no length",
        ),
    ],
)
def test_pixels_that_are_missing_or_unequal_are_refused(tmp_path, metadata, message):
    path = foreign(tmp_path / "a.ome.tif", LABELS, axes="YX", **metadata)
    with pytest.raises(DataError, match=message):
        read_labels(path)


@pytest.mark.parametrize(
    ("array", "axes", "message"),
    [
        pytest.param(LABELS.astype(np.float32), "YX", "whole numbers", id="floats"),
        pytest.param(LABELS.astype(np.int16) - 1, "YX", "whole numbers", id="negative"),
        pytest.param(np.stack([LABELS] * 2), "TYX", "2 times", id="a film of pictures"),
    ],
)
def test_what_is_no_label_image_is_refused(tmp_path, array, axes, message):
    path = foreign(tmp_path / "a.ome.tif", array, axes=axes, **SIZE)
    with pytest.raises(DataError, match=message):
        read_labels(path)


@pytest.mark.parametrize(
    "content", [pytest.param(b"\x89PNG\r\n\x1a\n", id="PNG"), pytest.param(b"", id="empty")]
)
def test_what_is_no_tiff_is_refused(tmp_path, content):
    (tmp_path / "a.tif").write_bytes(content)
    with pytest.raises(DataError, match=r"a\.tif: expected a TIFF"):
        read_labels(tmp_path / "a.tif")


def test_a_truncated_file_is_refused(tmp_path):
    write_labels(tmp_path / "a.ome.tif", image_of((300, 300)), identity="x")
    whole = (tmp_path / "a.ome.tif").read_bytes()
    (tmp_path / "a.ome.tif").write_bytes(whole[: len(whole) // 2])
    with pytest.raises(DataError, match=r"a\.ome\.tif: expected a TIFF"):
        read_labels(tmp_path / "a.ome.tif")


def test_a_missing_file_is_refused(tmp_path):
    with pytest.raises(DataError, match="No such file"):
        read_labels(tmp_path / "a.tif")


def test_a_pixel_that_contradicts_the_file_is_refused(tmp_path):
    write_labels(tmp_path / "a.ome.tif", image_of((2, 2)), identity="x")
    with pytest.raises(DataError, match="1 µm a pixel, but 2 µm"):
        read_labels(tmp_path / "a.ome.tif", pixel=2e-6)


def test_a_foreign_description_in_json_is_left_alone(tmp_path):
    note = json.dumps({"edges": "sharp"})
    path = foreign(tmp_path / "a.ome.tif", LABELS, axes="YX", Description=note, **SIZE)
    assert read_labels(path).frame.periodic == (False, False)
