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

#: What is wrong: the whole text of a configuration, and words that its one line must contain.
WHOLE: list[tuple[str, tuple[str, ...]]] = [
    ("", ("'numbers.rayleigh'", "missing", "> 0 and <= 1e12")),
    ("[numbers]\nprandtl = 1.0", ("'numbers.rayleigh'", "missing")),
    ("rayleigh = 1e5", ("'rayleigh' = 100000.0", "unknown", "did you mean 'numbers.rayleigh'")),
    ("[numbers]\nraleigh = 1e5", ("'numbers.raleigh' = 100000.0", "did you mean 'numbers.rayleigh'")),
    ("[nubmers]\nrayleigh = 1e5", ("'nubmers'", "unknown", "did you mean 'numbers'")),
    ("numbers = 3", ("'numbers' = 3", "must be a table")),
    ("[numbers]\nrayleigh = 0", ("'numbers.rayleigh' = 0", "> 0 and <= 1e12")),
    ("[numbers]\nrayleigh = -5.0", ("'numbers.rayleigh' = -5.0", "> 0 and <= 1e12")),
    ("[numbers]\nrayleigh = 1e13", ("'numbers.rayleigh' = 10000000000000.0", "<= 1e12")),
    ("[numbers]\nrayleigh = nan", ("'numbers.rayleigh' = nan", "> 0 and <= 1e12")),
    ("[numbers]\nrayleigh = inf", ("'numbers.rayleigh' = inf", "> 0 and <= 1e12")),
    ('[numbers]\nrayleigh = "1e5"', ("'numbers.rayleigh' = \"1e5\"", "must be a number")),
    ("[numbers]\nrayleigh = true", ("'numbers.rayleigh' = true", "must be a number")),
    ("[numbers]\nrayleigh = [1e5]", ("'numbers.rayleigh' = [100000.0]", "must be a number")),
    ("[numbers]\nrayleigh = {value = 1e5}", ("'numbers.rayleigh' = {value =", "must be a number")),
    ("[numbers]\nrayleigh = 2026-01-01", ("'numbers.rayleigh' = 2026-01-01", "must be a number")),
    (f"[numbers]\nrayleigh = 1{'0' * 400}", ("'numbers.rayleigh' = 0x", "<= 1e12")),
    (f"[numbers]\nrayleigh = 0x{'f' * 5000}", ("'numbers.rayleigh' = 0xfff", "<= 1e12")),
    (f"[numbers]\nrayleigh = {'9' * 5000}", ("not valid TOML", "too many digits")),
    ("[numbers\nrayleigh = 1e5", ("line 1", '"[numbers"', "not valid TOML")),
    ("[numbers]\nrayleigh = ", ("line 2", '"rayleigh ="', "not valid TOML")),
    ("[numbers]\nrayleigh = 1e5x", ("line 2", '"rayleigh = 1e5x"', "not valid TOML")),
    ("[numbers]\nrayleigh = 1e5\nrayleigh = 2e5", ("line 3", '"rayleigh = 2e5"', "given twice")),
    (f"a = {'[' * 100_000}", ("not valid TOML", "nested too deeply")),
    ("thermometers = 3\n[numbers]\nrayleigh = 1e5", ("'thermometers' = 3", "[[thermometers]]")),
    ("thermometers = [1]\n[numbers]\nrayleigh = 1e5", ("'thermometers.0' = 1", "must be a table")),
    ("[numbers]\nrayleigh = 1e5\n[thermometers]\nname = 'a'", ("'thermometers'", "[[thermometers]]")),
]

#: Lines that belong before the first table.
TOP: list[tuple[str, tuple[str, ...]]] = [
    ("viscosity = 1", ("'viscosity' = 1", "unknown", "known keys here: title, numbers, cell")),
    ('"two\\nlines" = 1', ("two\\nlines", "unknown")),
    ("title = 5", ("'title' = 5", "200 printable characters")),
    ('title = "two\\nlines"', ('"two\\nlines"', "printable")),
    (f"title = '{'long ' * 50}'", ("long long", "…", "200 printable characters")),
    ("grid = 'fine'", ("'grid' = \"fine\"", 'must be "auto" or a table')),
    ("grid = 64", ("'grid' = 64", 'must be "auto" or a table')),
    ("start = 'noise'", ("'start' = \"noise\"", "must be a table")),
    ("plates = 'no-slip'", ("'plates' = \"no-slip\"", "must be a table")),
]

#: Tables that follow good ones.
MORE: list[tuple[str, tuple[str, ...]]] = [
    ("[cell]\naspect_ratio = 0", ("'cell.aspect_ratio' = 0", ">= 0.05 and <= 200", "cell heights")),
    ("[cell]\naspect_ratio = 1000", ("'cell.aspect_ratio' = 1000", "<= 200")),
    ("[cell]\naspekt_ratio = 2", ("'cell.aspekt_ratio' = 2", "did you mean 'cell.aspect_ratio'")),
    ("[cell]\nprandtl = 2", ("'cell.prandtl' = 2", "did you mean 'numbers.prandtl'")),
    ("[plates]\nbottom = 'no-slip'", ("'plates.bottom' = \"no-slip\"", "must be a table")),
    ("[plates.bottom]\nmotion = 'sliding'", ("'plates.bottom.motion' = \"sliding\"", '"no-slip" or "free')),
    ("[plates.top]\nmotion = 1", ("'plates.top.motion' = 1", '"no-slip" or "free-slip"')),
    ("[plates.top]\nthermal = 'fixed-flux'", ("'plates.top.thermal'", '"fixed-temperature"')),
    ("[plates.middle]\nmotion = 'no-slip'", ("'plates.middle'", "unknown", "bottom, top")),
    ("[grid]\nnx = 64", ("'grid.nz'", "missing", "an even whole number >= 16")),
    ("[grid]\nnx = 63\nnz = 32", ("'grid.nx' = 63", "an even whole number >= 16")),
    ("[grid]\nnx = 64\nnz = 8", ("'grid.nz' = 8", ">= 16")),
    ("[grid]\nnx = 64.5\nnz = 32", ("'grid.nx' = 64.5", "whole number")),
    ("[grid]\nnx = 64\nnz = 32\nny = 32", ("'grid.ny' = 32", "unknown", "nx, nz")),
    ("[grid]\nnx = 100000\nnz = 32", ("'grid.nx' = 100000", "<= 16384")),
    ("[time]\nend = 0", ("'time.end' = 0", "> 0 and <= 1e7", "free-fall times")),
    ("[time]\nend = -1", ("'time.end' = -1", "> 0")),
    ("[time]\nend = 'late'", ("'time.end' = \"late\"", "must be a number")),
    ("[time]\ncourant = 1.5", ("'time.courant' = 1.5", "<= 1")),
    ("[time]\ncourant = 0", ("'time.courant' = 0", "> 0")),
    ("[time]\nstep = 0", ("'time.step' = 0", ">= 1e-08 and <= 1")),
    ("[time]\nstep = 0.5\nend = 0.5", ("'time.step' = 0.5", "< 0.5 (time.end)")),
    ("[time]\nsteps = 5", ("'time.steps' = 5", "did you mean 'time.step'")),
    ("[start]\nkind = 'rolls'", ("'start.kind' = \"rolls\"", '"noise" or "roll" or "state"')),
    ("[start]\nkind = 'roll'\nseed = 3", ("'start.seed' = 3", "amplitude and pairs", "remove it")),
    ("[start]\nkind = 'noise'\npairs = 2", ("'start.pairs' = 2", "amplitude and seed", "remove it")),
    ("[start]\nkind = 'state'", ("'start.path'", "missing")),
    ("[start]\nkind = 'state'\npath = ''", ("'start.path' = \"\"", "not empty")),
    ("[start]\nkind = 'state'\npath = \"a\\u0000b\"", ("'start.path'", "printable")),
    ("[start]\nseed = -1", ("'start.seed' = -1", ">= 0")),
    ("[start]\nseed = 1.5", ("'start.seed' = 1.5", "whole number")),
    ("[start]\namplitude = 2", ("'start.amplitude' = 2", "> 0 and <= 1")),
    ("[start]\nkind = 'roll'\npairs = 0", ("'start.pairs' = 0", ">= 1")),
    (
        "[start]\nkind = 'roll'\npairs = 11\n[grid]\nnx = 32\nnz = 32",
        ("'start.pairs' = 11", "<= 10", "nx = 32"),
    ),
    ("[[thermometers]]\nname = 'far'\nx = 2.0\nz = 0.5", ("'thermometers.far.x' = 2.0", "< 2 (cell.aspect")),
    ("[[thermometers]]\nname = 'left'\nx = -0.1\nz = 0.5", ("'thermometers.left.x' = -0.1", ">= 0")),
    ("[[thermometers]]\nname = 'high'\nx = 1\nz = 1.5", ("'thermometers.high.z' = 1.5", ">= 0 and <= 1")),
    ("[[thermometers]]\nname = 'a'\nx = 1", ("'thermometers.a.z'", "missing")),
    ("[[thermometers]]\nname = 'a'\nX = 1\nz = 0.6", ("'thermometers.a.X' = 1", "'thermometers.1.x'")),
    ("[[thermometers]]\nname = 'a'\nx = 1\nz = 0.6\ninterval = 0", ("'thermometers.a.interval' = 0", ">=")),
    ("[[thermometers]]\nname = 'centre'\nx = 1\nz = 0.6", ("'thermometers.1.name' = \"centre\"", "differ")),
    ("[[thermometers]]\nname = 'Centre'\nx = 1\nz = 0.6", ("'thermometers.1.name'", '"centre" is taken')),
    ("[[thermometers]]\nname = 'mean'\nx = 1\nz = 0.6", ("'thermometers.1.name' = \"mean\"", "rename it")),
    ("[[thermometers]]\nname = 'two words'\nx = 1\nz = 0.6", ("'thermometers.1.name'", "letters, digits")),
    ("[[thermometers]]\nname = '1st'\nx = 1\nz = 0.6", ("'thermometers.1.name'", "a letter first")),
    ("[[thermometers]]\nx = 1\nz = 0.6", ("'thermometers.1.name'", "missing")),
    ("[[thermometer]]\nname = 'a'", ("'thermometer'", "did you mean 'thermometers'")),
    ("[output]\nhistory_interval = 0", ("'output.history_interval' = 0", ">= 0.0001")),
    ("[output]\nfield_interval = -1", ("'output.field_interval' = -1", ">= 0")),
    ("[output]\nfield_interval = 1e-9", ("'output.field_interval' = 1e-09", "must be 0")),
    ("[output]\ncheckpoint_seconds = 0", ("'output.checkpoint_seconds' = 0", ">= 0.01", "seconds")),
    ("[output]\nfields_interval = 1", ("'output.fields_interval'", "did you mean 'output.field_interval'")),
]

BAD = [
    *WHOLE,
    *((f"{line}\n{GOOD}", words) for line, words in TOP),
    *((f"{GOOD}{tables}", words) for tables, words in MORE),
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
    assert lines[0].startswith(f"rbsim: {config}: ")
    for word in words:
        assert word in lines[0]
    assert [path.name for path in tmp_path.iterdir()] == ["cell.toml"]


def test_there_are_at_least_fifty_of_them() -> None:
    assert len({text for text, _ in BAD}) >= 50


def test_several_faults_are_reported_at_once(tmp_path: Path, capsys: pytest.CaptureFixture[str]) -> None:
    config = tmp_path / "cell.toml"
    config.write_text(
        "[numbers]\nrayleigh = -1\nprandtl = 0\n[time]\nend = -1\n"
        "[[thermometers]]\nname = 'far'\nx = 3\nz = 2\n[[thermometers]]\nname = 'far'\nx = 1\nz = 1\n",
        encoding="utf-8",
    )
    code, lines = _run(["validate", str(config)], capsys)
    assert code == 2
    assert [line.split("'")[1] for line in lines] == [
        "numbers.rayleigh",
        "numbers.prandtl",
        "time.end",
        "thermometers.0.z",
        "thermometers.0.x",
        "thermometers.1.name",
    ]


@pytest.mark.parametrize(
    ("override", "words"),
    [
        ("numbers.rayleigh=-1", ("'numbers.rayleigh' = -1", "> 0")),
        ("numbers.rayleigh=[1", ("'numbers.rayleigh' = \"[1\"", "quotes and brackets")),
        ("numbers.rayleigh=", ("'numbers.rayleigh' = \"\"", "must be a number")),
        ("numbers", ("'numbers'", "section.key=value")),
        ("=3", ("section.key=value",)),
        ("numbers.raileigh=3", ("'numbers.raileigh' = 3", "did you mean 'numbers.rayleigh'")),
        ("title.deep=3", ("'title'", "printable")),
        ("thermometers.0.z=7", ("'thermometers.centre.z' = 7", ">= 0 and <= 1")),
        ("thermometers.centre.x=2.5", ("'thermometers.centre.x' = 2.5", "< 2 (cell.aspect_ratio)")),
        ("thermometers.middle.x=1", ("'thermometers.middle.x'", '"middle"', '"centre"')),
        ("thermometers.centre=1", ("'thermometers.centre'", "one entry")),
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
    assert lines[0].startswith(f"rbsim: {config} (--set): key ")
    for word in words:
        assert word in lines[0]


def test_unreadable_files_give_one_line(tmp_path: Path, capsys: pytest.CaptureFixture[str]) -> None:
    latin = tmp_path / "latin.toml"
    latin.write_bytes(b'title = 1\nname = "caf\xe9"\n')
    for path, word in (
        (tmp_path / "absent.toml", "no such file"),
        (tmp_path / "two\nlines.toml", "two\\nlines.toml: no such file"),
        (tmp_path / "null\0.toml", "cannot be read"),
        (tmp_path / ("long" * 100), "cannot be read"),
        (latin / "inside.toml", "cannot be read"),
        (tmp_path, "folder"),
        (latin, "line 2: byte 0xe9 is not UTF-8"),
    ):
        code, lines = _run(["validate", str(path)], capsys)
        assert code == 2
        assert len(lines) == 1
        assert word in lines[0]


def test_a_start_that_does_not_exist_is_refused(tmp_path: Path, capsys: pytest.CaptureFixture[str]) -> None:
    config = tmp_path / "cell.toml"
    config.write_text(f"{GOOD}[start]\nkind = 'state'\npath = 'absent'\n", encoding="utf-8")
    for command in (["validate", str(config)], ["run", str(config), "--out", str(tmp_path / "run")]):
        code, lines = _run(command, capsys)
        assert code == 2
        assert len(lines) == 1
        assert "'start.path'" in lines[0]
        assert str(tmp_path / "absent") in lines[0]
    assert not (tmp_path / "run").exists()


@pytest.mark.parametrize("command", [["validate"], ["run", "--out", "run"]])
def test_the_installed_command_behaves_the_same(command: list[str], tmp_path: Path) -> None:
    (tmp_path / "cell.toml").write_text("[numbers]\nrayleigh = -1\n", encoding="utf-8")
    done = subprocess.run(
        [sys.executable, "-m", "rbsim", *command, "cell.toml"],
        cwd=tmp_path,
        capture_output=True,
        text=True,
        encoding="utf-8",
        check=False,
    )
    assert done.returncode == 2
    assert done.stdout == ""
    assert done.stderr.startswith("rbsim: cell.toml: key 'numbers.rayleigh' = -1: must be a number > 0")
    assert len(done.stderr.splitlines()) == 1
    assert not (tmp_path / "run").exists()


def test_usage_errors_have_the_same_code(capsys: pytest.CaptureFixture[str]) -> None:
    assert main(["run"]) == 2
    assert main(["dance"]) == 2
    assert main(["run", "x.toml", "--threads", "0"]) == 2
    capsys.readouterr()
    assert main(["--help"]) == 0
    assert "exit codes" in capsys.readouterr().out
