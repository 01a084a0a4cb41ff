"""The README's example runs, and its commands are the ones that are tested."""

from __future__ import annotations

import re
import shutil
import textwrap
from pathlib import Path

ROOT = Path(__file__).parents[1]
README = (ROOT / "README.md").read_text(encoding="utf-8")


def test_the_python_example_runs_and_says_what_it_found(tmp_path, monkeypatch, capsys):
    block = re.search(r"## From Python\n\n((?:    .*\n|\n)+)", README).group(1)
    code = textwrap.dedent(block)
    assert len([line for line in code.splitlines() if line.strip()]) <= 10
    shutil.copytree(ROOT / "configs", tmp_path / "configs")
    monkeypatch.chdir(tmp_path)
    exec(compile(code, "README.md", "exec"), {})  # noqa: S102 (our own text)
    out = capsys.readouterr().out
    # Koscher & Fulchiron set at 10 K/min, computed: 112.2 degC
    assert "expected peak: 112.2 degC" in out
    assert "mean diameter:" in out
    assert (tmp_path / "first-map-from-python" / "summary.json").exists()


def test_every_picture_and_file_that_the_readme_names_is_there():
    named = re.findall(r"\]\(([^)#:]+)\)|`(configs/[^`]+)`", README)
    paths = [a or b for a, b in named]
    assert paths
    assert [path for path in paths if not (ROOT / path).exists()] == []


def test_the_readme_shows_the_two_commands():
    assert "spheru grow configs/first-map.toml" in README
    assert re.search(r"^    python3 -m venv .* -m pytest$", README, flags=re.MULTILINE)
