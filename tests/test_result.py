"""A result goes to disk and comes back the same; what is no result is refused."""

import numpy as np
import pytest
import xarray as xr

from rupture.errors import InputError
from rupture.result import Result


@pytest.fixture
def small():
    sites = xr.Dataset({"longitude": ("site", [10.0, 11.0])}, coords={"site": ["ZZ.A", "ZZ.B"]})
    direction = xr.Dataset(
        {"power": (("site", "time"), np.arange(6.0).reshape(2, 3))}, coords={"time": [0.0, 0.5, 1.0]}
    )
    direction["power"].attrs["units"] = "m2 s-4"
    values = np.random.default_rng(1).random((4, 60, 60)).astype(np.float32)
    grid = xr.Dataset({"energy_proxy": (("source_time", "northing", "easting"), values)})
    summary = {"event": {"name": "<b>Not markup</b>"}, "sites": [{"code": "ZZ.A", "used": True}], "rupture": None}
    return Result(summary, sites, direction, grid, quality=[{"site": "ZZ.A"}], settings={"seed": 1})


def test_round_trip(small, tmp_path):
    path = small.save(tmp_path / "result.nc")
    again = Result.load(path)
    for group in ("sites", "direction", "map"):
        xr.testing.assert_identical(getattr(again, group), getattr(small, group))
    assert again.energy is None
    assert again.track is None
    assert (again.summary, again.quality, again.settings) == (small.summary, small.quality, small.settings)
    assert [p.name for p in tmp_path.iterdir()] == ["result.nc"]


def test_other_programs_can_open_it(small, tmp_path):
    """NetCDF-4 by the reference C library's reader if it is there, HDF5 in any case; CF conventions named."""
    import h5py

    path = small.save(tmp_path / "result.nc")
    with h5py.File(path) as file:
        assert (
            file.attrs["Conventions"].decode().startswith("CF-")
            if isinstance(file.attrs["Conventions"], bytes)
            else file.attrs["Conventions"].startswith("CF-")
        )
        assert set(file) == {"sites", "direction", "map", "provenance"}
        assert file["direction/power"].attrs["units"] in ("m2 s-4", b"m2 s-4")


def test_a_result_that_cannot_be_written_leaves_the_old_one(small, tmp_path):
    path = small.save(tmp_path / "result.nc")
    before = path.read_bytes()
    broken = Result(small.summary | {"number": float("nan")}, small.sites, small.direction)
    with pytest.raises(ValueError, match="JSON"):
        broken.save(path)
    assert path.read_bytes() == before
    assert [p.name for p in tmp_path.iterdir()] == ["result.nc"]


@pytest.mark.parametrize("content", [b"", b"text in place of NetCDF", b"\x89HDF\r\n\x1a\n and then nothing"])
def test_what_is_no_result(tmp_path, content):
    path = tmp_path / "result.nc"
    path.write_bytes(content)
    with pytest.raises(InputError, match=r"result\.nc: not a result of this program"):
        Result.load(path)


def test_somebody_elses_netcdf_and_no_file(tmp_path):
    xr.Dataset({"a": ("x", [1.0])}).to_netcdf(tmp_path / "other.nc", engine="h5netcdf")
    with pytest.raises(InputError, match=r"other\.nc"):
        Result.load(tmp_path / "other.nc")
    with pytest.raises(InputError, match="no such result file"):
        Result.load(tmp_path / "nothing.nc")


def test_shows_itself_in_a_notebook_as_text(small):
    html = small._repr_html_()
    assert "no rupture was fitted" in html
    assert "<b>" not in html
