import json


def test_modes_are_shown_and_written(run, tiny, tmp_path):
    code, out, err = run("modes", tiny, "--out", tmp_path / "made")
    assert (code, err) == (0, "")
    assert "Tiny [test] column" in out
    assert "gravity" in out
    assert "Isothermal air of 260 K" in out
    assert "Lorenz" in out
    assert "Caution" in out
    assert (tmp_path / "made" / "modes.csv").is_file()


def test_json_is_all_there_is(run, tiny):
    code, out, err = run("modes", tiny, "--json", "--wavelength", 24000, "--no-grids")
    assert (code, err) == (0, "")
    found = json.loads(out)
    assert [round(wave["wavelength_m"]) for wave in found["waves"]] == [24000]
    assert found["split_into"] == 1


def test_a_step_is_shown_by_kind(run, tiny):
    code, out, _ = run(
        "modes", tiny, "--wavenumber", 1e-4, "--kind", "gravity", "--no-grids",
        "--step", 2, "--tableau", "ars232", "--split", "sound",
    )  # fmt: skip
    assert code == 0
    for word in ("A step of 2 s", "resolved gravity", "lamb", "sound", "Transient growth", "ambig"):
        assert word in out


def test_workers_give_the_same(run, tiny):
    _, alone, _ = run("modes", tiny, "--json", "--wavelength", 24000)
    _, shared, _ = run("modes", tiny, "--json", "--wavelength", 24000, "--workers", 2)
    one, other = json.loads(alone), json.loads(shared)
    assert one["waves"] == other["waves"]


def test_bad_input_is_one_line(run, tiny):
    for words, named in [
        (("--wavelength", "-5"), "--wavelength"),
        (("--wavelength", "100"), "wavenumber"),
        (("--kind", "sonic"), "sonic"),
        (("--step", "2"), "tableau"),
        (("--split", "sound"), "step"),
        (("--step", "2", "--tableau", "nobody", "--split", "sound"), "nobody"),
    ]:
        code, out, err = run("modes", tiny, *words)
        assert (code, out) == (2, "")
        assert err.count("\n") == 1
        assert named in err
