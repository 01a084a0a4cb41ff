"""Volumes kept on the disk: the same run as in memory, and the same after any stop."""

from __future__ import annotations

import json
import os
import signal
import subprocess
import sys
import textwrap
from pathlib import Path
from types import SimpleNamespace

import numpy as np
import pytest

from spheru.errors import CapacityError, FolderError, MissingExtraError, RunError, ValidityError
from spheru.image.frame import Frame
from spheru.output import folder as folder_room
from spheru.output import unfinished as room
from spheru.output.folder import save_run
from spheru.output.store import LabelStore
from spheru.output.unfinished import Unfinished, disk_needed, store_run, unfinished_folder
from spheru.run import stored
from spheru.run.estimate import estimate
from spheru.run.grow import grow
from tests.run.settings import settings_with

pytest.importorskip("zarr", reason="the extra 'zarr' is not installed")

WALLS = {"x": "periodic", "y": "periodic", "z": "closed"}
FILM = {
    "view": "film",
    "thickness": "60 um",
    "size": ["200 um", "190 um"],
    "pixel": "3 um",
    "edges": WALLS,
}
CUBE = {"view": "block", "size": ["160 um"] * 3, "pixel": "2.5 um", "edges": "periodic"}
EARLY = {"start": "205 degC", "steps": [{"rate": "10 K/min", "until": "112 degC"}]}
RUNS = {
    "cube": {"sample": {**CUBE, "size": ["192 um"] * 3, "pixel": "2 um"}},  # 96^3
    "odd-and-cut": {"sample": {**CUBE, "size": ["150 um", "130 um", "171 um"], "edges": "cut"}},
    "odd-and-periodic": {"sample": {**CUBE, "size": ["150 um", "130 um", "171 um"]}},
    "few-spherulites": {"sample": {**CUBE, "size": ["64 um"] * 3, "pixel": "1 um"}},
    "with-melt": {"sample": CUBE, "cooling": EARLY},
    "film": {"sample": FILM},
    "film-seen-through": {"sample": {**FILM, "sight": "through"}},
}


@pytest.fixture(autouse=True)
def undrawn(monkeypatch):
    """Leave figures undrawn, which takes a second each time."""
    monkeypatch.setattr(folder_room, "png", lambda _: b"a figure")


def whole(store):
    return store.read(tuple(slice(0, n) for n in store.frame.shape))


def files_of(folder):
    return {
        str(path.relative_to(folder)): path.read_bytes()
        for path in sorted(folder.rglob("*"))
        if path.is_file()
    }


@pytest.mark.parametrize("name", RUNS)
def test_every_label_and_every_number_is_that_of_the_run_in_memory(tmp_path, name):
    settings = settings_with(**RUNS[name])
    expected = estimate(settings)
    in_memory = grow(settings, expected=expected)
    found = store_run(expected, tmp_path / "stored", chunk=32)
    save_run(in_memory, tmp_path / "memory")
    assert found.summary == in_memory.summary
    store = LabelStore(tmp_path / "stored" / "labels.ome.zarr")
    assert store.frame == in_memory.image.frame
    np.testing.assert_array_equal(whole(store), in_memory.image.labels)
    np.testing.assert_array_equal(found.picture.labels, in_memory.picture.labels)
    assert found.picture.frame == in_memory.picture.frame
    for table in ("spherulites.csv", "sizes.csv", "conversion.csv", "settings.toml"):
        one, other = (tmp_path / run / table for run in ("stored", "memory"))
        assert one.read_bytes() == other.read_bytes(), table


@pytest.fixture(scope="module")
def small():
    return estimate(settings_with(sample=CUBE))  # 64^3


@pytest.fixture(scope="module")
def unbroken(small, tmp_path_factory):
    folder = tmp_path_factory.mktemp("unbroken") / "run"
    with pytest.MonkeyPatch.context() as patch:
        patch.setattr(folder_room, "png", lambda _: b"a figure")
        store_run(small, folder, chunk=32)
    return files_of(folder)


def stop_at(share, how):
    def tell(stage, done):
        if done >= share:
            how()

    return tell


def raising():
    raise KeyboardInterrupt


@pytest.mark.parametrize("share", [0.0, 0.3, 0.75, 0.98])
def test_a_run_stopped_anywhere_is_continued_without_doing_a_chunk_again(
    tmp_path, small, unbroken, monkeypatch, share
):
    with pytest.raises(KeyboardInterrupt):
        store_run(small, tmp_path / "run", chunk=32, progress=stop_at(share, raising))
    (kept,) = tmp_path.iterdir()
    assert kept == unfinished_folder(small, tmp_path / "run", chunk=32)
    done = {path.name for path in (kept / "notes").glob("*.npz")}
    again = []
    note = Unfinished.note

    def spy(self, stage, chunk, record):
        again.append(f"{stage}-{chunk:06d}.npz")
        note(self, stage, chunk, record)

    monkeypatch.setattr(Unfinished, "note", spy)
    said = []
    store_run(small, tmp_path / "run", chunk=32, notice=said.append)
    assert not done & set(again)
    assert len(done) + len(again) == 2 * 8
    assert bool(said) == any(name.startswith("grown") for name in done)
    assert [path.name for path in tmp_path.iterdir()] == ["run"]
    assert files_of(tmp_path / "run") == unbroken


KILLED = """
    import os, signal, sys
    from spheru.output import folder
    from spheru.output.unfinished import store_run
    from spheru.run.estimate import estimate
    from tests.output.test_unfinished import CUBE
    from tests.run.settings import settings_with

    def tell(stage, done):
        if done > 0.4:
            os.kill(os.getpid(), signal.SIGKILL)

    store_run(estimate(settings_with(sample=CUBE)), sys.argv[1], chunk=32, progress=tell)
"""


@pytest.mark.skipif(not hasattr(signal, "SIGKILL"), reason="no SIGKILL on this system")
def test_a_killed_run_is_continued_and_ends_with_the_same_bytes(tmp_path, small, unbroken):
    root = Path(__file__).parents[2]
    killed = subprocess.run(
        [sys.executable, "-c", textwrap.dedent(KILLED), str(tmp_path / "run")],
        cwd=root,
        env={**os.environ, "PYTHONPATH": str(root)},
        check=False,
    )
    assert killed.returncode == -signal.SIGKILL
    assert not (tmp_path / "run").exists()
    said = []
    store_run(small, tmp_path / "run", chunk=32, notice=said.append)
    assert said
    assert files_of(tmp_path / "run") == unbroken


def stopped(small, tmp_path):
    with pytest.raises(KeyboardInterrupt):
        store_run(small, tmp_path / "run", chunk=32, progress=stop_at(0.5, raising))
    return unfinished_folder(small, tmp_path / "run", chunk=32)


@pytest.mark.parametrize("harm", ["cut short", "changed", "lost", "note damaged"])
def test_a_chunk_whose_file_or_note_is_harmed_is_done_again(tmp_path, small, unbroken, harm):
    kept = stopped(small, tmp_path)
    files = sorted(path for path in (kept / "run").rglob("c/*/*/*") if path.is_file())
    content = files[0].read_bytes()
    if harm == "cut short":
        files[0].write_bytes(content[:-1])
    elif harm == "changed":
        files[0].write_bytes(content[:-1] + bytes([content[-1] ^ 1]))
    elif harm == "lost":
        files[0].unlink()
    else:
        (kept / "notes" / "grown-000000.npz").write_bytes(b"no zip")
    store_run(small, tmp_path / "run", chunk=32)
    assert files_of(tmp_path / "run") == unbroken


def test_what_a_write_that_was_cut_short_has_left_is_cleared_away(tmp_path, small, unbroken):
    kept = stopped(small, tmp_path)
    (kept / "run" / "labels.ome.zarr" / "0" / "c" / "0.abc.partial").write_bytes(b"half")
    (kept / "notes" / ".grown-000000.npz.xyz").write_bytes(b"half")
    store_run(small, tmp_path / "run", chunk=32)
    assert files_of(tmp_path / "run") == unbroken


@pytest.mark.parametrize(
    "other",
    [
        pytest.param({"replica": 1}, id="replica"),
        pytest.param({"chunk": 64}, id="chunks"),
    ],
)
def test_an_unfinished_run_of_another_kind_is_not_touched(tmp_path, small, other):
    kept = stopped(small, tmp_path)
    before = files_of(kept)
    with pytest.raises(FolderError, match="unfinished run of other settings"):
        store_run(small, tmp_path / "run", **{"chunk": 32, **other})
    assert files_of(kept) == before


def test_an_unfinished_run_of_another_seed_is_not_touched(tmp_path, small):
    stopped(small, tmp_path)
    other = settings_with(sample=CUBE, seed=4)
    with pytest.raises(FolderError, match="unfinished run of other settings"):
        store_run(estimate(other), tmp_path / "run", chunk=32)


def test_the_same_bytes_on_one_thread_and_with_other_chunks_the_same_labels(
    tmp_path, small, unbroken
):
    store_run(small, tmp_path / "one", chunk=32, threads=1)
    assert files_of(tmp_path / "one") == unbroken
    found = store_run(small, tmp_path / "other", chunk=40)
    summary = json.loads(unbroken["summary.json"])
    again = json.loads((tmp_path / "other" / "summary.json").read_text())
    assert summary["files"].keys() == again["files"].keys()
    assert summary | {"files": 0} == again | {"files": 0}
    assert found.image.sha256 == again["files"]["labels.ome.zarr"]


def test_an_earlier_run_is_replaced_only_where_that_is_asked_for(tmp_path, small, unbroken):
    store_run(small, tmp_path / "run", chunk=32)
    with pytest.raises(FolderError, match="already there"):
        store_run(small, tmp_path / "run", chunk=32)
    store_run(small, tmp_path / "run", chunk=32, overwrite=True)
    assert files_of(tmp_path / "run") == unbroken
    assert [path.name for path in tmp_path.iterdir()] == ["run"]


def test_two_processes_do_not_work_on_one_run(tmp_path, small):
    fcntl = pytest.importorskip("fcntl", reason="no file locks on this system")
    kept = stopped(small, tmp_path)
    with (kept / "lock").open("w") as held:
        fcntl.flock(held, fcntl.LOCK_EX)
        with pytest.raises(RunError, match="another process"):
            store_run(small, tmp_path / "run", chunk=32)


def test_a_full_disk_is_found_before_anything_is_written(tmp_path, small, monkeypatch):
    monkeypatch.setattr(room.shutil, "disk_usage", lambda _: SimpleNamespace(free=10**6))
    with pytest.raises(CapacityError, match=r"needs up to 0\.02\d* GB on the disk and 0\.001 GB"):
        store_run(small, tmp_path / "run", chunk=32)
    assert list(tmp_path.iterdir()) == []


def test_a_disk_that_fills_up_leaves_the_finished_chunks(tmp_path, small, unbroken, monkeypatch):
    write = LabelStore.write
    written = []

    def full(self, window, labels):
        written.append(window)
        if len(written) > 3:
            raise OSError(28, "No space left on device")
        write(self, window, labels)

    with monkeypatch.context() as patch:
        patch.setattr(LabelStore, "write", full)
        with pytest.raises(FolderError, match=r"No space left on device.*finished chunks are kept"):
            store_run(small, tmp_path / "run", chunk=32)
    store_run(small, tmp_path / "run", chunk=32)
    assert files_of(tmp_path / "run") == unbroken


def test_too_many_nuclei_for_the_memory_are_refused(tmp_path, small, monkeypatch):
    monkeypatch.setattr(room, "free_memory", lambda: 10**8)
    with pytest.raises(CapacityError, match="even with the map on the disk"):
        store_run(small, tmp_path / "run", chunk=32)


def test_room_on_the_disk_is_judged_generously(small, unbroken):
    assert sum(map(len, unbroken.values())) < disk_needed(small.plan)


def test_a_plane_is_not_stored(tmp_path):
    with pytest.raises(ValidityError, match="expected a block or a film"):
        store_run(estimate(settings_with()), tmp_path / "run")


def test_without_zarr_one_line_says_what_to_install(tmp_path, small, monkeypatch):
    monkeypatch.setitem(sys.modules, "zarr", None)
    with pytest.raises(MissingExtraError, match=r"pip install 'spheru\[zarr\]'"):
        store_run(small, tmp_path / "run")
    assert list(tmp_path.iterdir()) == []


def test_metadata_name_axes_units_pixel_and_labels(unbroken, small):
    notes = json.loads(unbroken["labels.ome.zarr/zarr.json"])
    ome = notes["attributes"]["ome"]
    assert notes["zarr_format"] == 3
    assert ome["version"] == "0.5"
    (scales,) = ome["multiscales"]
    assert scales["axes"] == [
        {"name": name, "type": "space", "unit": "micrometer"} for name in "zyx"
    ]
    assert scales["datasets"] == [
        {
            "path": "0",
            "coordinateTransformations": [{"type": "scale", "scale": [2.5, 2.5, 2.5]}],
        }
    ]
    assert "image-label" in ome
    array = json.loads(unbroken["labels.ome.zarr/0/zarr.json"])
    assert array["data_type"] == "uint32"
    assert array["dimension_names"] == ["z", "y", "x"]
    assert array["shape"] == list(small.plan.frame.shape)


def test_the_frame_comes_back_from_a_store(tmp_path):
    frame = Frame(
        shape=(2, 3, 4),
        pixel=1.7e-6,
        origin=(0.0, 1e-6, 2e-6),
        periodic=(False, True, False),
        closed=(True, False, False),
    )
    LabelStore.create(tmp_path / "a.ome.zarr", frame)
    assert LabelStore(tmp_path / "a.ome.zarr").frame == frame


MEASURED = """
    import resource, sys
    from spheru.output.unfinished import store_run
    from spheru.run.estimate import estimate
    from tests.run.settings import settings_with

    block = {"view": "block", "size": ["1024 um"] * 3, "pixel": "2 um", "edges": "periodic"}
    store_run(estimate(settings_with(sample=block)), sys.argv[1])
    print(resource.getrusage(resource.RUSAGE_SELF).ru_maxrss)
"""


@pytest.mark.campaign
def test_memory_of_a_stored_run_stays_far_below_what_the_volume_would_take(tmp_path):
    pytest.importorskip("resource", reason="this system does not tell the peak of memory")
    root = Path(__file__).parents[2]
    done = subprocess.run(
        [sys.executable, "-c", textwrap.dedent(MEASURED), str(tmp_path / "run")],
        cwd=root,
        env={**os.environ, "PYTHONPATH": str(root)},
        check=True,
        capture_output=True,
        text=True,
    )
    peak = int(done.stdout) * 1024  # Linux tells kilobytes
    assert peak < 700e6  # labels and arrival of 512^3 alone take 1074 MB


def test_chunks_cover_the_grid_once():
    seen = np.zeros((5, 7, 4), dtype=int)
    for window in stored.chunk_windows(seen.shape, (2, 7, 3)):
        seen[window] += 1
    assert (seen == 1).all()
