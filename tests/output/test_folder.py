"""The folder of a run: whole or not at all, the same bytes each time."""

from __future__ import annotations

import errno
import hashlib
import json
import math
import os
import tomllib
from pathlib import Path
from types import SimpleNamespace

import numpy as np
import pytest
from PIL import Image

from spheru import __version__
from spheru.config.read import read_settings, settings_from_mapping
from spheru.errors import FolderError, ValidityError
from spheru.image.formats import read_labels
from spheru.measure.sizes import measure_sizes
from spheru.output import folder as room
from spheru.output.folder import refuse_folder, save_run
from tests.output.reference import conversion_curves, voronoi_map

FILES = [
    "conversion.csv",
    "conversion.png",
    "labels.ome.tif",
    "map.png",
    "report.html",
    "settings.toml",
    "sizes.csv",
    "sizes.png",
    "spherulites.csv",
    "summary.json",
]
DOCUMENT = {
    "title": "A run",
    "seed": 7,
    "material": {"name": "isotactic-polypropylene-alpha"},
    "cooling": {"start": "205 degC", "steps": [{"rate": "10 K/min", "until": "40 degC"}]},
    "sample": {"view": "section", "size": ["80 um", "60 um"], "pixel": "1 um"},
}


def result_of(image, picture=None, *, attachments=None, replica=0, document=None):
    """Return a run as far as it is written: settings and sizes are real, the curves are not."""
    settings = settings_from_mapping(document or DOCUMENT)
    if attachments is not None:
        object.__setattr__(settings, "attachments", attachments)
    return SimpleNamespace(
        settings=settings,
        replica=replica,
        image=image,
        picture=picture or image,
        births=image.births,
        sizes=measure_sizes(image),
        conversion=conversion_curves(),
        summary={
            "format_version": 1,
            "spheru_version": __version__,
            "spherulites": np.int64(image.count),
            "half_time_s": math.nan,
            "size_um": (80.0, np.float64(60.0)),
            "estimate": {"fraction_transformed": 1.0},
        },
        warnings=(),
    )


@pytest.fixture(scope="module")
def result():
    return result_of(voronoi_map((60, 80), 40, periodic=True))


@pytest.fixture(autouse=True)
def undrawn(request, monkeypatch):
    """Leave figures undrawn, which takes a second, but for the tests that are about them."""
    if "drawn" not in request.fixturenames:
        monkeypatch.setattr(room, "png", lambda _: b"a figure")


@pytest.fixture
def drawn():
    """Ask for real figures."""


def bytes_of(folder):
    return {path.name: path.read_bytes() for path in sorted(folder.iterdir())}


def test_a_folder_holds_what_it_should_and_nothing_stands_beside_it(tmp_path, result):
    assert save_run(result, tmp_path / "run") == tmp_path / "run"
    assert sorted(bytes_of(tmp_path / "run")) == FILES
    assert [path.name for path in tmp_path.iterdir()] == ["run"]


def test_labels_of_the_folder_read_back(tmp_path, result):
    save_run(result, tmp_path / "run")
    back = read_labels(tmp_path / "run" / "labels.ome.tif")
    np.testing.assert_array_equal(back.labels, result.image.labels)
    assert back.frame == result.image.frame


def test_summary_names_the_hash_of_every_file_and_holds_plain_numbers(tmp_path, result):
    save_run(result, tmp_path / "run")
    found = bytes_of(tmp_path / "run")
    summary = json.loads(found.pop("summary.json"))
    found.pop("report.html")  # made of the others
    assert summary["files"] == {
        name: hashlib.sha256(content).hexdigest() for name, content in found.items()
    }
    assert summary["settings_sha256"] == summary["files"]["settings.toml"]
    assert summary["spherulites"] == 40
    assert summary["half_time_s"] is None
    assert summary["size_um"] == [80.0, 60.0]
    assert summary["estimate"] == {"fraction_transformed": 1.0}


def test_settings_of_the_folder_run_as_they_stand(tmp_path, result):
    save_run(result, tmp_path / "run")
    again = read_settings(tmp_path / "run" / "settings.toml")
    assert again.sample == result.settings.sample
    assert again.seed == 7


def test_two_runs_have_the_same_bytes(tmp_path, result, drawn):
    twin = result_of(voronoi_map((60, 80), 40, periodic=True))
    one, two = save_run(result, tmp_path / "one"), save_run(twin, tmp_path / "sub" / "two")
    assert bytes_of(one) == bytes_of(two)
    for name in ("map.png", "sizes.png", "conversion.png"):
        with Image.open(one / name) as picture:
            assert picture.mode == "P"


def test_a_replica_has_an_identity_of_its_own(tmp_path, result):
    twin = result_of(result.image, replica=1)
    one, two = save_run(result, tmp_path / "one"), save_run(twin, tmp_path / "two")
    differ = {n for n, content in bytes_of(one).items() if content != bytes_of(two)[n]}
    assert "labels.ome.tif" in differ
    assert "settings.toml" not in differ


def test_the_map_of_a_volume_shows_its_picture(tmp_path, monkeypatch):
    block = voronoi_map((8, 60, 80), 30, periodic=True)
    middle = voronoi_map((60, 80), 12, periodic=True)
    document = DOCUMENT | {
        "sample": {"view": "block", "size": ["80 um", "60 um", "8 um"], "pixel": "1 um"}
    }
    shown, captions = [], []
    monkeypatch.setattr(room, "plot_sizes", lambda _, **texts: captions.append(texts["caption"]))
    monkeypatch.setattr(room, "plot_map", lambda image, **_: shown.append(image))
    folder = save_run(result_of(block, middle, document=document), tmp_path / "run")
    assert shown == [middle]
    assert captions[0].startswith("Whole block, periodic edges")
    assert read_labels(folder / "labels.ome.tif").frame.shape == (8, 60, 80)
    assert "volume_um3" in (folder / "spherulites.csv").read_text().splitlines()[0]


def test_attachments_stand_beside_the_settings(tmp_path, result):
    run = result_of(result.image, attachments={"trace.csv": b"time_s,temperature_C\n0,200\n"})
    folder = save_run(run, tmp_path / "run")
    assert (folder / "trace.csv").read_bytes() == b"time_s,temperature_C\n0,200\n"
    assert "trace.csv" in json.loads((folder / "summary.json").read_bytes())["files"]


@pytest.mark.parametrize("name", ["../trace.csv", "/tmp/trace.csv", "map.png", "summary.json", ""])  # noqa: S108 (never written)
def test_attachments_that_would_stand_elsewhere_are_refused(tmp_path, result, name):
    with pytest.raises(ValidityError, match="attachment"):
        save_run(result_of(result.image, attachments={name: b""}), tmp_path / "run")
    assert list(tmp_path.iterdir()) == []


def test_a_folder_that_is_there_is_refused(tmp_path, result):
    (tmp_path / "run").mkdir()
    with pytest.raises(FolderError, match=r"run: is already there; .* --overwrite") as caught:
        save_run(result, tmp_path / "run")
    assert "\n" not in str(caught.value)
    assert list((tmp_path / "run").iterdir()) == []


def test_overwrite_replaces_a_run_and_leaves_nothing_of_it(tmp_path, result):
    extra = result_of(result.image, attachments={"trace.csv": b"x"})
    save_run(extra, tmp_path / "run")
    (tmp_path / "run" / "report.html").write_text("of the former run")
    save_run(result, tmp_path / "run", overwrite=True)
    assert sorted(bytes_of(tmp_path / "run")) == FILES
    assert [path.name for path in tmp_path.iterdir()] == ["run"]


def test_overwrite_fills_an_empty_folder(tmp_path, result):
    (tmp_path / "run").mkdir()
    save_run(result, tmp_path / "run", overwrite=True)
    assert sorted(bytes_of(tmp_path / "run")) == FILES


@pytest.mark.parametrize(
    ("name", "content"),
    [
        pytest.param("thesis.docx", "years of work", id="another file"),
        pytest.param("summary.json", "{}", id="another summary"),
        pytest.param("summary.json", "[1, 2]", id="a list"),
        pytest.param("summary.json", "not json", id="no JSON"),
    ],
)
def test_overwrite_spares_what_no_run_has_written(tmp_path, result, name, content):
    (tmp_path / "run").mkdir()
    (tmp_path / "run" / name).write_text(content)
    with pytest.raises(FolderError, match=name):
        save_run(result, tmp_path / "run", overwrite=True)
    assert (tmp_path / "run" / name).read_text() == content


def test_overwrite_spares_a_file_added_to_a_run(tmp_path, result):
    save_run(result, tmp_path / "run")
    (tmp_path / "run" / "notes.txt").write_text("mine")
    with pytest.raises(FolderError, match=r"notes\.txt"):
        refuse_folder(tmp_path / "run", overwrite=True)


def test_a_file_in_place_of_the_folder_is_refused(tmp_path):
    (tmp_path / "run").write_text("mine")
    with pytest.raises(FolderError, match="is a file"):
        refuse_folder(tmp_path / "run", overwrite=True)
    with pytest.raises(FolderError, match="is a file"):
        refuse_folder(tmp_path / "run" / "deeper")


def test_the_current_folder_is_not_replaced_from_within(tmp_path, monkeypatch):
    monkeypatch.chdir(tmp_path)
    with pytest.raises(FolderError, match="from within"):
        refuse_folder(".", overwrite=True)


def test_a_folder_without_permission_is_refused_before_the_run(tmp_path, monkeypatch):
    monkeypatch.setattr(os, "access", lambda *_: False)  # tests may run as root
    with pytest.raises(FolderError, match="no permission"):
        refuse_folder(tmp_path / "run")


@pytest.mark.parametrize(
    ("fault", "seen"),
    [
        pytest.param(KeyboardInterrupt(), KeyboardInterrupt, id="Ctrl-C"),
        pytest.param(OSError(errno.ENOSPC, "No space left"), FolderError, id="disk full"),
        pytest.param(ZeroDivisionError(), ZeroDivisionError, id="a bug"),
    ],
)
@pytest.mark.parametrize(
    "stage", ["write_labels", "conversion_table", "png", "sha256", "put_folder"]
)
def test_an_interrupted_write_leaves_nothing(tmp_path, result, monkeypatch, stage, fault, seen):
    def fail(*args, **kwargs):
        raise fault

    monkeypatch.setattr(room, stage, fail)
    with pytest.raises(seen) as caught:
        save_run(result, tmp_path / "new" / "run")
    assert list(tmp_path.iterdir()) == []
    if seen is FolderError:
        assert "No space left" in str(caught.value)
        assert "\n" not in str(caught.value)


@pytest.mark.parametrize("stage", ["write_labels", "sha256", "put_folder"])
def test_an_interrupted_overwrite_leaves_the_former_run(tmp_path, result, monkeypatch, stage):
    save_run(result, tmp_path / "run")
    before = bytes_of(tmp_path / "run")

    def fail(*args, **kwargs):
        raise KeyboardInterrupt

    monkeypatch.setattr(room, stage, fail)
    with pytest.raises(KeyboardInterrupt):
        save_run(result_of(result.image, replica=1), tmp_path / "run", overwrite=True)
    assert [path.name for path in tmp_path.iterdir()] == ["run"]
    assert bytes_of(tmp_path / "run") == before


@pytest.mark.parametrize("done", [False, True], ids=["before", "after"])
@pytest.mark.parametrize("step", [1, 2])
def test_an_interruption_between_the_two_renamings_leaves_one_whole_run(
    tmp_path, result, monkeypatch, step, done
):
    save_run(result, tmp_path / "run")
    rename, calls = Path.rename, []

    def interrupted(path, target):
        calls.append(path)
        if len(calls) == step:
            if done:
                rename(path, target)
            raise KeyboardInterrupt
        return rename(path, target)

    monkeypatch.setattr(Path, "rename", interrupted)
    with pytest.raises(KeyboardInterrupt):
        save_run(result_of(result.image, replica=1), tmp_path / "run", overwrite=True)
    assert [path.name for path in tmp_path.iterdir()] == ["run"]
    assert sorted(bytes_of(tmp_path / "run")) == FILES


def test_settings_text_is_toml(tmp_path, result):
    text = (save_run(result, tmp_path / "run") / "settings.toml").read_text()
    assert tomllib.loads(text)["title"] == "A run"
