"""`rbsim rolls` end to end."""

from __future__ import annotations

import csv
import json
from pathlib import Path

import pytest

from rbsim.commands.entry import main
from rbsim.dynamics.cell import Cell
from rbsim.dynamics.stepper import Stepper
from rbsim.simulation.storing import start_from_file
from rbsim.stability.steady import new_equations, transport


def test_json_gives_converged_digits(capsys: pytest.CaptureFixture[str]) -> None:
    assert main(["rolls", "--rayleigh", "1e4", "--prandtl", "0.71", "--period", "2.0158", "--json"]) == 0
    facts = json.loads(capsys.readouterr().out)
    # own converged values; the grid was doubled until ten digits stood
    assert facts["nusselt"] == pytest.approx(2.652498501098, rel=1e-11)
    assert facts["reynolds"] == pytest.approx(28.06485236162, rel=1e-11)
    assert facts["nusselt_change"] < 5e-11


def test_every_state_can_start_a_run(capsys: pytest.CaptureFixture[str], tmp_path: Path) -> None:
    state, folder = tmp_path / "roll.h5", tmp_path / "states"
    options = [
        "--follow",
        "rayleigh",
        "--to",
        "6e3",
        "--states",
        str(folder),
        "--state",
        str(state),
        "--json",
    ]
    assert main(["rolls", "--rayleigh", "5e3", "--period", "2", *options]) == 0
    facts = json.loads(capsys.readouterr().out)
    assert len(list(folder.iterdir())) == facts["points"]
    equations = new_equations(Cell(6e3, 1.0, 2.0), *facts["grid"])
    start = start_from_file(str(state), equations)
    stepper = Stepper(equations)
    stepper.set_step_size(0.01)
    stepper.evaluate(start)
    stepper.advance(start)
    assert transport(equations, start)[0] == pytest.approx(facts["nusselt"], rel=1e-11)


def test_a_branch_that_ends_is_written_and_exits_with_6(
    capsys: pytest.CaptureFixture[str], tmp_path: Path
) -> None:
    table = tmp_path / "branch.csv"
    options = ["--follow", "rayleigh", "--to", "1000", "--branch", str(table)]
    assert main(["rolls", "--rayleigh", "2500", *options]) == 6
    captured = capsys.readouterr()
    assert "ended near" in captured.err
    rows = list(csv.DictReader(table.open()))
    assert len(rows) == len(captured.out.splitlines()) > 3
    assert 1707.7 < float(rows[-1]["rayleigh"]) < 1800


def test_figure_and_text(capsys: pytest.CaptureFixture[str], tmp_path: Path) -> None:
    figure = tmp_path / "roll.png"
    options = ["--grid", "48,32", "--figure", str(figure), "--best-period"]
    assert main(["rolls", "--rayleigh", "5e3", *options]) == 0
    assert "Nusselt number" in capsys.readouterr().out
    assert figure.read_bytes().startswith(b"\x89PNG")


@pytest.mark.parametrize(
    ("arguments", "words"),
    [
        (["--rayleigh", "1500"], "above Ra = 1707.761777 only"),
        (["--rayleigh", "-1"], "--rayleigh -1"),
        (["--rayleigh", "1e4", "--grid", "33,32"], "--grid 33,32"),
        (["--rayleigh", "1e4", "--follow", "period"], "--follow and --to"),
        (["--rayleigh", "1e4", "--branch", "x.csv"], "need --follow"),
        (["--rayleigh", "1e4", "--grid", "32,32", "--follow", "period", "--to", "3"], "--grid and --follow"),
        (
            ["--rayleigh", "1e4", "--follow", "period", "--to", "3", "--branch", "x.txt"],
            "must be .csv or .h5",
        ),
        (["--rayleigh", "1e4", "--bottom-thermal", "slab=1"], "slabs are not possible"),
        (
            ["--rayleigh", "1e4", "--bottom-thermal", "fixed-flux", "--top-thermal", "fixed-flux"],
            "--period: needed",
        ),
    ],
)
def test_faults_are_one_line_and_exit_code_2(
    arguments: list[str], words: str, capsys: pytest.CaptureFixture[str]
) -> None:
    assert main(["rolls", *arguments]) == 2
    lines = capsys.readouterr().err.splitlines()
    assert len(lines) == 1
    assert words in lines[0]


def test_modes_of_a_roll(capsys: pytest.CaptureFixture[str]) -> None:
    arguments = ["rolls", "--rayleigh", "3e3", "--period", "2", "--grid", "32,32", "--modes"]
    assert main([*arguments, "--json"]) == 0
    modes = json.loads(capsys.readouterr().out)["modes"]
    assert abs(modes[0]["growth"]) < 1e-9  # translation
    assert modes[1]["growth"] < -0.01
    assert main(arguments) == 0
    assert "odd in the mirror" in capsys.readouterr().out


def test_no_oscillatory_onset_within_reach_exits_with_6(capsys: pytest.CaptureFixture[str]) -> None:
    """At large Pr rolls close to onset have no oscillating mode among the leading ones."""
    options = ["--prandtl", "1000", "--period", "2", "--grid", "32,32", "--oscillatory-onset"]
    assert main(["rolls", "--rayleigh", "2500", *options]) == 6
    assert "oscillatory onset" in capsys.readouterr().err
