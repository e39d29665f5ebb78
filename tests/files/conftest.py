"""A fresh run folder for every test that wants one."""

from __future__ import annotations

from pathlib import Path

import pytest

from rbsim.files.layout import RunFolder, create_run_folder


@pytest.fixture
def folder(tmp_path: Path) -> RunFolder:
    folder = create_run_folder(tmp_path / "run")
    folder.case.write_text("", encoding="utf-8")
    return folder
