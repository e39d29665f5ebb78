"""run, resume, summary and snapshot as a user types them."""

from __future__ import annotations

import json
from pathlib import Path

import pytest

from rbsim.commands.entry import main

CELL = """
title = "invented"
[numbers]
rayleigh = 2e4
[grid]
nx = 32
nz = 24
[time]
end = 6.0
[start]
amplitude = 0.1
[[thermometers]]
name = "centre"
x = 1.0
z = 0.5
[output]
field_interval = 2.0
"""


@pytest.fixture(scope="module")
def finished(tmp_path_factory: pytest.TempPathFactory) -> Path:
    folder = tmp_path_factory.mktemp("cli")
    (folder / "cell.toml").write_text(CELL, encoding="utf-8")
    assert main(["run", str(folder / "cell.toml"), "--out", str(folder / "run")]) == 0
    return folder / "run"


def test_run_ends_with_table_verdict_and_figures(tmp_path: Path, capsys: pytest.CaptureFixture[str]) -> None:
    (tmp_path / "cell.toml").write_text(CELL, encoding="utf-8")
    code = main(["run", str(tmp_path / "cell.toml"), "--out", str(tmp_path / "run"), "--set", "time.end=4"])
    out = capsys.readouterr().out
    assert code == 0
    for word in (
        "bottom",
        "top",
        "volume",
        "midplane",
        "thermal",
        "kinetic",
        "Reynolds",
        "verdict",
        "roll pairs",
    ):
        assert word in out
    figures = {path.name for path in (tmp_path / "run" / "figures").iterdir()}
    assert figures == {"nusselt_history.png", "profiles.png", "temperature.png", "thermometer_traces.png"}
    assert json.loads((tmp_path / "run" / "summary.json").read_text(encoding="utf-8"))["window"]["end"] == 4.0


def test_summary_prints_json_for_machines_and_a_table_for_people(
    finished: Path, capsys: pytest.CaptureFixture[str]
) -> None:
    assert main(["summary", str(finished), "--json"]) == 0
    table = json.loads(capsys.readouterr().out)
    assert set(table["nusselt"]) == {"bottom", "top", "volume", "midplane", "thermal", "kinetic"}
    assert {"spread", "verdict"} <= set(table["agreement"])
    assert main(["summary", str(finished), "--from", "3"]) == 0
    assert "averages from t = 3 to 6" in capsys.readouterr().out


def test_resume_goes_on_to_a_later_end(finished: Path, capsys: pytest.CaptureFixture[str]) -> None:
    assert main(["resume", str(finished), "--until", "7", "--no-figures"]) == 0
    captured = capsys.readouterr()
    assert "to 7 free-fall times" in captured.out
    assert "resuming from checkpoint_" in captured.err


def test_snapshot_draws_the_wanted_moment(
    finished: Path, tmp_path: Path, capsys: pytest.CaptureFixture[str]
) -> None:
    figure = tmp_path / "field.svg"
    assert main(["snapshot", str(finished), "--time", "2.3", "--figure", str(figure)]) == 0
    assert "t = 2 free-fall times" in capsys.readouterr().out
    assert figure.stat().st_size > 1000


@pytest.mark.parametrize("command", [["summary"], ["resume"], ["snapshot", "--figure", "x.png"]])
def test_a_missing_run_folder_is_one_line_and_code_3(
    command: list[str], tmp_path: Path, capsys: pytest.CaptureFixture[str]
) -> None:
    assert main([command[0], str(tmp_path / "absent"), *command[1:]]) == 3
    lines = capsys.readouterr().err.splitlines()
    assert len(lines) == 1
    assert "no such run folder" in lines[0]


def test_an_occupied_folder_is_refused(finished: Path, capsys: pytest.CaptureFixture[str]) -> None:
    assert main(["run", str(finished / "case.toml"), "--out", str(finished)]) == 3
    assert "rbsim resume" in capsys.readouterr().err


def test_a_written_case_runs_again(finished: Path, tmp_path: Path) -> None:
    arguments = ["run", str(finished / "case.toml"), "--out", str(tmp_path / "again"), "--set", "time.end=1"]
    assert main([*arguments, "--no-figures"]) == 0
