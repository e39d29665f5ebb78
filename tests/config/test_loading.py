"""Cases from files, overrides and Python; writing and reading back."""

from __future__ import annotations

import pickle
from pathlib import Path
from typing import Any

import pytest
from hypothesis import given
from hypothesis import strategies as st

from rbsim.config.loading import build_case, case_from_table, load_case
from rbsim.config.writing import case_to_toml
from rbsim.errors import ConfigError

CONFIGS = Path(__file__).parents[2] / "configs"


def _numbers(low: float, high: float) -> st.SearchStrategy[float]:
    return st.floats(low, high, allow_nan=False, allow_infinity=False, exclude_min=low == 0)


STARTS = st.one_of(
    st.builds(
        lambda a, s: {"kind": "noise", "amplitude": a, "seed": s}, _numbers(0, 1), st.integers(0, 2**63)
    ),
    st.builds(
        lambda a, p: {"kind": "roll", "amplitude": a, "pairs": p}, _numbers(0, 1), st.integers(1, 4096)
    ),
    st.builds(
        lambda p: {"kind": "state", "path": f"/{p}"}, st.text(max_size=20).filter(lambda t: "\0" not in t)
    ),
)
GRIDS = st.one_of(
    st.just("auto"),
    st.builds(lambda a, b: {"nx": 2 * a, "nz": 2 * b}, st.integers(8, 8192), st.integers(8, 8192)),
)


@st.composite
def cases(draw: st.DrawFn) -> dict[str, Any]:
    width = draw(_numbers(0.05, 200))
    names = draw(
        st.lists(st.from_regex(r"[A-Za-z][A-Za-z0-9_]{0,9}", fullmatch=True), max_size=3, unique=True)
    )
    places = st.floats(0, width, exclude_max=True)
    table: dict[str, Any] = {
        "title": draw(st.text(st.characters(exclude_categories=["Cs"]), max_size=30)),
        "numbers": {"rayleigh": draw(_numbers(0, 1e12)), "prandtl": draw(_numbers(1e-4, 1e6))},
        "cell": {"aspect_ratio": width},
        "grid": draw(GRIDS),
        "time": {"end": draw(_numbers(1, 1e7)), "courant": draw(_numbers(0, 1))},
        "start": draw(STARTS),
        "thermometers": [{"name": n, "x": draw(places), "z": draw(st.floats(0, 1))} for n in names],
        "output": {"field_interval": draw(st.floats(0, 1e6))},
        "plates": {"top": {"motion": draw(st.sampled_from(["no-slip", "free-slip"]))}},
    }
    if draw(st.booleans()):
        table["time"]["step"] = draw(_numbers(0, 1))
    return table


@given(cases())
def test_what_is_written_reads_back_equal(
    tmp_path_factory: pytest.TempPathFactory, table: dict[str, Any]
) -> None:
    case = case_from_table(table, "python")
    file = tmp_path_factory.mktemp("case") / "case.toml"
    file.write_text(case_to_toml(case), encoding="utf-8", newline="")
    assert load_case(file) == case


@given(
    st.dictionaries(
        st.sampled_from(
            ["numbers", "cell", "grid", "time", "start", "thermometers", "output", "plates", "title"]
        ),
        st.recursive(
            st.none() | st.booleans() | st.integers() | st.floats() | st.text(max_size=5),
            lambda inner: (
                st.lists(inner, max_size=2)
                | st.dictionaries(
                    st.sampled_from(["rayleigh", "nx", "kind", "end", "x", "name", "odd"]), inner, max_size=3
                )
            ),
            max_leaves=6,
        ),
    )
)
def test_any_table_gives_a_case_or_faults_of_one_line_each(table: dict[str, Any]) -> None:
    faults: tuple[str, ...] = ()
    try:
        case_from_table(table, "source")
    except ConfigError as error:
        faults = error.faults or ("no fault named",)
    for fault in faults:
        assert fault.startswith("source: ")
        assert "\n" not in fault


@pytest.mark.parametrize("path", sorted(CONFIGS.glob("*.toml")), ids=lambda p: p.name)
def test_shipped_configurations_are_valid(path: Path) -> None:
    load_case(path)


def test_overrides_replace_and_create_values() -> None:
    case = load_case(
        CONFIGS / "quickstart.toml",
        [
            "numbers.rayleigh=3e5",
            "plates.top.motion=free-slip",
            "thermometers.1.z=0.4",
            "grid={nx=64, nz=32}",
        ],
    )
    assert case.numbers.rayleigh == 3e5
    assert case.plates.top.motion == "free-slip"
    assert case.thermometers[1].z == 0.4
    assert (case.grid.nx, case.grid.nz) == (64, 32)  # type: ignore[union-attr]


def test_a_relative_start_is_relative_to_the_configuration(tmp_path: Path) -> None:
    file = tmp_path / "cell.toml"
    file.write_text(
        '[numbers]\nrayleigh = 1e5\n[start]\nkind = "state"\npath = "earlier"\n', encoding="utf-8"
    )
    assert load_case(file).start.path == str(tmp_path / "earlier")


def test_python_values_are_checked_like_files() -> None:
    case = build_case(rayleigh=1e5, grid={"nx": 64, "nz": 32}).with_thermometer(
        "a", x=0.1, z=0.2, interval=0.5
    )
    case = case.with_thermometer("b", x=0.1, z=0.3)
    assert [t.name for t in case.thermometers] == ["a", "b"]
    with pytest.raises(ConfigError, match=r"thermometers\.2\.name"):
        case.with_thermometer("a", x=0.1, z=0.2)
    with pytest.raises(ConfigError, match=r"numbers\.rayleigh") as caught:
        build_case(rayleigh=-1.0, prandtl=-1.0)
    assert len(caught.value.faults) == 2
    copy = pickle.loads(pickle.dumps(caught.value))
    assert copy.faults == caught.value.faults
    assert copy.exit_code == 2
