"""The command line as its user meets it: what it prints, writes and refuses."""

from __future__ import annotations

import json
import os
import subprocess
import sys
from pathlib import Path

import pytest

from spheru.cli.main import COMMANDS, main

CONFIGS = Path(__file__).parents[2] / "configs"
SMALL = """
title = "small"
seed = 5
[material]
name = "isotactic-polypropylene-alpha"
[cooling]
start = "205 degC"
steps = [{ rate = "10 K/min", until = "60 degC" }]
[sample]
view = "section"
spherulites = 150
pixels_across = 12
edges = "periodic"
"""


@pytest.fixture
def run(capsys, tmp_path, monkeypatch):
    """Run a command in an empty folder; return exit code, standard output and error."""
    monkeypatch.chdir(tmp_path)

    def call(*words):
        with pytest.raises(SystemExit) as left:
            main([str(word) for word in words])
        out, err = capsys.readouterr()
        return left.value.code, out, err

    return call


@pytest.fixture
def small(tmp_path):
    path = tmp_path / "small.toml"
    path.write_text(SMALL)
    return path


def changed(path, old, new):
    text = path.read_text()
    assert old in text
    path.write_text(text.replace(old, new))
    return path


def test_help_lists_every_command(run):
    code, out, _ = run("--help")
    assert code == 0
    assert all(name in out for name in COMMANDS)


@pytest.mark.parametrize("name", COMMANDS)
def test_every_command_explains_itself(run, name):
    code, out, _ = run(name, "--help")
    assert code == 0
    assert out.startswith(f"Usage: spheru {name}")


def test_estimate_prints_numbers_with_units_and_writes_nothing(run, small):
    code, out, err = run("estimate", small)
    assert code == 0
    assert "peak temperature [degC]" in out
    assert "note: " in err
    assert [p.name for p in small.parent.iterdir()] == ["small.toml"]


def test_estimate_for_programs_is_one_json_object(run, small):
    code, out, _ = run("estimate", small, "--json")
    numbers = json.loads(out)
    assert code == 0
    # Koscher & Fulchiron set at 10 K/min: 112.2 degC, 51.6 um (computed, three digits)
    assert numbers["peak_temperature_C"] == pytest.approx(112.2, abs=0.3)
    assert numbers["diameter_of_mean_volume_um"] == pytest.approx(51.6, rel=0.01)


def test_grow_writes_the_folder_and_prints_simulation_beside_mean_field(run, small):
    code, out, _ = run("grow", small)
    assert code == 0
    head = out.splitlines()[1]
    assert head.split() == ["simulated", "95", "%", "interval", "mean", "field"]
    summary = json.loads((small.parent / "small" / "summary.json").read_text())
    assert summary["estimate"]["peak_temperature_C"] == pytest.approx(112.2, abs=0.3)


def test_grow_for_programs_prints_the_summary(run, small):
    code, out, _ = run("grow", small, "--json", "-o", "there")
    assert code == 0
    assert json.loads(out)["spherulites"] > 100
    assert (small.parent / "there" / "labels.ome.tif").exists()


def test_the_settings_of_a_run_give_the_same_run_again(run, small):
    run("grow", small, "-o", "first")
    code, _, _ = run("grow", "first/settings.toml", "-o", "second")
    assert code == 0
    first, second = small.parent / "first", small.parent / "second"
    names = sorted(p.name for p in first.iterdir())
    assert names == sorted(p.name for p in second.iterdir())
    for name in names:
        assert (first / name).read_bytes() == (second / name).read_bytes(), name


def test_the_number_of_threads_of_any_library_changes_no_byte(small):
    summaries = []
    for count in ("1", "2"):
        environment = dict.fromkeys(("OPENBLAS_NUM_THREADS", "OMP_NUM_THREADS"), count)
        folder = small.parent / count
        subprocess.run(
            [sys.executable, "-m", "spheru", "grow", small, "-o", folder, "--threads", count],
            env=os.environ | environment,
            capture_output=True,
            check=True,
        )
        summaries.append((folder / "summary.json").read_bytes())
    assert summaries[0] == summaries[1]


def test_an_output_folder_that_exists_is_refused_before_anything_is_computed(run, small):
    (small.parent / "small").mkdir()
    (small.parent / "small" / "mine.txt").write_text("keep")
    code, out, err = run("grow", small)
    assert (code, out) == (2, "")
    assert "--overwrite" in err
    assert [p.name for p in (small.parent / "small").iterdir()] == ["mine.txt"]


def test_overwrite_replaces_a_run(run, small):
    run("grow", small)
    changed(small, "seed = 5", "seed = 6")
    code, _, _ = run("grow", small, "--overwrite")
    assert code == 0
    assert json.loads((small.parent / "small" / "summary.json").read_text())["seed"] == 6


FAULTS = {
    "unknown key": ("seed = 5", "sede = 5", "did you mean"),
    "unknown material": ("polypropylene-alpha", "polypropylene-alfa", "did you mean"),
    "wrong unit": ("10 K/min", "10 um/min", "cooling.steps[0].rate"),
    "bare number": ('"205 degC"', "205", "cooling.start"),
    "pixel larger than the window": (
        "spherulites = 150\npixels_across = 12",
        'size = ["10 um", "10 um"]\npixel = "20 um"',
        "sample.pixel",
    ),
    "negative dose": (
        "[sample]",
        (
            '[[nuclei]]\nlaw = "agent"\ndose = "-5 ppm"\nactive = 0.1\nactivation = "20 K"\n'
            'particle = { d50_volume = "1 um", spread = 1.6, density = "2750 kg/m^3" }\n[sample]'
        ),
        "dose",
    ),
    "no crystallisation": (
        '"10 K/min", until = "60 degC"',
        '"10 K/min", until = "190 degC"',
        "grow",
    ),
    "above melting without cooling": (
        'start = "205 degC"\nsteps = [{ rate = "10 K/min", until = "60 degC" }]',
        'start = "215 degC"\nsteps = [{ hold = "5 min" }]',
        "never crystallises",
    ),
    "a block beyond memory": (
        'view = "section"\nspherulites = 150\npixels_across = 12',
        'view = "block"\nsize = ["20 mm", "20 mm", "20 mm"]\npixel = "1 um"',
        "GB of memory",
    ),
    "missing trace": (
        'start = "205 degC"\nsteps = [{ rate = "10 K/min", until = "60 degC" }]',
        'trace = "nowhere.csv"',
        "nowhere.csv",
    ),
    "no TOML": ("[sample]", "[sample", "small.toml"),
}


@pytest.mark.parametrize(("old", "new", "says"), FAULTS.values(), ids=FAULTS)
@pytest.mark.parametrize("command", ["estimate", "grow"])
def test_a_fault_of_the_input_gets_its_line_exit_code_2_and_nothing_is_written(
    run, small, command, old, new, says
):
    if command == "estimate" and "beyond" in new:
        pytest.skip("an estimate allocates nothing")
    changed(small, old, new)
    code, out, err = run(command, small)
    if command == "estimate" and 'size = ["20 mm"' in new:
        assert code == 0  # it says what a run would need
        return
    assert (code, out) == (2, "")
    assert says in err
    assert "Traceback" not in err
    assert [p.name for p in small.parent.iterdir()] == ["small.toml"]


def test_an_empty_trace_is_refused_with_its_name(run, small):
    changed(
        small,
        'start = "205 degC"\nsteps = [{ rate = "10 K/min", until = "60 degC" }]',
        'trace = "empty.csv"',
    )
    (small.parent / "empty.csv").write_text("")
    code, _, err = run("grow", small)
    assert code == 2
    assert "empty.csv" in err


@pytest.mark.parametrize("words", [("estimate", "missing.toml"), ("grow", "missing.toml")])
def test_a_missing_file_is_named(run, words):
    code, _, err = run(*words)
    assert code == 2
    assert "missing.toml" in err


def test_a_misspelt_command_gets_the_nearest_one(run):
    code, _, err = run("gorw")
    assert code == 2
    assert "did you mean 'grow'" in err


def test_materials_lists_the_records(run):
    code, out, _ = run("materials")
    assert code == 0
    assert "isotactic-polypropylene-alpha" in out
    assert "poly-l-lactide" in out


def test_materials_shows_a_record_with_the_mark_of_every_value(run):
    code, out, err = run("materials", "isotactic-polypropylene-alpha")
    assert code == 0
    assert "283 m/s   [memory]" in out
    assert "data sheets, local codes" in err


def test_materials_draws_a_record(run, tmp_path):
    code, _, _ = run("materials", "poly-l-lactide", "--plot", "plla.png")
    assert code == 0
    assert (tmp_path / "plla.png").read_bytes()[:4] == b"\x89PNG"


def test_materials_refuses_an_unknown_name_with_the_nearest(run):
    code, _, err = run("materials", "poly-l-lactid")
    assert code == 2
    assert "did you mean 'poly-l-lactide'" in err


@pytest.mark.parametrize(
    ("words", "heavy"),
    [
        (["--help"], ("numba", "scipy", "matplotlib", "skimage", "numpy", "pydantic")),
        (["materials"], ("numba", "scipy", "matplotlib", "skimage")),
        (
            ["estimate", str(CONFIGS / "first-map.toml")],
            ("numba", "scipy", "matplotlib", "skimage"),
        ),
    ],
    ids=["help", "materials", "estimate"],
)
def test_a_command_imports_only_what_it_needs(words, heavy):
    code = (
        "import sys\n"
        "from spheru.cli.main import main\n"
        "try: main(sys.argv[1:])\n"
        "except SystemExit: pass\n"
        f"sys.exit(','.join(m for m in {heavy!r} if m in sys.modules) or 0)\n"
    )
    done = subprocess.run(
        [sys.executable, "-c", code, *words], capture_output=True, text=True, check=False
    )
    assert done.returncode == 0, done.stderr
