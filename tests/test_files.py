from __future__ import annotations

import os

import numpy as np
import pytest

from spheru.errors import DataError
from spheru.files import append_line, read_table, read_text, sha256, table_text, write_atomic

TRACE = {"time": "s", "temperature": "K"}

GOOD = [
    pytest.param("time_s,temperature_C\n0,205\n60,195\n", id="underscore"),
    pytest.param("time [s],temperature [degC]\n0,205\n60,195\n", id="brackets"),
    pytest.param("time (min);temperature (°C)\n0;205\n1;195\n", id="semicolon-and-minutes"),
    pytest.param("time / min\ttemperature / K\n0\t478.15\n1\t468.15\n", id="tab-and-slash"),
    pytest.param("\ufefftime_s,temperature_C\r\n0,205\r\n60,195\r\n", id="byte-order-mark"),
    pytest.param("# hot stage\ntime_s,temperature_C\n\n0,205\n# pause\n60,195", id="comments"),
    pytest.param("No.,Temperature_C,Time_s\n1,205,0\n2,195,60\n", id="other-columns-and-case"),
]

FAULTS = [
    pytest.param("", "expected a header and at least one row", id="empty"),
    pytest.param("time_s,temperature_C\n", "at least one row", id="no-row"),
    pytest.param("time_s,temp_C\n0,1\n", "one column 'temperature'", id="column-missing"),
    pytest.param("time_s,temperature\n0,1\n", "column 'temperature' has no unit", id="no-unit"),
    pytest.param("time_s,temperature_m\n0,1\n", "expected a temperature", id="wrong-unit"),
    pytest.param("time_s,time_min,temperature_C\n0,0,1\n", "found 2", id="column-twice"),
    pytest.param("time_s,temperature_C\n0,205\n60,n/a\n",
                 "row 3, column temperature: expected a temperature as a finite number, got 'n/a'",
                 id="no-number"),
    pytest.param("time_s,temperature_C\n0,nan\n", "row 2, column temperature", id="nan"),
    pytest.param("time_s,temperature_C\n0,\n", "got ''", id="empty-cell"),
    pytest.param("time_s;temperature_C\n0;205,5\n", "write a decimal point", id="decimal-comma"),
    pytest.param("time_s,temperature_C\n0,205,5\n", "row 2: expected 2 cells", id="long-row"),
    pytest.param("time_s,temperature_C\n0\n", "row 2: expected 2 cells", id="short-row"),
    pytest.param("time_s,temperature_C\n0,205\n1,-300\n", "row 3, column temperature: lies below",
                 id="absolute-zero"),
    pytest.param('time_s,temperature_C\n"0,205\n1,2\n', "quotation mark", id="open-quote"),
]  # fmt: skip


@pytest.mark.parametrize("text", GOOD)
def test_table_is_read_in_si_units(tmp_path, text):
    path = tmp_path / "trace.csv"
    path.write_bytes(text.encode())
    table = read_table(path, TRACE)
    np.testing.assert_allclose(table["time"], [0.0, 60.0])
    np.testing.assert_allclose(table["temperature"], [478.15, 468.15])


@pytest.mark.parametrize(("text", "message"), FAULTS)
def test_table_fault_names_file_and_place(tmp_path, text, message):
    path = tmp_path / "trace.csv"
    path.write_text(text, encoding="utf-8")
    with pytest.raises(DataError) as fault:
        read_table(path, TRACE)
    assert message in str(fault.value)
    assert "trace.csv" in str(fault.value)
    assert "\n" not in str(fault.value)


def test_column_of_differences_refuses_a_temperature_scale(tmp_path):
    path = tmp_path / "sites.csv"
    path.write_text("undercooling_C\n20\n")
    with pytest.raises(DataError, match="write the difference in K"):
        read_table(path, {"undercooling": "K"}, differences={"undercooling"})


def test_column_name_may_hold_the_name_of_another(tmp_path):
    path = tmp_path / "growth.csv"
    path.write_text("temperature_K,growth_rate_um_per_min,growth_s\n400,6,1\n")
    table = read_table(path, {"temperature": "K", "growth_rate": "m/s"})
    assert table["growth_rate"].tolist() == pytest.approx([1e-7])


def test_text_fault_is_one_clear_line(tmp_path):
    with pytest.raises(DataError, match="there is no such file"):
        read_text(tmp_path / "none.csv")
    with pytest.raises(DataError, match="expected a file, found a folder"):
        read_text(tmp_path)
    (tmp_path / "latin.csv").write_bytes(b"time_s\n\xb0C\n")
    with pytest.raises(DataError, match=r"latin\.csv, row 2: expected text in UTF-8, .*0xb0"):
        read_text(tmp_path / "latin.csv")
    with pytest.raises(DataError, match="cannot be read"):
        read_text("a\0b")


def test_atomic_write_leaves_all_or_nothing(tmp_path, monkeypatch):
    path = tmp_path / "summary.json"
    write_atomic(path, "old\n")
    assert path.read_bytes() == b"old\n"

    def full(_):
        raise OSError(28, "no space left on device")

    monkeypatch.setattr(os, "fsync", full)
    with pytest.raises(OSError, match="no space"):
        write_atomic(path, "new\n")
    assert path.read_bytes() == b"old\n"
    assert [entry.name for entry in tmp_path.iterdir()] == ["summary.json"]


def test_lines_are_appended_and_hashed(tmp_path):
    path = tmp_path / "log"
    append_line(path, "a")
    append_line(path, "b")
    assert path.read_bytes() == b"a\nb\n"
    # SHA-256 of the empty text: FIPS 180-4 example
    (tmp_path / "empty").write_bytes(b"")
    assert sha256(tmp_path / "empty") == (
        "e3b0c44298fc1c149afbf4c8996fb92427ae41e4649b934ca495991b7852b855"
    )


def test_written_table_reads_back(tmp_path):
    path = tmp_path / "conversion.csv"
    path.write_text(table_text({"time_s": [0.0, 1.5], "temperature_C": [205.0, 204.75]}))
    table = read_table(path, TRACE)
    np.testing.assert_allclose(table["temperature"], [478.15, 477.9])


def test_table_text_shows_flags_and_gaps():
    text = table_text({"label": [1, 2], "touches": [True, False], "size": [None, 0.1]})
    assert text == "label,touches,size\n1,yes,\n2,no,0.1\n"
