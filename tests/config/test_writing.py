"""Cases written as TOML read back equal."""

from __future__ import annotations

from typing import Any

import pytest
from hypothesis import HealthCheck, given, settings
from hypothesis import strategies as st

from rbsim.config.loading import build_case, case_from_table, load_case
from rbsim.config.writing import case_to_toml

#: The same examples every time, and no complaint about a busy machine.
REPEATABLE = settings(derandomize=True, deadline=None, suppress_health_check=[HealthCheck.too_slow])

PRINTABLE = st.characters(exclude_categories=["C", "Zl", "Zp"])


def _numbers(low: float, high: float) -> st.SearchStrategy[float]:
    return st.floats(low, high, allow_nan=False, allow_infinity=False, exclude_min=low == 0)


STARTS = st.one_of(
    st.fixed_dictionaries(
        {"kind": st.just("noise"), "amplitude": _numbers(0, 1), "seed": st.integers(0, 2**63 - 1)}
    ),
    st.fixed_dictionaries({"kind": st.just("roll"), "amplitude": _numbers(0, 1), "pairs": st.integers(1, 5)}),
    st.fixed_dictionaries({"kind": st.just("state"), "path": st.text(PRINTABLE, min_size=1, max_size=20)}),
)
POINTS = st.integers(8, 8192).map(lambda half: 2 * half)
GRIDS = st.one_of(st.just("auto"), st.fixed_dictionaries({"nx": POINTS, "nz": POINTS}))
NAMES = st.from_regex(r"[A-Za-z][A-Za-z0-9_]{0,39}", fullmatch=True).filter(
    lambda name: name not in ("mean", "profile", "rms_profile")
)
INTERVALS = _numbers(1e-4, 1e7)


@st.composite
def tables(draw: st.DrawFn) -> dict[str, Any]:
    width, end = draw(_numbers(0.05, 200)), draw(_numbers(2, 1e7))
    names = draw(st.lists(NAMES, max_size=3, unique_by=str.casefold))
    places = st.floats(0, width, exclude_max=True)
    return {
        "title": draw(st.text(PRINTABLE, max_size=200)),
        "numbers": {"rayleigh": draw(_numbers(0, 1e12)), "prandtl": draw(_numbers(1e-4, 1e6))},
        "cell": {"aspect_ratio": width},
        "grid": draw(GRIDS),
        "time": {
            "end": end,
            "courant": draw(_numbers(0, 1)),
            **draw(st.just({}) | st.fixed_dictionaries({"step": _numbers(1e-8, 1)})),
        },
        "start": draw(STARTS),
        "thermometers": [
            {"name": name, "x": draw(places), "z": draw(st.floats(0, 1)), "interval": draw(INTERVALS)}
            for name in names
        ],
        "output": {"field_interval": draw(st.just(0) | INTERVALS), "history_interval": draw(INTERVALS)},
        "plates": {"top": {"motion": draw(st.sampled_from(["no-slip", "free-slip"]))}},
    }


@REPEATABLE
@given(tables())
def test_what_is_written_reads_back_equal(
    tmp_path_factory: pytest.TempPathFactory, table: dict[str, Any]
) -> None:
    if table["start"]["kind"] == "state":
        table["start"]["path"] = "/" + table["start"]["path"]
    case = case_from_table(table)
    file = tmp_path_factory.mktemp("case") / "case.toml"
    file.write_text(case_to_toml(case), encoding="utf-8", newline="")
    again = load_case(file)
    assert again == case
    assert case_to_toml(again) == case_to_toml(case)


def test_defaults_are_written_out() -> None:
    text = case_to_toml(build_case(rayleigh=1e6))
    for line in ('grid = "auto"', "prandtl = 1.0", "courant = 0.8", "seed = 1", "checkpoint_seconds = 60.0"):
        assert line in text.splitlines()
    assert "step" not in text
