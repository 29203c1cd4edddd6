import csv
import io
import json
import math
from dataclasses import fields

import pytest
from hypothesis import given
from hypothesis import strategies as st

from examples import records
from levelstride.results import dataset
from levelstride.results.export import to_csv, to_json, to_text

LIMIT_KEYS = {
    "tableau", "split", "stable_step_s", "strict_step_s", "stable_step_by_efolding", "criterion",
    "explicit_share", "gain", "bites", "certified",
}  # fmt: skip
ROW_KEYS = {
    "advised_step_s", "steps_per_interval", "steps_per_hour", "cost_per_hour", "binding",
}  # fmt: skip


def test_keys_of_the_json_are_the_promised_ones():
    plain = json.loads(to_json(records.advice()))
    assert {"column", "rows", "best"} <= set(plain)
    assert {"layers", "lowest_layer_m", "thickest_layer_m", "largest_ratio", "top_m"} <= set(
        plain["column"]
    )
    for row in plain["rows"]:
        assert set(row) >= LIMIT_KEYS | ROW_KEYS
    assert {"wavenumber_per_m", "growth_per_s", "kind", "layer_lowest", "layer_highest"} <= set(
        plain["rows"][0]["bites"]
    )
    assert plain["rows"][0]["stable_step_by_efolding"][0] == {
        "efolding_s": 86400.0,
        "stable_step_s": 27.5,
    }


def test_json_keys_are_the_field_names():
    plain = json.loads(to_json(records.row()))
    assert list(plain) == [field.name for field in fields(dataset.AdviceRow)]


def test_limit_that_never_bites_is_null_and_unbounded():
    plain = json.loads(to_json(records.unbounded()))
    assert plain["stable_step_s"] is None
    assert plain["unbounded"] is True
    assert plain["scanned_to_s"] == 110.0


@given(
    st.recursive(
        st.floats() | st.none() | st.booleans() | st.text() | st.integers(),
        lambda inner: st.lists(inner) | st.dictionaries(st.text(), inner),
        max_leaves=10,
    )
)
def test_json_never_holds_a_number_that_is_not_finite(value):
    def refuse(word):
        raise AssertionError(word)

    back = json.loads(to_json({"value": value}), parse_constant=refuse)
    assert set(back) == {"value"}


def test_lists_of_numbers_stand_on_one_line():
    text = to_json({"profile": [1.5, None, -2e-30], "name": "[\n 1\n]", "rows": [{"of": [3]}]})
    assert '"profile": [ 1.5, null, -2e-30 ],' in text
    assert '"of": [ 3 ]' in text
    assert json.loads(text)["name"] == "[\n 1\n]"


def test_numbers_come_back_from_json_exactly():
    step = math.pi * 7
    assert json.loads(to_json({"stable_step_s": step}))["stable_step_s"] == step


def test_csv_has_one_line_per_row_and_nothing_for_nothing():
    lines = list(csv.DictReader(io.StringIO(to_csv(records.advice()))))
    assert [line["split"] for line in lines] == ["sound+buoyancy", "all-implicit", "sound"]
    assert lines[0]["bites_kind"] == "sound"
    assert lines[0]["bites_shortest_horizontal"] == "false"
    assert lines[0]["cause"].startswith("explicit horizontal divergence, ")
    assert not [name for name in lines[0] if "profile" in name or "energy_by" in name]
    assert lines[0]["steps_per_600_s"] == "25"
    assert lines[0]["stable_step_s_efolding_3600_s"] == "28.0"
    assert lines[1]["stable_step_s"] == ""
    assert lines[1]["unbounded"] == "true"
    assert lines[2]["advised_step_s"] == ""
    assert lines[0]["headroom_slope"] == "0.25"
    assert (lines[0]["headroom_wind_m_per_s"], lines[1]["headroom_slope"]) == ("", "")
    assert lines[0]["headroom_wind_m_per_s_tried_to"] == "200.0"
    assert "None" not in to_csv(records.advice())


def test_csv_of_an_advice_without_rows_is_one_empty_line():
    assert to_csv(records.advice(rows=(), best=None)) == "\n"


@pytest.mark.parametrize(
    "advice",
    [
        records.advice(),
        records.advice(title="two\nlines", wind_note=None),
        records.advice(rows=(records.without_step(),), best=None, current=None),
        records.advice(rows=(), best=None, current=None),
        records.advice(rows=(records.row(records.unbounded()),)),
    ],
)
def test_text_has_ten_lines(advice):
    text = to_text(advice)
    assert len(text.splitlines()) == 10
    assert text.endswith("\n")


def test_text_names_step_splitting_tableau_reason_headroom_hash_and_caution():
    text = to_text(records.advice())
    for line in (
        "step:      24 s, 25 per 600 s, 150 per 3600 s",
        "splitting: sound+buoyancy implicit",
        "tableau:   ARS(2,3,2)",
        "reason:    spectrum: sound wave of 6.0 km, layers 0-3 (0-140 m)",
        "; cause of the limit: explicit horizontal divergence, layers 0-3 (0-140 m), wave of 6.0 "
        "km; air: standard binds, hot by itself above 550 s",
        "headroom:  87 % of the stable step 27.5 s",
        "91 % of the strict step 26.25 s",
        "it carries, each by itself: slope to 0.25 (now 0.1), wind beyond 200 m/s (now 0)",
        "updraft unknown (now 0)",
        "sha256 " + "ab" * 32,
        "no wind was given, the limit is for air at rest",
        "confirm the step in the full model",
    ):
        assert line in text


def test_text_gives_a_step_that_is_no_decimal_exactly():
    row = records.row(advised_step_s=200 / 7, advised_step_fraction="200/7")
    assert "step:      28.5714 s (exactly 200/7 s)" in to_text(records.advice(rows=(row,)))


def test_a_certificate_is_a_table_in_json_and_a_flag_in_csv():
    certified = records.row(records.limit(certificate=records.certificate()))
    plain = json.loads(to_json(certified))["certificate"]
    assert [wave["growth_below_per_s"] for wave in plain["waves"]] == [8e-6, None]
    assert plain["refuted"][0]["criterion"] == "spectrum+transient"
    first, second = csv.DictReader(
        io.StringIO(to_csv(records.advice(rows=(certified, records.row()))))
    )
    assert first["certified_at_every_wave"] == "true"
    assert float(first["certified_worst_growth_below_per_s"]) == 8e-6
    assert second["certified_at_every_wave"] == "false"
    assert second["certified_worst_growth_below_per_s"] == ""
