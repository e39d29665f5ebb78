"""Bad configurations: the documented exit code, one line each, and no run folder."""

from __future__ import annotations

import subprocess
import sys
from pathlib import Path

import pytest

from rbsim.commands.entry import main

GOOD = """
[numbers]
rayleigh = 1e5
[[thermometers]]
name = "centre"
x = 1.0
z = 0.5
"""

#: What is wrong, the text (appended to or replacing GOOD), and words that the line must contain.
BAD: list[tuple[str, tuple[str, ...]]] = [
    (f"rayleigh = 1e5\n{GOOD}", ("rayleigh", "unknown", "allowed here")),
    ("[numbers]\nprandtl = 1.0", ("numbers.rayleigh", "missing")),
    ("[numbers]\nrayleigh = 0", ("numbers.rayleigh", "= 0", "greater than 0")),
    ("[numbers]\nrayleigh = -5.0", ("numbers.rayleigh", "-5", "greater than 0")),
    ("[numbers]\nrayleigh = 1e13", ("numbers.rayleigh", "at most")),
    ("[numbers]\nrayleigh = nan", ("numbers.rayleigh", "nan")),
    ("[numbers]\nrayleigh = inf", ("numbers.rayleigh", "inf")),
    ('[numbers]\nrayleigh = "1e5"', ("numbers.rayleigh", "'1e5'", "must be a number")),
    ("[numbers]\nrayleigh = true", ("numbers.rayleigh", "must be a number")),
    ("[numbers]\nrayleigh = [1e5]", ("numbers.rayleigh", "must be a number")),
    ("[numbers]\nraleigh = 1e5\nrayleigh = 1e5", ("numbers.raleigh", "did you mean 'rayleigh'")),
    ("[numbers]\nrayleigh = 1e5\nprandtl = 0", ("numbers.prandtl", "at least 0.0001")),
    ("[numbers]\nrayleigh = 1e5\nprandtl = 1e7", ("numbers.prandtl", "at most")),
    ("numbers = 3", ("numbers", "= 3", "must be a table")),
    ("[nubmers]\nrayleigh = 1e5\n[numbers]\nrayleigh = 1e5", ("nubmers", "did you mean 'numbers'")),
    (f"{GOOD}[cell]\naspect_ratio = 0", ("cell.aspect_ratio", "at least 0.05")),
    (f"{GOOD}[cell]\naspect_ratio = 1000", ("cell.aspect_ratio", "at most 200")),
    (f"{GOOD}[cell]\naspekt_ratio = 2", ("cell.aspekt_ratio", "did you mean 'aspect_ratio'")),
    (f"{GOOD}[plates.bottom]\nmotion = 'sliding'", ("plates.bottom.motion", "'no-slip' or 'free-slip'")),
    (f"{GOOD}[plates.top]\nmotion = 1", ("plates.top.motion", "'no-slip' or 'free-slip'")),
    (f"{GOOD}[plates.top]\nthermal = 'fixed-flux'", ("plates.top.thermal", "'fixed-temperature'")),
    (f"{GOOD}[plates.middle]\nmotion = 'no-slip'", ("plates.middle", "bottom, top")),
    (f"grid = 'fine'\n{GOOD}", ("grid", "'fine'", "auto")),
    (f"grid = 64\n{GOOD}", ("grid", "= 64", "auto")),
    (f"{GOOD}[grid]\nnx = 64", ("grid.nz", "missing")),
    (f"{GOOD}[grid]\nnx = 63\nnz = 32", ("grid.nx", "63", "even")),
    (f"{GOOD}[grid]\nnx = 64\nnz = 8", ("grid.nz", "at least 16")),
    (f"{GOOD}[grid]\nnx = 64.5\nnz = 32", ("grid.nx", "64.5", "whole number")),
    (f"{GOOD}[grid]\nnx = 64\nnz = 32\nny = 32", ("grid.ny", "did you mean")),
    (f"{GOOD}[grid]\nnx = 100000\nnz = 32", ("grid.nx", "at most 16384")),
    (f"{GOOD}[time]\nend = 0", ("time.end", "greater than 0")),
    (f"{GOOD}[time]\nend = -1", ("time.end", "greater than 0")),
    (f"{GOOD}[time]\nend = 'late'", ("time.end", "'late'", "must be a number")),
    (f"{GOOD}[time]\ncourant = 1.5", ("time.courant", "at most 1")),
    (f"{GOOD}[time]\ncourant = 0", ("time.courant", "greater than 0")),
    (f"{GOOD}[time]\nstep = 0", ("time.step", "greater than 0")),
    (f"{GOOD}[time]\nstep = 0.5\nend = 0.1", ("time.step", "time.end")),
    (f"{GOOD}[time]\nsteps = 5", ("time.steps", "did you mean 'step'")),
    (f"{GOOD}[start]\nkind = 'rolls'", ("start.kind", "'noise', 'roll' or 'state'")),
    (f"{GOOD}[start]\nkind = 'roll'\nseed = 3", ("start", "remove seed")),
    (f"{GOOD}[start]\nkind = 'state'", ("start", "path")),
    (f"{GOOD}[start]\nseed = -1", ("start.seed", "at least 0")),
    (f"{GOOD}[start]\nseed = 1.5", ("start.seed", "whole number")),
    (f"{GOOD}[start]\namplitude = 2", ("start.amplitude", "at most 1")),
    (f"{GOOD}[start]\nkind = 'roll'\npairs = 0", ("start.pairs", "at least 1")),
    (f"{GOOD}[[thermometers]]\nname = 'far'\nx = 2.0\nz = 0.5", ("thermometers.1.x", "0 <= x < 2")),
    (f"{GOOD}[[thermometers]]\nname = 'left'\nx = -0.1\nz = 0.5", ("thermometers.1.x", "at least 0")),
    (f"{GOOD}[[thermometers]]\nname = 'high'\nx = 1\nz = 1.5", ("thermometers.1.z", "at most 1")),
    (f"{GOOD}[[thermometers]]\nname = 'centre'\nx = 1\nz = 0.6", ("thermometers.1.name", "differ")),
    (f"{GOOD}[[thermometers]]\nname = 'two words'\nx = 1\nz = 0.6", ("thermometers.1.name", "letter")),
    (f"{GOOD}[[thermometers]]\nx = 1\nz = 0.6", ("thermometers.1.name", "missing")),
    (
        f"{GOOD}[[thermometers]]\nname = 'a'\nx = 1\nz = 0.6\ninterval = 0",
        ("thermometers.1.interval", "at least"),
    ),
    ("[numbers]\nrayleigh = 1e5\n[thermometers]\nname = 'a'", ("thermometers", "[[thermometers]]")),
    (f"{GOOD}[output]\nhistory_interval = 0", ("output.history_interval", "at least")),
    (f"{GOOD}[output]\nfield_interval = -1", ("output.field_interval", "at least 0")),
    (f"{GOOD}[output]\nfields_interval = 1", ("output.fields_interval", "did you mean 'field_interval'")),
    ("title = 5\n" + GOOD, ("title", "must be a text")),
    ("[numbers\nrayleigh = 1e5", ("not valid TOML", "line 1")),
    ("[numbers]\nrayleigh = ", ("not valid TOML", "end of document")),
    ("[numbers]\nrayleigh = 1e5\nrayleigh = 2e5", ("not valid TOML",)),
]


def _run(arguments: list[str], capsys: pytest.CaptureFixture[str]) -> tuple[int, list[str]]:
    code = main(arguments)
    captured = capsys.readouterr()
    assert captured.out == ""
    return code, captured.err.splitlines()


@pytest.mark.parametrize("command", ["validate", "run"])
@pytest.mark.parametrize(("text", "words"), BAD, ids=range(len(BAD)))
def test_each_bad_value_gives_one_line_and_no_folder(
    command: str, text: str, words: tuple[str, ...], tmp_path: Path, capsys: pytest.CaptureFixture[str]
) -> None:
    config, out = tmp_path / "cell.toml", tmp_path / "run"
    config.write_text(text, encoding="utf-8")
    code, lines = _run([command, str(config), *(["--out", str(out)] if command == "run" else [])], capsys)
    assert code == 2
    assert len(lines) == 1, lines
    assert lines[0].startswith("rbsim: ")
    assert str(config) in lines[0]
    for word in words:
        assert word in lines[0]
    assert not out.exists()


def test_there_are_at_least_fifty_of_them() -> None:
    assert len({text for text, _ in BAD}) >= 50


def test_several_faults_are_reported_at_once(tmp_path: Path, capsys: pytest.CaptureFixture[str]) -> None:
    config = tmp_path / "cell.toml"
    config.write_text("[numbers]\nrayleigh = -1\nprandtl = 0\n[time]\nend = -1\n", encoding="utf-8")
    code, lines = _run(["validate", str(config)], capsys)
    assert code == 2
    assert [line.split("'")[1] for line in lines] == ["numbers.rayleigh", "numbers.prandtl", "time.end"]


@pytest.mark.parametrize(
    ("override", "words"),
    [
        ("numbers.rayleigh=-1", ("numbers.rayleigh", "greater than 0")),
        ("numbers", ("section.key=value",)),
        ("numbers.raileigh=3", ("did you mean 'rayleigh'",)),
        ("title.deep=3", ("title",)),
        ("thermometers.0.z=7", ("thermometers.0.z", "at most 1")),
    ],
)
def test_bad_overrides_are_named(
    override: str, words: tuple[str, ...], tmp_path: Path, capsys: pytest.CaptureFixture[str]
) -> None:
    config = tmp_path / "cell.toml"
    config.write_text(GOOD, encoding="utf-8")
    code, lines = _run(["validate", str(config), "--set", override], capsys)
    assert code == 2
    assert len(lines) == 1
    for word in words:
        assert word in lines[0]


def test_unreadable_files_give_one_line(tmp_path: Path, capsys: pytest.CaptureFixture[str]) -> None:
    latin = tmp_path / "latin.toml"
    latin.write_bytes(b'title = "caf\xe9"\n')
    for path, word in ((tmp_path / "absent.toml", "no such file"), (tmp_path, "folder"), (latin, "UTF-8")):
        code, lines = _run(["validate", str(path)], capsys)
        assert code == 2
        assert len(lines) == 1
        assert word in lines[0]


def test_the_installed_command_behaves_the_same(tmp_path: Path) -> None:
    config = tmp_path / "cell.toml"
    config.write_text("[numbers]\nrayleigh = -1\n", encoding="utf-8")
    done = subprocess.run(
        [sys.executable, "-m", "rbsim", "run", str(config), "--out", str(tmp_path / "run")],
        capture_output=True,
        text=True,
        check=False,
    )
    assert done.returncode == 2
    assert done.stdout == ""
    assert len(done.stderr.splitlines()) == 1
    assert not (tmp_path / "run").exists()


def test_usage_errors_have_the_same_code(capsys: pytest.CaptureFixture[str]) -> None:
    assert main(["run"]) == 2
    assert main(["dance"]) == 2
    assert main(["run", "x.toml", "--threads", "0"]) == 2
    capsys.readouterr()
    assert main(["--help"]) == 0
    assert "exit codes" in capsys.readouterr().out
