"""The folder of a series: tables that agree with the numbers, figures of what was varied."""

from __future__ import annotations

import csv
import io
import json
import math

import numpy as np
import pytest

from spheru.config.series import series_from_mapping
from spheru.measure.intervals import Statistic
from spheru.output.plots.series import Picture, plot_curves, plot_sheet, plot_trend, read_picture
from spheru.output.series import answer_object, save_series, series_table
from spheru.run.aim import Answer
from spheru.run.cases import Done, Journal
from spheru.run.points import Aim
from spheru.run.series import Cases, Findings, gather
from spheru.run.workers import Failure
from tests.run.series_parts import SMALL

AGENT = {
    "law": "agent", "dose": "0 ppm", "sites_per_ppm": "1e11 1/m^3", "threshold": "0 ppm",
    "activation": "0 K",
}  # fmt: skip
RATES = {"key": "cooling.steps[0].rate", "values": ["1 K/min", "4 K/min", "16 K/min"]}
DOSES = {"key": "nuclei[0].dose", "values": ["0 ppm", "10 ppm", "1000 ppm"]}


def picture(pixel=1e-6):
    labels = np.arange(1, 17, dtype=np.uint8).reshape(4, 4).repeat(10, axis=0).repeat(10, axis=1)
    stream = io.BytesIO()
    line = np.linspace(0.0, 1.0, 50)
    np.savez_compressed(
        stream, labels=labels, pixel=pixel, periodic=(True, True), time=100 * line,
        temperature=400 - 50 * line, fraction=line, fraction_estimate=line, cools=True,
    )  # fmt: skip
    return stream.getvalue()


@pytest.fixture
def made(tmp_path):
    """Return series, findings and journal of made-up runs: D = 100 (rate)^-1/2, peaks by dose."""

    def make(*vary, replicas=2, fail=(), **table):
        document = SMALL | {"nuclei": [AGENT], "series": {"vary": list(vary), **table}}
        series, maker = series_from_mapping(document)
        journal = Journal(tmp_path / "series", series.base)
        names, points, failures = Cases(maker), [], []
        for point in series.points():
            for replica in range(replicas):
                case = names.case(point, replica)
                if point.label in fail:
                    failures.append(Failure(case=case, message="it broke\nin two lines"))
                    continue
                size = 100 * float(point.columns.get("rate_K_per_min", 1.0)) ** -0.5 + replica
                dose = float(point.columns.get("dose_ppm", 0.0))
                peak = 112.0 + 7.0 * dose / 1000
                numbers = {
                    "spherulites_measured": 50,
                    "peak_temperature_C": peak,
                    **{
                        f"{name}{end}": size * factor
                        for name in ("number_mean_diameter_um", "diameter_of_mean_volume_um")
                        for end, factor in (("", 1.0), ("_ci95_low", 0.98), ("_ci95_high", 1.02))
                    },
                    "estimate_diameter_of_mean_volume_um": size - replica,
                    "estimate_half_time_of_hold_s": 100.0 - dose / 100,
                    "half_time_from": "start of the history",
                }
                shown = picture() if replica == 0 else None
                journal.add(case, Done(numbers=numbers, warnings=("few",), picture=shown))
            found = gather(point, names, replicas, journal)
            points.extend([] if found is None else [found])
        findings = Findings(points=tuple(points), failures=tuple(failures))
        return series, findings, journal

    return make


def rows_of(path):
    return list(csv.DictReader(io.StringIO(path.read_text())))


def test_means_of_replicas_have_the_interval_of_independent_runs(made):
    _, findings, _ = made(RATES)
    mean = findings.points[0].numbers["number_mean_diameter_um"]
    # 100 and 101 um, each within 2 %: half widths 2 and 2.02, (2^2 + 2.02^2)^(1/2)/2 = 1.4213
    assert mean.value == 100.5
    assert mean.high - mean.value == pytest.approx(1.42131, rel=1e-5)


def test_every_run_and_every_point_has_its_row(made):
    series, findings, journal = made(RATES)
    save_series(series, findings, journal, "text")
    cases, table = (rows_of(journal.folder / name) for name in ("cases.csv", "table.csv"))
    assert [(row["rate_K_per_min"], row["replica"]) for row in cases] == [
        ("1", "0"), ("1", "1"), ("4", "0"), ("4", "1"), ("16", "0"), ("16", "1")
    ]  # fmt: skip
    assert cases[3]["number_mean_diameter_um"] == "51"
    assert [row["spherulites_measured"] for row in table] == ["100", "100", "100"]
    assert [row["number_mean_diameter_um"] for row in table] == ["100.5", "50.5", "25.5"]


def test_the_table_has_local_exponents_against_the_rate(made):
    series, findings, _ = made(RATES, replicas=1)
    for row in series_table(series, findings):
        assert row["local_exponent_mean_diameter"] == pytest.approx(-0.5)
        assert row["estimate_local_exponent_mean_volume"] == pytest.approx(-0.5)
        assert row["local_exponent_mean_diameter_ci95_low"] < -0.5


def test_exponents_keep_to_the_points_of_one_dose(made):
    series, findings, _ = made(RATES, DOSES, replicas=1)
    assert [row["local_exponent_mean_diameter"] for row in series_table(series, findings)] == (
        pytest.approx([-0.5] * 9)
    )


def test_the_efficiency_counts_from_the_point_without_agent(made):
    series, findings, _ = made(DOSES, self_seeded_peak="140 degC", half_time_at="130 degC")
    rows = series_table(series, findings)
    # 119 degC between 112 and 140 degC: 25 %
    assert rows[2]["nucleating_efficiency_percent"] == pytest.approx(25.0)
    assert rows[0]["nucleating_efficiency_percent"] == 0.0
    assert rows[2]["estimate_half_time_at_130_C_s"] == 90.0


def test_without_a_neat_point_the_efficiency_needs_the_neat_peak(made):
    doses = DOSES | {"values": ["10 ppm", "1000 ppm"]}
    series, findings, _ = made(doses, self_seeded_peak="140 degC")
    assert series_table(series, findings)[1]["nucleating_efficiency_percent"] is None


def test_a_stated_neat_peak_is_used(made):
    doses = DOSES | {"values": ["10 ppm", "1000 ppm"]}
    series, findings, _ = made(doses, self_seeded_peak="140 degC", neat_peak="110 degC")
    assert series_table(series, findings)[1]["nucleating_efficiency_percent"] == pytest.approx(30.0)


def test_what_failed_is_listed_with_its_settings_until_it_succeeds(made):
    from spheru.config.read import read_settings

    series, findings, journal = made(RATES, fail=("rate = 4 K/min",))
    save_series(series, findings, journal, "text")
    answer = json.loads((journal.folder / "answer.json").read_text())
    assert answer["failed"][0] == {
        "case": "rate = 4 K/min", "replica": 0, "message": "it broke\nin two lines"
    }  # fmt: skip
    files = sorted((journal.folder / "failed").iterdir())
    assert len(files) == 2
    assert files[0].read_text().splitlines()[:3] == [
        "# rate = 4 K/min, replica 0", "# it broke", "# in two lines"
    ]  # fmt: skip
    assert read_settings(files[0]).document["cooling"]["steps"][0]["rate"] == "4 K/min"
    save_series(series, Findings(points=findings.points, failures=()), journal, "text")
    assert list((journal.folder / "failed").iterdir()) == []


def test_the_same_cases_give_the_same_bytes(made):
    series, findings, journal = made(RATES)
    save_series(series, findings, journal, "text")
    first = {path.name: path.read_bytes() for path in journal.folder.iterdir() if path.is_file()}
    save_series(series, findings, journal, "text")
    assert {p.name: p.read_bytes() for p in journal.folder.iterdir() if p.is_file()} == first
    assert {"against-rate.png", "maps.png", "conversion.png", "series.toml"} <= first.keys()


def test_a_series_without_any_finished_case_still_has_its_tables(made):
    series, findings, journal = made(RATES, fail=[f"rate = {r}" for r in RATES["values"]])
    save_series(series, findings, journal, "text")
    assert json.loads((journal.folder / "answer.json").read_text())["points"] == []


# ------------------------------------------------------------------ figures


def test_the_trend_shows_points_intervals_and_mean_field(made):
    series, findings, _ = made(RATES)
    size, course = plot_trend(findings.points, series.axes[0])
    assert (size.get_xscale(), size.get_yscale()) == ("log", "log")
    assert size.get_ylabel() == "diameter (µm)"
    assert course.get_xlabel() == "rate (K/min)"
    drawn = [line.get_ydata().tolist() for line in size.lines]
    assert [100.5, 50.5, 25.5] in drawn
    # the mean over the replicas of what was made up: size without the replica
    assert [100.0, 50.0, 25.0] in drawn


def test_a_dose_of_nothing_has_its_place_on_the_axis(made):
    series, findings, _ = made(DOSES)
    size, course = plot_trend(findings.points, series.axes[0])
    assert size.get_xscale() == "symlog"
    assert course.get_xticklabels()[0].get_text() == "0"


def test_each_combination_of_the_rest_has_its_own_points(made):
    series, findings, _ = made(RATES, DOSES)
    size, _ = plot_trend(findings.points, series.axes[0])
    names = [text.get_text() for text in size.get_legend().get_texts()]
    assert set(names) == {"mean field", "dose = 0 ppm", "dose = 10 ppm", "dose = 1000 ppm"}


def test_the_sheet_shows_every_map_at_one_scale():
    maps = [(str(k), read_picture(picture(pixel))) for k, pixel in enumerate((1e-6, 2e-6))]
    ax = plot_sheet(maps)
    sheet = ax.images[0].get_array()
    assert [text.get_text() for text in ax.texts][:2] == ["0", "1"]
    # squares of 10 pixels; window: 10 (10 um 20 um)^(1/2) = 141 um on 240 points
    for left, square in ((0, 10e-6), (248, 20e-6)):
        row = np.asarray(sheet[-60, left : left + 240]).astype(int)
        edges = np.count_nonzero(np.abs(np.diff(row, axis=0)).sum(axis=1))
        assert edges == pytest.approx(141.42e-6 / square, abs=1)


def test_a_map_without_a_label_stays_grey():
    shown = read_picture(picture())
    melt = Picture(**{name: getattr(shown, name) for name in Picture.__slots__}
                   | {"labels": np.zeros((10, 10), dtype=np.uint8)})  # fmt: skip
    ax = plot_sheet([("melt", melt), ("solid", shown)])
    assert (np.asarray(ax.images[0].get_array())[100, 100] == (236, 236, 236)).all()


def test_the_curves_are_named_and_coloured_in_order():
    ax = plot_curves([(str(k), read_picture(picture())) for k in range(3)])
    assert ax.get_xlabel() == "temperature, on cooling (°C)"
    assert [text.get_text() for text in ax.get_legend().get_texts()] == ["0", "1", "2"]
    assert len({line.get_color() for line in ax.lines}) == 3


# ------------------------------------------------------------------ answers


def test_the_answer_of_an_aim_has_units_and_no_number_that_json_cannot_hold():
    aim = Aim(
        title="t", base=SMALL, key="nuclei[0].dose", name="dose", unit="ppm", low=1e-6, high=5e-3,
        scale="logarithmic", quantity="mean diameter", target=20e-6,
    )  # fmt: skip
    answer = Answer(
        aim=aim, reached=False, confirmed=True, value=Statistic(value=5000.0),
        result=Statistic(value=25.0, low=24.0, high=26.0), tried=5000.0, others=(),
        span=(25.0, 50.0), points=(), failures=(), notes=("a note",),
    )  # fmt: skip
    found = json.loads(json.dumps(answer_object(answer), allow_nan=False))
    assert found["target_number_mean_diameter_um"] == pytest.approx(20.0)
    assert (found["from"], found["to"], found["unit"]) == (
        pytest.approx(1.0), pytest.approx(5000.0), "ppm",
    )  # fmt: skip
    assert found["value_low"] is None
    assert not math.isnan(found["number_mean_diameter_um"])
