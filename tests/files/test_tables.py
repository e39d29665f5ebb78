"""CSV tables."""

from __future__ import annotations

from pathlib import Path

import numpy as np
import pytest

from rbsim.errors import ConfigError
from rbsim.files.tables import read_csv, write_csv


def test_numbers_survive_bit_for_bit(tmp_path: Path) -> None:
    values = np.random.default_rng(3).standard_normal(20)
    write_csv(tmp_path / "t.csv", {"Ra": values, "word": ["a,b"] * 20, "count": np.arange(20)})
    assert np.array_equal(read_csv(tmp_path / "t.csv", ["ra"])["ra"], values)


def test_comments_case_order_and_byte_order_marks_are_passed_over(tmp_path: Path) -> None:
    path = tmp_path / "t.csv"
    path.write_text("\ufeff# a lab table\nNU , Ra\n2.5, 1e4\n\n3.5,2e4\n", encoding="utf-8")
    columns = read_csv(path, ["Ra", "Nu"])
    assert columns["Ra"].tolist() == [1e4, 2e4]
    assert columns["Nu"].tolist() == [2.5, 3.5]


@pytest.mark.parametrize(
    ("text", "words"),
    [
        ("Ra,Nusselt\n1,2\n", "no column 'Nu'"),
        ("", "no column 'Ra'"),
        ("Ra,Nu\n1,two\n", "row 1, column 'Nu': 'two'"),
        ("Ra,Nu\n1\n", "row 1, column 'Nu': 'nothing'"),
    ],
)
def test_faults_name_the_place(tmp_path: Path, text: str, words: str) -> None:
    path = tmp_path / "t.csv"
    path.write_text(text)
    with pytest.raises(ConfigError, match=words):
        read_csv(path, ["Ra", "Nu"])


def test_a_missing_file_is_a_configuration_fault(tmp_path: Path) -> None:
    with pytest.raises(ConfigError, match="cannot be read"):
        read_csv(tmp_path / "none.csv", ["Ra"])
