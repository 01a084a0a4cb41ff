from __future__ import annotations

import tomllib
from dataclasses import fields, replace
from pathlib import Path

import pytest

from spheru.config.read import read_settings, settings_from_mapping
from spheru.config.write import resolved_document, write_settings

CONFIGS = sorted((Path(__file__).parents[2] / "configs").glob("*.toml"))


def same(one, other):
    """Compare settings but for the text they were read from."""
    names = [field.name for field in fields(one) if field.name != "document"]
    return all(getattr(one, name) == getattr(other, name) for name in names)


def settled(settings):
    """Give a window and a pixel where the file leaves them to the estimate."""
    sample = settings.sample
    axes = 3 if sample.view == "block" else 2
    return replace(
        settings,
        sample=replace(
            sample,
            size=sample.size or (350 * 1.74e-6,) * axes,
            pixel=sample.pixel or 1.74e-6,
            spherulites=None,
            pixels_across=None,
        ),
    )


@pytest.mark.parametrize("path", CONFIGS, ids=lambda path: path.stem)
def test_written_settings_read_back_equal(path, tmp_path):
    settings = read_settings(path)
    copy = tmp_path / "settings.toml"
    copy.write_text(write_settings(settings.document))
    assert same(read_settings(copy), settings)


@pytest.mark.parametrize("path", CONFIGS, ids=lambda path: path.stem)
def test_resolved_settings_are_those_that_were_run(path, tmp_path):
    settings = settled(read_settings(path))
    copy = tmp_path / "settings.toml"
    copy.write_text(write_settings(resolved_document(settings)))
    again = read_settings(copy)
    assert again.sample.size == pytest.approx(settings.sample.size, rel=1e-12)
    assert again.sample.pixel == settings.sample.pixel
    rest = replace(again, sample=settings.sample)
    assert same(rest, settings)


def test_window_is_written_in_the_units_of_the_user():
    document = tomllib.loads(
        '[material]\nname = "isotactic-polypropylene-alpha"\n'
        '[cooling]\nstart = "205 degC"\nsteps = [{ rate = "10 K/min", until = "40 degC" }]\n'
        '[sample]\nview = "section"\nsize = ["1 mm", "2000 um"]\npixel = "3 um"\n'
    )
    settings = settings_from_mapping(document)
    sample = resolved_document(settings, (667 * 3e-6, 333 * 3e-6), 3e-6, seed=5)["sample"]
    assert sample["size"] == ["0.999 mm", "2001 um"]  # x, y
    assert sample["pixel"] == "3 um"
    assert resolved_document(settings, seed=5)["seed"] == 5
    assert settings.document["sample"]["size"] == ["1 mm", "2000 um"]  # untouched


def test_film_writes_its_thickness_apart():
    settings = read_settings(next(path for path in CONFIGS if path.stem == "film"))
    assert resolved_document(settings)["sample"]["size"] == ["400 um", "400 um"]


def test_attachments_make_the_folder_runnable(tmp_path):
    source, run = tmp_path / "source", tmp_path / "run"
    source.mkdir()
    run.mkdir()
    library = CONFIGS[0].parents[1] / "spheru" / "material" / "library"
    record = (library / "isotactic-polypropylene-alpha.toml").read_text()
    start, end = record.index("[growth]"), record.index("[sites]")
    growth = '[growth]\nlaw = "table"\nmobility_temperature = "239.15 K"\nfile = "growth.csv"\n'
    (source / "grade.toml").write_text(f"{record[:start]}{growth}{record[end:]}")
    (source / "growth.csv").write_text("temperature_C,growth_rate_um/min\n110,60\n140,1.3\n")
    (source / "curve.csv").write_text("time_s;temperature_C\n0;205\n600;105\n")
    (source / "run.toml").write_text(
        '[material]\nfile = "grade.toml"\n[cooling]\ntrace = "curve.csv"\n'
        '[sample]\nview = "section"\nspherulites = 100\n'
    )
    settings = read_settings(source / "run.toml")
    for name, content in settings.attachments.items():
        (run / name).write_bytes(content)
    (run / "settings.toml").write_text(write_settings(resolved_document(settings)))
    again = read_settings(run / "settings.toml")
    assert again.material == settings.material
    assert again.history == settings.history
    assert set(again.attachments) == {"material.toml", "trace.csv"}
    assert again.title == "run"


def test_tables_come_in_one_order():
    text = write_settings({"sample": {"view": "block"}, "seed": 1, "material": {}, "title": "a"})
    assert list(tomllib.loads(text)) == ["title", "seed", "material", "sample"]
