"""`rbsim onset` end to end."""

from __future__ import annotations

import csv
import json
import math
import subprocess
import sys
from pathlib import Path

import pytest

from rbsim.commands.entry import main


def test_json_gives_the_promised_keys(capsys: pytest.CaptureFixture[str]) -> None:
    assert main(["onset", "--json"]) == 0
    facts = json.loads(capsys.readouterr().out)
    assert facts["rayleigh_critical"] == pytest.approx(1707.7617771, abs=1e-7)
    assert facts["wavenumber_critical"] == pytest.approx(3.116323555, abs=1e-9)


def test_text_gives_ten_digits(capsys: pytest.CaptureFixture[str]) -> None:
    assert main(["onset", "--bottom", "free-slip", "--top", "free-slip"]) == 0
    assert f"{27 * math.pi**4 / 4:.10g}" in capsys.readouterr().out


def test_plates_reach_the_theory(capsys: pytest.CaptureFixture[str]) -> None:
    """Fixed flux below, free surface of fixed temperature above: 816.7444 (Sparrow et al. 1964)."""
    assert main(["onset", "--top", "free-slip", "--bottom-thermal", "fixed-flux", "--json"]) == 0
    assert json.loads(capsys.readouterr().out)["rayleigh_critical"] == pytest.approx(816.7444, abs=5e-5)


def test_long_wave_limit_is_said_to_be_one(capsys: pytest.CaptureFixture[str]) -> None:
    arguments = ["onset", "--bottom-thermal", "fixed-flux", "--top-thermal", "fixed-flux"]
    assert main([*arguments, "--json"]) == 0
    facts = json.loads(capsys.readouterr().out)
    assert (facts["wavenumber_critical"], facts["wavelength_critical"]) == (0.0, None)
    assert main(arguments) == 0
    assert "long-wave limit" in capsys.readouterr().out


def test_a_period_restricts_the_wavenumbers(capsys: pytest.CaptureFixture[str]) -> None:
    assert main(["onset", "--period", "2.0", "--json"]) == 0
    facts = json.loads(capsys.readouterr().out)
    assert facts["wavenumber_critical"] == pytest.approx(math.pi, rel=1e-12)
    assert facts["rayleigh_critical"] > 1707.8


def test_growth_and_shapes(capsys: pytest.CaptureFixture[str], tmp_path: Path) -> None:
    shapes = tmp_path / "shapes.csv"
    options = ["--rayleigh", "2000", "--prandtl", "0.71", "--wavenumber", "3.1", "--shapes", str(shapes)]
    assert main(["onset", *options, "--json"]) == 0
    facts = json.loads(capsys.readouterr().out)
    rates = facts["growth_rates"]
    assert rates == sorted(rates, reverse=True)
    assert rates[0] > 0 > rates[1]
    assert facts["growth_rates_free_fall"][0] == pytest.approx(rates[0] / math.sqrt(2000 * 0.71))
    rows = list(csv.DictReader(shapes.open()))
    assert list(rows[0]) == ["z", "temperature", "vertical_velocity", "horizontal_velocity"]
    assert max(float(row["temperature"]) for row in rows) == pytest.approx(1.0, abs=1e-3)


def test_neutral_curve_as_table_and_figure(tmp_path: Path) -> None:
    table, figure = tmp_path / "neutral.csv", tmp_path / "neutral.png"
    arguments = ["--neutral", str(table), "--figure", str(figure), "--range", "1,8", "--period", "4"]
    assert main(["onset", *arguments]) == 0
    rows = list(csv.DictReader(table.open()))
    assert float(rows[0]["rayleigh"]) == pytest.approx(5854.48, abs=5e-3)  # Chandrasekhar 1961
    assert float(rows[-1]["rayleigh"]) == pytest.approx(7084.51, abs=5e-3)
    assert figure.read_bytes().startswith(b"\x89PNG")


@pytest.mark.parametrize(
    ("arguments", "words"),
    [
        (["--top-thermal", "warm"], "--top-thermal warm: must be"),
        (["--bottom-thermal", "biot=-1"], "--bottom-thermal biot=-1"),
        (["--bottom-thermal", "slab=1,0"], "--bottom-thermal slab=1,0"),
        (["--period", "-2"], "--period -2"),
        (["--mode", "9"], "--mode 9"),
        (["--wavenumber", "3"], "need --rayleigh"),
        (["--range", "3,1", "--neutral", "x.csv"], "--range 3,1"),
        (["--rayleigh", "nan"], "--rayleigh nan"),
    ],
)
def test_faults_are_one_line_and_exit_code_2(
    arguments: list[str], words: str, capsys: pytest.CaptureFixture[str], tmp_path: Path
) -> None:
    assert main(["onset", *arguments]) == 2
    lines = capsys.readouterr().err.splitlines()
    assert len(lines) == 1
    assert words in lines[0]


def test_growth_at_the_long_wave_limit_asks_for_a_wavenumber(capsys: pytest.CaptureFixture[str]) -> None:
    flux = ["--bottom-thermal", "fixed-flux", "--top-thermal", "fixed-flux"]
    assert main(["onset", *flux, "--rayleigh", "800"]) == 2
    assert "--wavenumber" in capsys.readouterr().err


def test_onset_needs_no_compiler() -> None:
    code = "import sys; from rbsim.commands.entry import main; main(['onset']); print('numba' in sys.modules)"
    done = subprocess.run([sys.executable, "-c", code], capture_output=True, text=True, check=True)
    assert done.stdout.splitlines()[-1] == "False"


@pytest.mark.parametrize("kind", ["Nu", "growth"])
def test_an_estimate_from_a_table_stands_beside_theory(
    kind: str, capsys: pytest.CaptureFixture[str], tmp_path: Path
) -> None:
    """Invented demonstration data that follow the laws exactly, with onset at 1690."""
    table, figure = tmp_path / "table.csv", tmp_path / "estimate.png"
    rayleigh = [1690.0 * (1 + 0.05 * i) for i in range(-3, 10)]
    values = [max(0.0, 1 - 1690 / ra) for ra in rayleigh]
    column = (
        [1 + 1.4 * x + 0.2 * x * x for x in values] if kind == "Nu" else [ra / 1690 - 1 for ra in rayleigh]
    )
    table.write_text("\n".join([f"Ra,{kind}", *(f"{a},{b}" for a, b in zip(rayleigh, column, strict=True))]))
    assert main(["onset", "--from-data", str(table), "--figure", str(figure), "--json"]) == 0
    facts = json.loads(capsys.readouterr().out)
    assert facts["rayleigh_estimate"] == pytest.approx(1690, rel=1e-6)
    assert facts["rayleigh_critical"] == pytest.approx(1707.7617771, abs=1e-7)
    low, high = facts["rayleigh_interval"]
    assert low <= facts["rayleigh_estimate"] <= high
    assert figure.read_bytes().startswith(b"\x89PNG")
    assert main(["onset", "--from-data", str(table)]) == 0
    assert "onset from the table" in capsys.readouterr().out
