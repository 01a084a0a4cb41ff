"""Volumes beyond the memory from the command line: chosen, announced, continued, refused."""

from __future__ import annotations

import json

import pytest

from spheru.cli.main import main
from spheru.output import folder as folder_room
from spheru.output import unfinished as room
from spheru.run import plan as planning

pytest.importorskip("zarr", reason="the extra 'zarr' is not installed")

BLOCK = """
title = "block"
seed = 5
[material]
name = "isotactic-polypropylene-alpha"
[cooling]
start = "205 degC"
steps = [{ rate = "10 K/min", until = "60 degC" }]
[sample]
view = "block"
size = ["120 um", "120 um", "120 um"]
pixel = "3 um"
edges = "periodic"
"""


@pytest.fixture
def run(capsys, tmp_path, monkeypatch):
    """Run a command in an empty folder; return exit code, standard output and error."""
    monkeypatch.chdir(tmp_path)
    monkeypatch.setattr(folder_room, "png", lambda _: b"a figure")
    (tmp_path / "block.toml").write_text(BLOCK)

    def call(*words):
        with pytest.raises(SystemExit) as left:
            main([str(word) for word in words])
        out, err = capsys.readouterr()
        return left.value.code, out, err

    return call


def names(folder):
    return sorted(path.name for path in folder.iterdir())


def test_a_block_that_fits_stays_in_memory_and_one_that_does_not_is_stored_and_said(
    run, tmp_path, monkeypatch
):
    code, in_memory, err = run("grow", "block.toml", "-o", "memory", "--json")
    assert (code, "kept on the disk" in err) == (0, False)
    assert "labels.ome.tif" in names(tmp_path / "memory")
    monkeypatch.setattr(planning, "free_memory", lambda: 10**8)
    code, out, err = run("grow", "block.toml", "-o", "stored", "--json")
    assert code == 0
    assert "note: the map needs 0.2 GB of memory, more than is free" in err
    assert "labels.ome.zarr" in names(tmp_path / "stored")
    assert json.loads(out) == json.loads(in_memory)


def test_estimate_tells_beforehand(run, monkeypatch):
    assert "keep the map on the disk" not in run("estimate", "block.toml")[2]
    monkeypatch.setattr(planning, "free_memory", lambda: 10**8)
    code, _, err = run("estimate", "block.toml")
    assert code == 0
    assert "a run would keep the map on the disk" in err


def test_store_asks_for_it(run, tmp_path):
    code, out, _ = run("grow", "block.toml", "--store")
    assert code == 0
    assert out.startswith("block")
    assert {"labels.ome.zarr", "summary.json"} <= set(names(tmp_path / "block"))


def test_a_stopped_run_says_where_it_stands_and_the_same_command_goes_on_by_itself(
    run, tmp_path, monkeypatch
):
    with monkeypatch.context() as patch:

        def stop(*_):
            raise KeyboardInterrupt

        patch.setattr(room, "write_run", stop)
        code, _, err = run("grow", "block.toml", "--store")
    assert code == 1
    assert "the same command" in err
    assert not (tmp_path / "block").exists()
    code, _, err = run("grow", "block.toml")  # without --store
    assert code == 0
    assert "note: continued: 1 of 1 chunks were there already" in err
    assert names(tmp_path) == ["block", "block.toml"]


def test_a_section_is_not_stored(run, tmp_path):
    text = BLOCK.replace('"block"\nsize = ["120 um", ', '"section"\nsize = [')
    (tmp_path / "section.toml").write_text(text)
    code, _, err = run("grow", "section.toml", "--store")
    assert code == 2
    assert "expected a block or a film" in err
    assert "Traceback" not in err
