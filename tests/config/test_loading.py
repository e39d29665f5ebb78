"""Cases from files, overrides and Python."""

from __future__ import annotations

import pickle
from collections import OrderedDict
from pathlib import Path
from typing import Any

import numpy as np
import pytest
from hypothesis import HealthCheck, given, settings
from hypothesis import strategies as st

from rbsim.config.loading import build_case, case_from_table, check_start_exists, load_case
from rbsim.config.schema import TimeSection
from rbsim.errors import ConfigError

#: The same examples every time, and no complaint about a busy machine.
REPEATABLE = settings(derandomize=True, deadline=None, suppress_health_check=[HealthCheck.too_slow])

CONFIGS = Path(__file__).parents[2] / "configs"

MINIMAL = "[numbers]\nrayleigh = 100000\n"


def _file(folder: Path, text: str) -> Path:
    path = folder / "cell.toml"
    path.write_text(text, encoding="utf-8")
    return path


def _faults_of(table: dict[str, Any]) -> tuple[str, ...]:
    try:
        case_from_table(table, "source")
    except ConfigError as error:
        return error.faults
    return ()


KEYS = [
    "rayleigh",
    "aspect_ratio",
    "nx",
    "kind",
    "pairs",
    "path",
    "end",
    "step",
    "name",
    "x",
    "z",
    "odd key\n",
]
VALUES = st.recursive(
    st.none() | st.booleans() | st.integers() | st.floats() | st.text(max_size=5) | st.just("roll"),
    lambda inner: st.lists(inner, max_size=3) | st.dictionaries(st.sampled_from(KEYS), inner, max_size=3),
    max_leaves=6,
)
SECTIONS = ["numbers", "cell", "grid", "time", "start", "thermometers", "output", "plates", "title", "other"]


@REPEATABLE
@given(st.dictionaries(st.sampled_from(SECTIONS), VALUES))
def test_any_table_gives_a_case_or_faults_of_one_line_each(table: dict[str, Any]) -> None:
    for fault in _faults_of(table):
        assert fault.startswith("source: key '")
        assert len(fault.splitlines()) == 1


@REPEATABLE
@given(st.text(max_size=60))
def test_any_file_gives_a_case_or_faults_of_one_line_each(
    tmp_path_factory: pytest.TempPathFactory, text: str
) -> None:
    file = tmp_path_factory.mktemp("any") / "cell.toml"
    file.write_bytes(text.encode("utf-8", "surrogatepass"))
    with pytest.raises(ConfigError) as caught:  # no text this short is a whole case
        load_case(file)
    assert all(len(fault.splitlines()) == 1 for fault in caught.value.faults)


@pytest.mark.parametrize("path", sorted(CONFIGS.glob("*.toml")), ids=lambda p: p.name)
def test_shipped_configurations_are_valid(path: Path) -> None:
    load_case(path)


def test_whole_numbers_and_byte_order_marks_are_welcome(tmp_path: Path) -> None:
    file = _file(tmp_path, "\ufeff" + MINIMAL.replace("\n", "\r\n"))
    rayleigh = load_case(file).numbers.rayleigh
    assert rayleigh == 1e5
    assert isinstance(rayleigh, float)


def test_a_relative_start_is_relative_to_the_configuration(tmp_path: Path) -> None:
    file = _file(tmp_path, f'{MINIMAL}[start]\nkind = "state"\npath = "earlier"\n')
    case = load_case(file)
    assert case.start.path == str(tmp_path / "earlier")
    with pytest.raises(ConfigError, match=r"cell: key 'start\.path' = .*earlier.*existing"):
        check_start_exists(case, "cell")
    (tmp_path / "earlier").mkdir()
    check_start_exists(case, "cell")


def test_a_start_in_an_override_is_relative_to_the_working_folder(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    (tmp_path / "here").mkdir()
    monkeypatch.chdir(tmp_path / "here")
    case = load_case(_file(tmp_path, MINIMAL), ["start.path=earlier", "start.kind=state"])
    assert case.start.path == str(tmp_path / "here" / "earlier")


def test_sources_are_named_key_by_key(tmp_path: Path) -> None:
    file = _file(tmp_path, "[numbers]\nrayleigh = -1\n")
    with pytest.raises(ConfigError) as caught:
        load_case(file, ["time.end=-1"])
    first, second = caught.value.faults
    assert first.startswith(f"{file}: key 'numbers.rayleigh'")
    assert second.startswith(f"{file} (--set): key 'time.end'")


def test_python_values_are_checked_like_files() -> None:
    case = build_case(rayleigh=1e5, grid={"nx": 64, "nz": 32})
    case = case.with_thermometer("a", x=0.1, z=0.2, interval=0.5).with_thermometer("b", x=0.1, z=0.3)
    assert [(t.name, t.interval) for t in case.thermometers] == [("a", 0.5), ("b", 0.1)]
    with pytest.raises(ConfigError, match=r"python: key 'thermometers\.2\.name' = \"a\": must differ"):
        case.with_thermometer("a", x=0.1, z=0.2)
    with pytest.raises(
        ConfigError, match=r"python: key 'thermometers\.c\.x' = 2\.0: must be a number >= 0 and < 2"
    ):
        case.with_thermometer("c", x=2.0, z=0.2)


def test_faults_from_python_survive_pickling() -> None:
    with pytest.raises(ConfigError, match=r"numbers\.rayleigh") as caught:
        build_case(rayleigh=-1.0, prandtl=-1.0)
    assert len(caught.value.faults) == 2
    copy = pickle.loads(pickle.dumps(caught.value))
    assert copy.faults == caught.value.faults
    assert copy.exit_code == 2


def test_numbers_of_arrays_are_numbers_and_truth_values_are_not() -> None:
    case = build_case(
        rayleigh=np.float32(1e5),  # type: ignore[arg-type]
        prandtl=np.float64(2.0),
        grid={"nx": np.int64(64), "nz": np.int32(32)},
    )
    assert type(case.numbers.prandtl) is float
    assert case.grid.model_dump() == {"nx": 64, "nz": 32}  # type: ignore[union-attr]
    with pytest.raises(ConfigError, match="must be a number"):
        build_case(rayleigh=np.True_)  # type: ignore[arg-type]


def test_sections_may_be_objects_and_win_over_parameters(tmp_path: Path) -> None:
    case = build_case(
        rayleigh=1e5,
        time=TimeSection(courant=0.5),
        cell=OrderedDict(aspect_ratio=4.0),
        start={"kind": "state", "path": tmp_path},
    )
    assert (case.time.end, case.time.courant, case.cell.aspect_ratio) == (100.0, 0.5, 4.0)
    assert case.start.path == str(tmp_path)
    with pytest.raises(ConfigError, match=r"key 'time' = 5: must be a table"):
        build_case(rayleigh=1e5, time=5)
