"""The record of the normal modes of a column."""

import json

import numpy as np
import pytest
import xarray

import levelstride
from levelstride.accuracy.structure import vertical_wavelength
from levelstride.errors import InputError
from levelstride.execution.serial import serial
from levelstride.operator.state import Layout
from levelstride.results.export import to_json
from levelstride.results.modes_files import modes_csv, write_modes
from levelstride.studies.modes import telling_wavenumbers


def column(**changes):
    tables = {
        "title": "twelve layers",
        "levels": {"kind": "geometric", "layers": 12, "top_m": 12e3, "lowest_layer_m": 400.0},
        "air": {"kind": "standard"},
        "horizontal": {"grid_spacing_m": 2000.0},
    }
    return levelstride.build(tables | changes)


WINDY = {"wind": {"kind": "uniform", "speed_m_per_s": 10.0, "advection": "centred-2"}}


def test_every_mode_of_a_column_at_rest_is_there_once():
    found = levelstride.modes(column())
    assert [round(wave.wavelength_cells, 6) for wave in found.waves] == [128.0, 32.0, 8.0, 2.0]
    for wave in found.waves:
        kinds = [mode.kind for mode in wave.modes]
        assert (kinds.count("sound"), kinds.count("gravity"), kinds.count("Lamb")) == (11, 11, 1)
        assert wave.energy_conserved
        frequencies = [mode.frequency_per_s for mode in wave.modes]
        assert frequencies == sorted(frequencies, reverse=True)
        for mode in wave.modes:
            assert mode.period_s == pytest.approx(2 * np.pi / mode.frequency_per_s)
            assert mode.equivalent_depth_m == pytest.approx(
                (mode.frequency_per_s / wave.gradient_per_m) ** 2 / 9.80665
            )
            own = mode.grids[0]
            assert own.staggering == "charney-phillips"
            assert own.frequency_per_s == pytest.approx(mode.frequency_per_s, rel=1e-9)
            assert own.to_isothermal is None
            assert 0 <= mode.layer_lowest <= mode.layer_highest < 12
            assert (mode.vertical_wavelength_m is None) == (mode.kind == "Lamb")


def test_wind_shows_waves_both_ways_by_their_intrinsic_frequency():
    still = levelstride.modes(column(), wavenumbers_per_m=[1e-4], grids=False)
    windy = levelstride.modes(column(**WINDY), wavenumbers_per_m=[1e-4], grids=False)
    for name in ("gravity", "sound"):
        alone = [m.frequency_per_s for m in still.waves[0].modes if m.kind == name]
        both = [m.intrinsic_frequency_per_s for m in windy.waves[0].modes if m.kind == name]
        assert len(both) == 2 * len(alone)
        np.testing.assert_allclose(np.sort(np.abs(both))[::2], np.sort(alone), rtol=1e-6)
    shift = [m.frequency_per_s - m.intrinsic_frequency_per_s for m in windy.waves[0].modes]
    np.testing.assert_allclose(shift, shift[0], rtol=1e-6)


def test_isothermal_air_is_held_against_the_closed_form():
    air = {"air": {"kind": "isothermal", "temperature_k": 250.0}}
    found = levelstride.modes(column(**air), wavenumbers_per_m=[1e-4])
    (wave,) = found.waves
    assert wave.isothermal_k == pytest.approx(250.0)
    for mode in wave.modes:
        ratios = [grid.to_isothermal for grid in mode.grids]
        assert mode.frequency_per_s / mode.isothermal_per_s == pytest.approx(ratios[0], rel=1e-6)
        if mode.vertical_order <= 1:
            assert ratios == pytest.approx([1.0, 1.0], abs=0.02)


def test_kinds_are_chosen_and_executors_agree():
    asked = {"wavenumbers_per_m": [1e-4, 1e-3], "kinds": ["lamb", "Computational"]}
    tables = {"column": {"staggering": "lorenz"}}
    alone = levelstride.modes(column(**tables), **asked)
    assert [m.kind for m in alone.waves[0].modes] == ["Lamb", "computational"]
    standing = alone.waves[0].modes[1]
    assert (standing.frequency_per_s, standing.period_s, standing.grids) == (0.0, None, ())
    told = []
    with serial() as executor:
        shared = levelstride.modes(
            column(**tables),
            **asked,
            executor=executor,
            progress=lambda done, total, on: told.append((done, total)),
        )
    assert shared.waves == alone.waves
    assert told[0] == (0, 4)
    assert told[-1] == (4, 4)


def test_a_step_is_described_by_kind_and_transient():
    found = levelstride.modes(
        column(), wavenumbers_per_m=[1e-4], grids=False, step_s=2.0, tableau="ars232", split="sound"
    )
    assert (found.at_step.tableau, found.at_step.split) == ("ARS(2,3,2)", "sound")
    assert set(found.at_step.errors.kinds) == {"gravity", "sound", "lamb"}
    assert found.at_step.errors.ambiguous == 0
    assert found.at_step.transient.largest_norm >= 1.0
    plain = json.loads(to_json(found))
    assert plain["at_step"]["errors"]["resolved"]["modes"] > 0


@pytest.mark.parametrize(
    ("asked", "line"),
    [
        ({"wavenumbers_per_m": [0.0, 1.0]}, "wavenumber 1.0: must lie above 0 and up to 0.0015708"),
        ({"kinds": ["sonic"]}, "kind 'sonic': unknown; known are sound, Lamb"),
        ({"step_s": 2.0}, "step: whose? name a tableau"),
        ({"step_s": 2.0, "tableau": "ars232"}, "no splitting given"),
        ({"step_s": -1.0, "tableau": "ars232"}, "step -1.0: must be a time above 0"),
        ({"tableau": "ars232"}, "go with a step only"),
    ],
)
def test_bad_questions_are_refused(asked, line):
    with pytest.raises(InputError) as caught:
        levelstride.modes(column(), **asked)
    assert any(line in problem for problem in caught.value.problems)


def test_telling_waves_hold_the_steepest_one():
    horizontal = column(horizontal={"grid_spacing_m": 2000.0, "gradient": "centred-2"}).horizontal
    kappas = telling_wavenumbers(horizontal)
    assert kappas[-1] == pytest.approx(np.pi / 4000.0)
    found = levelstride.modes(
        column(horizontal={"grid_spacing_m": 2000.0, "gradient": "centred-2"}),
        wavenumbers_per_m=[np.pi / 2000.0],
        grids=False,
    )
    assert all(mode.equivalent_depth_m is None or mode.period_s for mode in found.waves[0].modes)


def test_files_hold_every_mode(tmp_path):
    found = levelstride.modes(column())
    written = write_modes(found, tmp_path / "modes")
    assert [path.name for path in written] == ["modes.json", "modes.csv", "modes.h5"]
    lines = modes_csv(found).splitlines()
    assert len(lines) == 1 + sum(len(wave.modes) for wave in found.waves)
    assert "lorenz_to_finer" in lines[0]
    assert json.loads(written[0].read_text())["split_into"] == 4
    modes = [mode for wave in found.waves for mode in wave.modes]
    with xarray.open_dataset(written[2], engine="h5netcdf") as stored:
        assert stored["kind"].values.tolist() == [mode.kind for mode in modes]
        np.testing.assert_array_equal(
            stored["lorenz_to_finer"].values, [mode.grids[1].to_finer for mode in modes]
        )
        assert np.isnan(stored["isothermal_per_s"].values).all()
        assert stored.attrs["title"] == "twelve layers"


def test_vertical_wavelength_of_pure_waves_on_uniform_levels():
    levels, layout = column().levels, Layout(12, "charney-phillips")
    uniform = levelstride.build(
        {
            "levels": {"kind": "uniform", "layers": 12, "top_m": 6e3},
            "air": {"kind": "standard"},
            "horizontal": {"grid_spacing_m": 2000.0},
        }
    ).levels
    for order in (1, 3, 11):
        vector = np.zeros(layout.size)
        vector[layout.w] = np.sin(order * np.pi * np.arange(1, 12) / 12)
        metres, layers = vertical_wavelength(uniform, layout, vector)
        assert (metres, layers) == pytest.approx((12e3 / order, 24 / order))
    constant = np.zeros(layout.size)
    constant[layout.pi] = np.sqrt(levels.thickness_m)
    assert vertical_wavelength(levels, layout, constant) is None
    assert vertical_wavelength(levels, layout, np.zeros(layout.size)) is None
