"""The report of a run: one file, from the folder's files alone, all numbers in it."""

from __future__ import annotations

import base64
import json
import math
import re
import shutil
from html.parser import HTMLParser

import pytest

from spheru.config.read import settings_from_mapping
from spheru.errors import ConfigError, DataError, FolderError, ValidityError
from spheru.output import run_report as room
from spheru.output.asked import describe_settings
from spheru.output.folder import save_run
from spheru.output.report import render_report, scale_of, written
from spheru.output.run_report import run_content, run_report, write_report
from spheru.run.grow import grow

HOSTILE = '</title><script>alert("x")</script><img src=http://example.org/x.png> & "quoted"'
DOCUMENT = {
    "title": HOSTILE,
    "seed": 5,
    "material": {"name": "isotactic-polypropylene-alpha", "pressure": "0.1 MPa"},
    "cooling": {"start": "205 degC", "steps": [{"rate": "10 K/min", "until": "60 degC"}]},
    "nuclei": [
        {
            "law": "agent",
            "dose": "1000 ppm",
            "particle": {"d50_volume": "1 um", "spread": 1.6, "density": "2750 kg/m^3"},
            "active": 0.01,
            "activation": "20 K",
        }
    ],
    "sample": {"view": "section", "spherulites": 150, "pixels_across": 12, "edges": "periodic"},
}


class Reader(HTMLParser):
    """What a browser would find: tags with their attributes, text, cells of tables by row."""

    def __init__(self, html) -> None:
        super().__init__()
        self.tags, self.text, self.rows, self.inside = [], [], [], False
        self.feed(html)

    def handle_starttag(self, tag, attrs):
        self.tags.append((tag, dict(attrs)))
        if tag == "tr":
            self.rows.append([])
        if tag in {"td", "th"}:
            self.rows[-1].append("")
            self.inside = True

    def handle_endtag(self, tag):
        if tag in {"td", "th"}:
            self.inside = False

    def handle_data(self, data):
        self.text.append(data)
        if self.inside:
            self.rows[-1][-1] += data

    def all(self, tag):
        return [attributes for name, attributes in self.tags if name == tag]


@pytest.fixture(scope="module")
def grown(tmp_path_factory):
    folder = tmp_path_factory.mktemp("report") / "run"
    return save_run(grow(settings_from_mapping(DOCUMENT)), folder)


@pytest.fixture
def run(grown, tmp_path):
    """A copy of a run's folder that a test may spoil."""
    return shutil.copytree(grown, tmp_path / "run")


def change(run, **changes):
    path = run / "summary.json"
    summary = json.loads(path.read_bytes()) | changes
    path.write_text(json.dumps(summary))
    return summary


def four_digits(value):
    """Return a number as the report writes it, found another way."""
    if isinstance(value, int):
        return str(value)
    decimals = 3 - math.floor(math.log10(abs(value)))
    rounded = round(value, decimals)
    return f"{rounded:.{max(3 - math.floor(math.log10(abs(rounded))), 0)}f}"


def test_a_grown_folder_holds_the_report_that_its_files_give(grown):
    assert (grown / "report.html").read_text(encoding="utf-8") == run_report(grown)


def test_the_same_files_give_the_same_bytes_wherever_they_stand(grown, run):
    assert write_report(run) == run / "report.html"
    assert (run / "report.html").read_bytes() == (grown / "report.html").read_bytes()


def test_a_hostile_title_stays_text(grown):
    html = run_report(grown)
    page = Reader(html)
    assert not page.all("script")
    assert len(page.all("img")) == 3
    assert html.count("&lt;script&gt;alert(&#34;x&#34;)&lt;/script&gt;") >= 2
    assert HOSTILE in "".join(page.text)


def test_nothing_is_run_or_fetched(run):
    html = run_report(run)
    page = Reader(html)
    reaching = {
        "script",
        "link",
        "iframe",
        "object",
        "embed",
        "form",
        "base",
        "a",
        "audio",
        "video",
    }
    assert not reaching & {tag for tag, _ in page.tags}
    for tag, attributes in page.tags:
        assert not [name for name in attributes if name.startswith("on") or name == "style"], tag
        assert not {"href", "srcset", "action", "background"} & set(attributes), tag
    assert all(image["src"].startswith("data:image/png;base64,") for image in page.all("img"))
    bare = re.sub(r'src="data:image/png;base64,[A-Za-z0-9+/=]+"', "", html)
    bare = bare.replace("http://example.org/x.png", "")  # of the hostile title, as text
    assert not re.search(r"https?:|//|@import|url\(", bare, re.IGNORECASE)
    policy = next(m for m in page.all("meta") if "http-equiv" in m)["content"]
    assert "default-src 'none'" in policy


def test_pictures_are_those_of_the_folder_each_with_words_in_its_place(grown):
    images = Reader(run_report(grown)).all("img")
    content = [base64.b64decode(image["src"].partition(",")[2]) for image in images]
    names = ("map.png", "sizes.png", "conversion.png")
    assert content == [(grown / name).read_bytes() for name in names]
    summary = json.loads((grown / "summary.json").read_bytes())
    assert f"{summary['spherulites']} spherulites" in images[0]["alt"]
    assert "scale bar" in images[0]["alt"]
    assert four_digits(summary["number_mean_diameter_um"]) in images[1]["alt"]
    assert four_digits(summary["peak_temperature_C"]) in images[2]["alt"]
    drawn = Reader(run_report(grown)).all("svg")
    assert drawn
    assert all(svg.get("aria-label") for svg in drawn if svg.get("role") == "img")


def test_every_number_of_the_summary_stands_in_the_table(grown):
    summary = json.loads((grown / "summary.json").read_bytes())
    rows = [row for row in Reader(run_report(grown)).rows if len(row) == 4]
    numbers = {
        key: value
        for key, value in summary.items()
        if isinstance(value, int | float)
        and "_ci95_" not in key
        and "_smoothed_" not in key
        and key not in {"format_version", "seed", "replica", "pixel_um"}
    }
    assert len(numbers) > 15
    for key, value in numbers.items():
        cells = [four_digits(value), "–", "–"]
        low, high = (summary.get(f"{key}_ci95_{end}") for end in ("low", "high"))
        if low is not None:
            cells[1] = f"{four_digits(low)} to {four_digits(high)}"
        if (expected := summary["estimate"].get(key)) is not None:
            cells[2] = four_digits(expected)
        assert cells in [row[1:] for row in rows], key


def test_a_number_that_the_report_does_not_know_yet_gets_a_row_with_its_unit(run):
    change(run, surface_area_per_mm=12.3456, surface_area_per_mm_ci95_low=12.0,
           surface_area_per_mm_ci95_high=13.0)  # fmt: skip
    rows = Reader(run_report(run)).rows
    assert ["surface area [1/mm]", "12.35", "12.00 to 13.00", "–"] in rows


def test_tables_have_headings_of_columns_and_rows(grown):
    page = Reader(run_report(grown))
    assert {th["scope"] for th in page.all("th")} == {"col", "row", "rowgroup"}
    assert len(page.all("caption")) == len(page.all("table")) == 3


def test_the_answer_is_one_sentence_with_both_kinds_of_doubt(grown):
    summary = json.loads((grown / "summary.json").read_bytes())
    answer = "".join(text for text, _ in run_content(grown)["answer"])
    keys = ("number_mean_diameter_um", "peak_temperature_C")
    for key in (f"{key}{end}" for key in keys for end in ("", "_ci95_low", "_ci95_high")):
        assert four_digits(summary[key]) in answer
    for end in ("low", "high"):
        assert four_digits(summary["kinetic_uncertainty"][f"typical_diameter_{end}_um"]) in answer
    assert answer.endswith("µm.")
    assert len(re.findall(r"\.(?= |$)", answer)) == 1


@pytest.mark.parametrize(
    ("changes", "words"),
    [
        pytest.param(
            {"peak_temperature_C": None, "half_time_s": 497.64, "half_time_from": "start of the "
             "hold"},
            "half of the crystallisation after 497.6 s from the start of the hold",
            id="isothermal",
        ),
        pytest.param({"fraction_transformed": 0.387}, "only 38.70 % transformed", id="unfinished"),
        pytest.param({"number_mean_diameter_um": None}, "No spherulite", id="nothing grew"),
    ],
)  # fmt: skip
def test_the_answer_says_what_there_is(run, changes, words):
    change(run, **changes)
    assert words in "".join(text for text, _ in run_content(run)["answer"])
    run_report(run)


def test_warnings_and_the_record_values_from_memory_are_told(run):
    change(run, warnings=["few spherulites: about 12 in the picture", "fitted to 130 degC"])
    content = run_content(run)
    assert content["warnings"] == ["few spherulites: about 12 in the picture", "fitted to 130 °C"]
    text = "".join(Reader(run_report(run)).text)
    assert "few spherulites: about 12 in the picture" in text
    rows = [row[0] for _, rows in content["sources"].groups for row in rows]
    memory = settings_from_mapping(DOCUMENT).material.provenance
    assert rows == [key for key, p in memory.items() if p.mark == "memory"]
    assert f"{len(rows)} of the {len(memory)} values" in text


def test_a_file_that_was_changed_since_is_told(run):
    (run / "sizes.png").write_bytes((run / "map.png").read_bytes())
    assert any("sizes.png is not as the run wrote it" in w for w in run_content(run)["warnings"])


def test_settings_seed_versions_and_hashes_are_told(grown):
    summary = json.loads((grown / "summary.json").read_bytes())
    text = "".join(Reader(run_report(grown)).text)
    assert (grown / "settings.toml").read_text() in text
    assert f"spheru {summary['spheru_version']}" in text
    assert all(digest in text for digest in summary["files"].values())
    assert summary["settings_sha256"] in text


def test_cautions_and_scope_are_told(grown):
    text = "".join(Reader(run_report(grown)).text)
    for words in ("do not qualify a part", "Hot stages", "fumes", "powders", "licensed practice"):
        assert words in text


def test_what_was_asked_stands_in_the_units_of_the_user(grown):
    asked = {name: "; ".join(lines) for name, lines in run_content(grown)["asked"]}
    assert asked["Material"] == "Isotactic polypropylene, alpha form; at 0.1 MPa"
    assert asked["Cooling"] == "From 205 °C, at 10 K/min to 60 °C"
    assert asked["Nuclei"].startswith("The record's own sites; Nucleating agent: dose 1000 ppm, ")
    assert "median diameter by volume 1 µm" in asked["Nuclei"]
    assert "density 2750 kg/m³" in asked["Nuclei"]
    assert asked["Sample"].startswith("Plane section of a bulk sample; window ")


def test_steps_nuclei_and_edges_of_all_kinds_are_put_into_words():
    steps = [
        {"rate": "60 K/min", "until": "130 degC"},
        {"hold": "5 min"},
        {"quench": "40 degC", "time_constant": "3 s", "for": "60 s"},
    ]
    settings = settings_from_mapping(
        DOCUMENT
        | {
            "material": {"name": "isotactic-polypropylene-alpha", "background": False},
            "cooling": {"start": "205 degC", "steps": steps},
            "nuclei": [
                {"law": "surface", "on": ["z-low", "z-high"], "density": "1e9 1/m^2"},
                {"law": "fixed", "density": "3e12 1/m^3"},
            ],
            "sample": {
                "view": "film", "thickness": "30 um", "sight": "face", "size": ["90 um", "60 um"],
                "pixel": "1 um", "edges": {"x": "periodic", "y": "cut"},
            },
        }
    )  # fmt: skip
    asked = dict(describe_settings(settings, replica=2))
    (cooling,) = asked["Cooling"]
    assert cooling.startswith(
        "From 205 °C, at 60 K/min to 130 °C, then hold for 5 min, then quench"
    )
    assert cooling.endswith("quench to 40 °C with a time constant of 3 s for 60 s")
    assert asked["Nuclei"] == [
        "Nuclei on faces of the sample: on z-low, z-high, density 1e9 1/m²",
        "Nuclei that are there from the start: density 3e12 1/m³",
    ]
    assert asked["Sample"] == [
        "Film between two faces, 30 µm thick",
        "window 90 µm × 60 µm, pixel 1 µm",
        "edges x periodic, y cut",
        "picture: face",
        "seed 5, replica 2",
    ]


def test_a_measured_trace_is_put_into_words(tmp_path):
    (tmp_path / "trace.csv").write_text("time_s,temperature_C\n0,205\n600,105\n1200,40\n")
    document = DOCUMENT | {"cooling": {"trace": "trace.csv"}}
    asked = dict(describe_settings(settings_from_mapping(document, folder=tmp_path)))
    assert asked["Cooling"] == ["Measured trace trace.csv: 1200 s, from 205.0 °C to 40.00 °C"]


def test_an_empty_part_of_a_report_is_left_out(grown):
    content = run_content(grown)
    bare = content | {
        "warnings": [], "pictures": [], "scales": [], "table": None, "sources": None,
        "files": None, "settings": "",
    }  # fmt: skip
    page = Reader(render_report(bare))
    assert not {"img", "svg", "table", "pre"} & {tag for tag, _ in page.tags}


@pytest.mark.parametrize(
    ("spoil", "message"),
    [
        pytest.param(shutil.rmtree, r"summary\.json is missing", id="no folder"),
        pytest.param(lambda run: (run / "summary.json").unlink(), "holds no run", id="no summary"),
        pytest.param(
            lambda run: (run / "summary.json").write_text("not json"),
            "is not the summary of a run",
            id="no JSON",
        ),
        pytest.param(
            lambda run: (run / "summary.json").write_text("[1]"),
            "is not the summary of a run",
            id="a list",
        ),
        pytest.param(
            lambda run: change(run, format_version=99),
            "expected format_version 1, got 99",
            id="another format",
        ),
        pytest.param(
            lambda run: (run / "sizes.png").unlink(), r"run: sizes\.png missing", id="a picture"
        ),
        pytest.param(
            lambda run: [(run / name).unlink() for name in ("map.png", "settings.toml")],
            r"run: settings\.toml, map\.png missing",
            id="two files",
        ),
    ],
)
def test_a_folder_that_is_no_whole_run_is_refused_in_one_line(run, spoil, message):
    spoil(run)
    with pytest.raises(DataError, match=message) as caught:
        write_report(run)
    assert "\n" not in str(caught.value)


def test_settings_that_do_not_read_are_named(run):
    (run / "settings.toml").write_text("title = ")
    with pytest.raises(ConfigError, match=r"settings\.toml"):
        run_report(run)


def test_a_disk_that_refuses_is_told_and_the_old_report_stays(run, monkeypatch):
    before = (run / "report.html").read_bytes()

    def refuse(*args):
        raise OSError(28, "No space left on device")

    monkeypatch.setattr(room, "write_atomic", refuse)
    with pytest.raises(FolderError, match="No space left") as caught:
        write_report(run)
    assert "\n" not in str(caught.value)
    assert (run / "report.html").read_bytes() == before


@pytest.mark.parametrize(
    ("value", "text"),
    [
        (None, ""),
        (7, "7"),
        (0.0, "0"),
        (1.0, "1.000"),
        (0.00123456, "0.001235"),
        (9.99996, "10.00"),
        (123456.7, "123500"),
        (-56.789, "-56.79"),
    ],
)
def test_numbers_have_four_digits(value, text):
    assert written(value) == text


def test_a_scale_puts_its_values_in_order_and_a_value_without_a_range_on_a_point():
    scale = scale_of("T", "°C", [("a", 100.0, 90.0, 110.0, True), ("b", 95.0, None, None, False)])
    a, b = scale.bars
    assert 0 < a.low < b.value < a.value < a.high < 100
    assert b.low == b.value == b.high
    assert b.words == "95.00 °C"
    assert 2 <= len(scale.ticks) <= 7


def test_a_scale_without_extent_is_refused():
    with pytest.raises(ValidityError, match="expected values that differ"):
        scale_of("T", "°C", [("a", 130.0, 130.0, 130.0, True)])
