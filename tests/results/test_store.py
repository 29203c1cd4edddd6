import warnings

import h5py
import numpy as np
import pytest
import xarray

from examples import records
from levelstride.results.files import write_advice
from levelstride.results.store import to_hdf5

ADVICES = {
    "full": records.advice(),
    "without current, intervals or wind note": records.advice(
        current=None,
        intervals_s=(),
        wind_note=None,
        rows=(records.row(steps_per_interval=()),),
    ),
    "nothing to advise": records.advice(rows=(records.without_step(),), best=None),
    "nothing bites": records.advice(rows=(records.row(records.unbounded(own_growth=())),)),
    "certified": records.advice(
        rows=(records.row(records.limit(certificate=records.certificate())), records.row())
    ),
    "no rows": records.advice(rows=(), best=None),
}


@pytest.fixture(params=ADVICES, name="advice")
def _advice(request):
    return ADVICES[request.param]


@pytest.fixture(name="path")
def _path(tmp_path, advice):
    path = tmp_path / "advice.h5"
    path.write_bytes(to_hdf5(advice))
    return path


def test_opens_in_xarray_through_h5netcdf_without_a_warning(path, advice):
    with warnings.catch_warnings():
        warnings.simplefilter("error")
        with xarray.open_dataset(path, engine="h5netcdf") as data:
            data.load()
            assert not [name for name in data.dims if str(name).startswith("phony")]
            assert data.attrs["column_sha256"] == "ab" * 32
            assert data.attrs["format_version"] == 1
            assert data.attrs["constant_gravity_m_per_s2"] == 9.80665
            assert data.attrs["tolerance_efolding_s"] == 86400.0
            assert list(data["interface_height"].values) == [0.0, 20.0, 60.0, 120.0]
            assert len(data.coords.get("row", [])) == len(advice.rows)


def test_values_come_back(tmp_path):
    path = tmp_path / "advice.h5"
    path.write_bytes(to_hdf5(ADVICES["full"]))
    with xarray.open_dataset(path, engine="h5netcdf") as data:
        assert list(data["tableau"].values) == ["ARS(2,3,2)"] * 3
        assert data["stable_step_s"].values[0] == 27.5
        assert np.isnan(data["stable_step_s"].values[1:]).all()
        assert list(data["unbounded"].values) == [0, 1, 0]
        assert float(data["stable_step_by_efolding_s"].sel(row=0, efolding=3600.0)) == 28.0
        assert int(data["steps_per_interval"].sel(row=0, interval=600.0)) == 25
        assert float(data["bites_energy_share"].sel(row=0, field="pi")) == 0.35
        assert float(data["bites_kind_share"].sel(row=0, wave_kind="gravity")) == 0.1
        assert list(data["window_row"].values) == [0, 2]
        assert list(data["own_growth_cause"].values) == ["shear"] * 3
        assert list(data["bites_layer_highest"].values) == [3, -1, 3]
        assert data["cause"].values[0].startswith("explicit horizontal divergence")
        assert list(data["bites_energy_by_layer"].sel(row=0).values) == [0.6, 0.3, 0.1]
        assert float(data["bites_u_amplitude"].sel(row=0, layer=40.0)) == 0.25
        assert data["bites_u_amplitude"].attrs["units"] == "m s-1"
        theta = data["bites_theta_phase_rad"].sel(row=0)
        assert list(theta.sel(interior_interface=[20.0, 60.0]).values) == [0.5, 0.25]
        assert np.isnan(data["bites_u_amplitude"].sel(row=1)).all()
        assert list(data["bites_along_diagonal"].values) == [0, 0, 0]
        assert list(data["what_if_row"].values) == [0, 0, 2, 2]
        assert data["what_if_terms"].values[1] == (
            "horizontal-pressure-gradient+horizontal-divergence"
        )
        assert list(data["what_if_change"].values[:2]) == ["implicit", "absent"]
        assert float(data["what_if_stable_step_s"].values[0]) == 55.0
        assert list(data["by_air_air"].values[:2]) == ["standard", "hot"]
        assert list(data["by_air_unbounded"].values[:2]) == [0, 1]
        assert data.attrs["best"] == 0
        assert data["headroom_slope"].values[0] == 0.25
        assert np.isnan(data["headroom_slope"].values[1:]).all()
        assert np.isnan(data["headroom_wind_m_per_s"].values[0])
        assert data["headroom_wind_m_per_s_tried_to"].values[0] == 200.0
        assert data["headroom_wind_m_per_s"].attrs["units"] == "m s-1"
        assert data.attrs["current_verdict"] == "your step is at 83 % of the limit"


def test_every_variable_has_units_a_long_name_and_a_scale_on_every_axis(path):
    with h5py.File(path) as file:
        assert len(file) > 1
        for name, dataset in file.items():
            assert dataset.attrs["units"], name
            assert dataset.attrs["long_name"], name
            if dataset.is_scale:
                continue
            for axis in range(dataset.ndim):
                assert len(dataset.dims[axis]) == 1, name


def test_numbers_are_real_and_text_is_utf8_of_any_length(path):
    with h5py.File(path) as file:
        for name, dataset in file.items():
            text = h5py.check_string_dtype(dataset.dtype)
            if text is None:
                assert dataset.dtype.kind in "fi", name
            else:
                assert (text.encoding, text.length) == ("utf-8", None), name


def test_all_four_files_are_written(tmp_path):
    written = write_advice(ADVICES["full"], tmp_path / "advice")
    assert [path.name for path in written] == [
        "advice.json",
        "advice.csv",
        "advice.txt",
        "advice.h5",
    ]
    assert all(path.stat().st_size > 100 for path in written)


def test_a_certificate_is_a_flag_and_its_worst_wave(tmp_path):
    path = tmp_path / "advice.h5"
    path.write_bytes(to_hdf5(ADVICES["certified"]))
    with xarray.open_dataset(path, engine="h5netcdf") as data:
        assert list(data["certified_at_every_wave"].values) == [1, 0]
        assert data["certified_worst_growth_below_per_s"].values[0] == 8e-6
        assert np.isnan(data["certified_worst_wavenumber_per_m"].values[1])
