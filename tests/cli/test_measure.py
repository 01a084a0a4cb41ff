"""`spheru measure` as its user meets it."""

from __future__ import annotations

import csv
import json
import os
import subprocess
import sys
from pathlib import Path

import numpy as np
import pytest
import tifffile
from PIL import Image

from spheru.cli.main import main
from tests.measure.reference import voronoi


@pytest.fixture
def run(capsys, tmp_path, monkeypatch):
    """Run a command in an empty folder; return exit code, standard output and error."""
    monkeypatch.chdir(tmp_path)

    def call(*words):
        with pytest.raises(SystemExit) as left:
            main(["measure", *(str(word) for word in words)])
        out, err = capsys.readouterr()
        return left.value.code, out, err

    return call


@pytest.fixture
def pictures(tmp_path):
    """Write two fields: about 1 spherulite in 20 x 20 pixels, 0.5 um each."""
    names = []
    for seed in range(2):
        labels = np.array(voronoi(seed, side=12, across=20, cut=True).labels, dtype=np.uint16)
        names.append(f"field-{seed}.png")
        Image.fromarray(labels).save(tmp_path / names[-1])
    return names


def test_without_a_folder_a_table_is_printed_and_nothing_written(run, pictures, tmp_path):
    before = sorted(p.name for p in tmp_path.iterdir())
    code, out, err = run(pictures[0], "--pixel", "0.5 um")
    assert code == 0
    assert "equivalent diameter of a label, by area in a plane; edge rule miles-lantuejoul" in out
    assert "in the manner of ASTM E112" in out
    assert "in the manner of ISO 643" in out
    row = next(line for line in out.splitlines() if line.startswith("mean diameter, by number"))
    assert 8 < float(row.split()[5]) < 14
    assert " to " in row
    assert all(line.startswith("note: ") for line in err.splitlines())
    assert sorted(p.name for p in tmp_path.iterdir()) == before


def test_json_is_one_object_for_programs(run, pictures):
    code, out, _ = run(*pictures, "--pixel", "0.5 um", "--json", "--edges", "guard-frame")
    summary = json.loads(out)
    assert code == 0
    assert [one["name"] for one in summary["fields"]] == pictures
    assert summary["measured"]["edge_rule"] == "guard-frame"
    assert summary["measured"]["guard_um"] > 5
    assert 1e4 * 0.7 < summary["number_density_per_mm2"] < 1e4 * 1.3


def test_a_folder_holds_numbers_tables_and_figures(run, pictures, tmp_path):
    code, out, _ = run(*pictures, "--pixel", "0.5 um", "-o", "there", "--floor", "5 um")
    assert code == 0
    assert "from 5 um up" in out
    assert sorted(p.name for p in (tmp_path / "there").iterdir()) == [
        "distribution.png",
        "grains.csv",
        "intercepts-1.png",
        "intercepts-2.png",
        "measure.json",
        "outlines-1.png",
        "outlines-2.png",
        "sizes.csv",
    ]
    with (tmp_path / "there" / "grains.csv").open() as stream:
        rows = list(csv.DictReader(stream))
    record = json.loads((tmp_path / "there" / "measure.json").read_text())
    assert len(rows) == record["measured"]["spherulites"]
    used = [row for row in rows if float(row["weight_per_mm2"]) > 0]
    assert len(used) == record["measured"]["used"]
    assert all(float(row["diameter_um"]) >= 5 for row in used)
    assert {row["field"] for row in rows} == set(pictures)


def test_a_folder_that_exists_is_refused_unless_it_may_be_replaced_by_the_same_bytes(
    run, pictures, tmp_path
):
    words = (pictures[0], "--pixel", "0.5 um", "-o", "there")
    folder = tmp_path / "there"
    assert run(*words)[0] == 0
    before = {path.name: path.read_bytes() for path in folder.iterdir()}
    code, out, err = run(*words)
    assert (code, out) == (2, "")
    assert "--overwrite" in err
    assert run(*words, "--overwrite")[0] == 0
    assert {path.name: path.read_bytes() for path in folder.iterdir()} == before
    (folder / "mine.txt").write_text("keep")
    assert run(*words, "--overwrite")[0] == 2
    assert (folder / "mine.txt").read_text() == "keep"


def test_the_folder_of_a_run_is_measured_as_grow_measures_it(run, tmp_path, capsys):
    (tmp_path / "small.toml").write_text(
        'title = "small"\nseed = 5\n[material]\nname = "isotactic-polypropylene-alpha"\n'
        '[cooling]\nstart = "205 degC"\nsteps = [{ rate = "10 K/min", until = "60 degC" }]\n'
        '[sample]\nview = "section"\nspherulites = 150\npixels_across = 12\nedges = "cut"\n'
    )
    with pytest.raises(SystemExit):
        main(["grow", "small.toml"])
    capsys.readouterr()
    code, out, _ = run("small", "--json")
    assert code == 0
    found = json.loads(out)
    grown = json.loads((tmp_path / "small" / "summary.json").read_text())
    for key in (
        "number_mean_diameter_um",
        "number_mean_diameter_um_ci95_low",
        "area_weighted_mean_diameter_um",
        "boundary_density_per_mm",
    ):
        assert found[key] == pytest.approx(grown[key], rel=1e-12)
    assert found["number_density_per_mm2"] == pytest.approx(grown["section_count_per_mm2"])


def test_a_mask_is_measured_by_its_patches(run, tmp_path):
    mask = np.zeros((40, 40), dtype=np.uint8)
    mask[5:15, 5:15] = mask[20:30, 8:18] = mask[22:32, 25:35] = 255
    Image.fromarray(mask).save(tmp_path / "mask.png")
    code, _, err = run("mask.png", "--pixel", "1 um")
    assert code == 2
    assert "--patches" in err
    code, out, _ = run("mask.png", "--pixel", "1 um", "--patches", "--json")
    summary = json.loads(out)
    assert code == 0
    assert summary["measured"]["what"].startswith("equivalent diameter of a connected patch")
    assert summary["mean_area_um2"] == pytest.approx(100.0)


def colour(path):
    Image.fromarray(np.zeros((5, 5, 3), dtype=np.uint8)).save(path, "PNG")


def array(values):
    def write(path):
        with path.open("wb") as stream:
            np.save(stream, values)

    return write


def flat_voxels(path):
    size = {f"PhysicalSize{axis}": edge for axis, edge in zip("XYZ", (0.5, 0.5, 2.0), strict=True)}
    cube = np.arange(8, dtype=np.uint8).reshape(2, 2, 2)
    tifffile.imwrite(path, cube, ome=True, metadata={"axes": "ZYX", **size})


def claims_too_much(path):
    Image.fromarray(np.zeros((9, 9), dtype=np.uint8)).save(path, "PNG")
    whole = path.read_bytes()
    path.write_bytes(whole[:16] + (60_000).to_bytes(4, "big") * 2 + whole[24:])


GOOD = np.arange(1, 26).reshape(5, 5)
SCALE = ("--pixel", "0.5 um")
FAULTS = {
    "no scale": (array(GOOD), (), "--pixel '0.5 um'"),
    "bare scale": (array(GOOD), ("--pixel", "0.5"), "--pixel: expected a length"),
    "zero scale": (array(GOOD), ("--pixel", "0 um"), "--pixel: expected a length above 0"),
    "zero size": (array(GOOD[:0]), SCALE, "without a pixel"),
    "floats": (array(GOOD * 0.5), SCALE, "whole numbers"),
    "negative": (array(GOOD - 3), SCALE, "got -2"),
    "one label": (array(GOOD * 0 + 4), SCALE, "one label only (4)"),
    "flat voxels": (flat_voxels, (), "equal edges"),
    "claims too much": (claims_too_much, SCALE, "claims 60000 x 60000"),
    "truncated": (lambda path: path.write_bytes(b"\x93NUMPY\x01\x00v\x00{'desc"), SCALE, "numpy"),
    "colour": (colour, SCALE, "colour picture"),
    "no label image": (lambda path: path.write_text("a,b"), SCALE, "TIFF, PNG"),
    "unknown rule": (array(GOOD), (*SCALE, "--edges", "exlude"), "did you mean 'exclude'"),
    "guard without frame": (array(GOOD), (*SCALE, "--guard", "1 um"), "guard"),
    "guard too wide": (
        array(GOOD),
        (*SCALE, "--edges", "guard-frame", "--guard", "9 um"),
        "leaves nothing",
    ),
    "negative floor": (array(GOOD), (*SCALE, "--floor", "-1 um"), "--floor"),
}


@pytest.mark.parametrize(("write", "words", "says"), FAULTS.values(), ids=FAULTS)
def test_a_fault_of_the_input_gets_one_line_exit_code_2_and_nothing_is_written(
    run, tmp_path, write, words, says
):
    write(tmp_path / "a.dat")
    code, out, err = run("a.dat", *words, "-o", "there")
    assert (code, out) == (2, "")
    assert says in err
    assert err.count("\n") == 1
    assert "Traceback" not in err
    assert [p.name for p in tmp_path.iterdir()] == ["a.dat"]


def test_a_missing_file_is_named(run):
    code, _, err = run("nowhere.tif", *SCALE)
    assert code == 2
    assert "nowhere.tif: there is no such file" in err


def test_the_reader_of_damaged_tiffs_says_nothing_of_its_own(tmp_path):
    # in a process of its own: pytest's handlers would take the lines of a library's log
    noise = np.random.default_rng(1).integers(1, 60_000, (200, 200), dtype=np.uint16)
    Image.fromarray(noise).save(tmp_path / "a.tif", compression="tiff_lzw")
    whole = (tmp_path / "a.tif").read_bytes()
    (tmp_path / "a.tif").write_bytes(whole[: len(whole) // 2])
    words = [sys.executable, "-m", "spheru", "measure", "a.tif", *SCALE]
    env = {**os.environ, "PYTHONPATH": str(Path(__file__).parents[2])}
    done = subprocess.run(words, capture_output=True, text=True, check=False, cwd=tmp_path, env=env)
    assert done.returncode == 2
    assert done.stderr.count("\n") == 1
    assert "a.tif: expected a TIFF of labels" in done.stderr
