"""Snapshots come back bit for bit and open in xarray."""

from __future__ import annotations

from pathlib import Path

import numpy as np
import pytest
import xarray

from rbsim.diagnostics.quantities import READINGS
from rbsim.errors import RunFolderError
from rbsim.files.fieldfile import Snapshot, read_snapshot, snapshot_time, write_snapshot

HEIGHTS = np.linspace(0.1, 0.9, 5)


def _snapshot(nx: int = 8, nz: int = 5) -> Snapshot:
    fields = np.random.default_rng(3).standard_normal((3, nz, nx))
    return Snapshot(2.5, np.arange(nx) / 4, np.linspace(0.1, 0.9, nz), *fields)


@pytest.mark.parametrize(("nx", "nz"), [(8, 5), (1, 1), (700, 300)])
def test_a_snapshot_comes_back_bit_for_bit(tmp_path: Path, nx: int, nz: int) -> None:
    snapshot = _snapshot(nx, nz)
    write_snapshot(tmp_path / "field.h5", snapshot)
    back = read_snapshot(tmp_path / "field.h5")
    assert back.time == snapshot.time == snapshot_time(tmp_path / "field.h5")
    for name in ("x", "z", *(quantity.name for quantity in READINGS)):
        np.testing.assert_array_equal(getattr(back, name), getattr(snapshot, name))


def test_the_same_snapshot_gives_the_same_file(tmp_path: Path) -> None:
    for name in ("one.h5", "two.h5"):
        write_snapshot(tmp_path / name, _snapshot())
    assert (tmp_path / "one.h5").read_bytes() == (tmp_path / "two.h5").read_bytes()


@pytest.mark.parametrize("engine", [None, "h5netcdf"])
def test_it_opens_in_xarray_with_place_time_and_units(tmp_path: Path, engine: str | None) -> None:
    snapshot = _snapshot()
    write_snapshot(tmp_path / "field.h5", snapshot)
    with xarray.open_dataset(tmp_path / "field.h5", engine=engine) as data:
        assert dict(data.sizes) == {"z": 5, "x": 8}
        assert set(data.coords) == {"x", "z", "time"}
        assert data["time"] == 2.5
        assert data["time"].attrs["units"] == "free-fall time"
        assert data["x"].attrs["units"] == data["z"].attrs["units"] == "H"
        for quantity in READINGS:
            assert data[quantity.name].dims == ("z", "x")
            assert data[quantity.name].attrs["units"] == quantity.unit
            assert data[quantity.name].attrs["long_name"] == quantity.meaning
            np.testing.assert_array_equal(data[quantity.name], getattr(snapshot, quantity.name))


def test_damage_is_named(tmp_path: Path) -> None:
    path = tmp_path / "field.h5"
    write_snapshot(path, _snapshot())
    content = bytearray(path.read_bytes())
    content[content.find(_snapshot().temperature[2].tobytes()) + 5] ^= 4
    path.write_bytes(content)
    with pytest.raises(RunFolderError, match=r"field\.h5: damaged"):
        read_snapshot(path)
    with pytest.raises(RunFolderError, match="no such file"):
        read_snapshot(tmp_path / "absent.h5")
