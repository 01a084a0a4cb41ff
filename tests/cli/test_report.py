"""`spheru report` as its user meets it."""

from __future__ import annotations

import pytest

from spheru.cli.main import main
from spheru.config.read import settings_from_mapping
from spheru.output.folder import save_run
from spheru.run.grow import grow

DOCUMENT = {
    "title": "small",
    "material": {"name": "isotactic-polypropylene-alpha"},
    "cooling": {"start": "205 degC", "steps": [{"rate": "10 K/min", "until": "60 degC"}]},
    "sample": {"view": "section", "size": ["200 um", "200 um"], "pixel": "4 um"},
}


def call(capsys, *words):
    with pytest.raises(SystemExit) as left:
        main(["report", *map(str, words)])
    return left.value.code, *capsys.readouterr()


def test_the_report_of_a_run_is_written_again(capsys, tmp_path):
    run = save_run(grow(settings_from_mapping(DOCUMENT)), tmp_path / "run")
    first = (run / "report.html").read_bytes()
    (run / "report.html").unlink()
    code, out, err = call(capsys, run)
    assert (code, out, err) == (0, f"written to {run / 'report.html'}\n", "")
    assert (run / "report.html").read_bytes() == first


def test_a_folder_that_holds_no_run_is_refused_in_one_line(capsys, tmp_path):
    code, out, err = call(capsys, tmp_path)
    assert (code, out) == (2, "")
    assert err.startswith(f"spheru: {tmp_path}: holds no run, summary.json is missing")
    assert err.count("\n") == 1
    assert list(tmp_path.iterdir()) == []
