"""The command line itself: help, version, exit codes, one line for every mistake."""

from __future__ import annotations

import argparse
import subprocess
import sys
from collections.abc import Callable
from importlib import import_module
from pathlib import Path
from types import ModuleType

import pytest

from rbsim import errors
from rbsim.commands import entry

QUICKSTART = Path(__file__).parents[2] / "configs" / "quickstart.toml"


def _python(code: str) -> subprocess.CompletedProcess[str]:
    return subprocess.run([sys.executable, "-c", code], capture_output=True, text=True, check=False)


@pytest.fixture
def pretend(monkeypatch: pytest.MonkeyPatch) -> Callable[[Callable[[], int]], None]:
    """Replace all commands by one called `pretend` that calls a function."""

    def install(work: Callable[[], int]) -> None:
        module = ModuleType("rbsim.commands.pretend")
        module.__dict__.update(
            NAME="pretend",
            HELP="pretend",
            EXAMPLES="  rbsim pretend\n",
            add_arguments=lambda parser: None,
            execute=lambda args: work(),
        )
        monkeypatch.setitem(sys.modules, module.__name__, module)
        monkeypatch.setattr(entry, "COMMANDS", ("pretend",))

    return install


def _raising(error: BaseException) -> Callable[[], int]:
    def work() -> int:
        raise error

    return work


@pytest.mark.parametrize(
    ("error", "code"),
    [
        (errors.ConfigError("first\nsecond", ("first", "second")), 2),
        (errors.RunFolderError("first\nsecond"), 3),
        (errors.DivergedError("first\nsecond", 3.0, 0.1), 4),
        (errors.InterruptedRunError("first\nsecond"), 5),
        (errors.NotConvergedError("first\nsecond"), 6),
    ],
)
def test_errors_become_lines_and_a_documented_code(
    error: errors.RbsimError,
    code: int,
    pretend: Callable[[Callable[[], int]], None],
    capsys: pytest.CaptureFixture[str],
) -> None:
    pretend(_raising(error))
    assert entry.main(["pretend"]) == code
    assert capsys.readouterr().err.splitlines() == ["rbsim: first", "rbsim: second"]
    assert f"\n  {code}  " in entry.EXIT_CODES


def test_every_error_has_a_documented_code() -> None:
    codes = {error.exit_code for error in errors.RbsimError.__subclasses__()}
    assert codes == {2, 3, 4, 5, 6}
    for code in (0, 1, *codes, 130):
        assert f"\n  {code}  " in entry.EXIT_CODES


def test_unexpected_errors_are_one_line_and_a_traceback_on_request(
    pretend: Callable[[Callable[[], int]], None], capsys: pytest.CaptureFixture[str]
) -> None:
    pretend(_raising(ZeroDivisionError("two\nlines")))
    assert entry.main(["pretend"]) == 1
    assert capsys.readouterr().err.splitlines() == [
        "rbsim: internal error: ZeroDivisionError: two lines; --debug shows where"
    ]
    for arguments in (["--debug", "pretend"], ["pretend", "--debug"]):
        assert entry.main(arguments) == 1
        assert "Traceback" in capsys.readouterr().err


def test_an_interrupt_is_one_line(
    pretend: Callable[[Callable[[], int]], None], capsys: pytest.CaptureFixture[str]
) -> None:
    pretend(_raising(KeyboardInterrupt()))
    assert entry.main(["pretend"]) == 130
    assert capsys.readouterr().err == "rbsim: interrupted\n"


@pytest.mark.parametrize(
    "arguments", [[], ["dance"], ["validate"], ["validate", "a", "b"], ["--loud"], ["validate", "a", "--set"]]
)
def test_wrong_usage_is_one_line(arguments: list[str], capsys: pytest.CaptureFixture[str]) -> None:
    assert entry.main(arguments) == 2
    captured = capsys.readouterr()
    assert captured.out == ""
    assert captured.err.startswith("rbsim: ")
    assert captured.err.endswith(" --help`\n")
    assert len(captured.err.splitlines()) == 1


def test_help_shows_commands_examples_and_codes(capsys: pytest.CaptureFixture[str]) -> None:
    assert entry.main(["--help"]) == 0
    text = capsys.readouterr().out
    for name in entry.COMMANDS:
        assert f"\n    {name} " in text
    assert "examples:" in text
    assert entry.EXIT_CODES.strip() in text


@pytest.mark.parametrize("name", entry.COMMANDS)
def test_every_command_keeps_the_pattern(name: str, capsys: pytest.CaptureFixture[str]) -> None:
    module = import_module(f"rbsim.commands.{name}")
    assert name == module.NAME
    assert "\n" not in module.HELP
    assert f"rbsim {name} " in module.EXAMPLES
    parser = argparse.ArgumentParser()
    module.add_arguments(parser)
    assert entry.main([name, "--help"]) == 0
    text = capsys.readouterr().out
    assert module.EXAMPLES.strip() in text
    assert "--debug" in text


def test_version_is_that_of_the_package(capsys: pytest.CaptureFixture[str]) -> None:
    assert entry.main(["--version"]) == 0
    assert capsys.readouterr().out.startswith("rbsim")


def test_help_loads_nothing_heavy() -> None:
    code = (
        "import sys\nfrom rbsim.commands.entry import main\nmain(['--help'])\n"
        "heavy = {'numpy', 'scipy', 'numba', 'h5py', 'matplotlib', 'pydantic', 'importlib.metadata'}\n"
        "sys.exit(len(heavy & set(sys.modules)))"
    )
    assert _python(code).returncode == 0


def test_validate_says_what_would_be_simulated(capsys: pytest.CaptureFixture[str]) -> None:
    assert (
        entry.main(["validate", str(QUICKSTART), "--set", "grid={nx=64, nz=32}", "--set", "time.end=7"]) == 0
    )
    captured = capsys.readouterr()
    assert captured.err == ""
    assert len(captured.out.splitlines()) == 1
    for word in ("valid: ", "Ra = 1e+06", "Pr = 1", "Γ = 2", "64 x 32", "3 thermometers", "end at 7"):
        assert word in captured.out


def test_a_poor_terminal_gets_escapes() -> None:
    done = subprocess.run(
        [sys.executable, "-m", "rbsim", "validate", str(QUICKSTART)],
        capture_output=True,
        env={"PYTHONIOENCODING": "ascii", "PYTHONPATH": str(QUICKSTART.parents[1])},
        check=True,
    )
    assert b"\\u0393 = 2" in done.stdout


def test_a_reader_that_leaves_early_is_no_error() -> None:
    code = (
        "import os, sys\nfrom rbsim.commands.entry import main\n"
        "reading, writing = os.pipe()\nos.dup2(writing, 1)\nos.close(writing)\nos.close(reading)\n"
        f"sys.exit(main(['validate', {str(QUICKSTART)!r}]))"
    )
    done = _python(code)
    assert (done.returncode, done.stderr) == (0, "")
