"""From what a user writes to a splitting."""

import pytest
from hypothesis import given
from hypothesis import strategies as st

from levelstride.errors import InputError
from levelstride.operator.terms import CATALOGUE
from levelstride.splitting import resolve
from levelstride.splitting.groups import GROUPS, TREATMENTS


def test_groups_hold_the_terms_of_the_documentation():
    assert resolve("sound").implicit == {
        "vertical-pressure-gradient",
        "vertical-divergence",
        "upper-damping",
    }
    assert resolve("buoyancy").implicit == {"buoyancy", "stratification"}
    assert resolve("divergence").implicit == {"horizontal-divergence", "slope-divergence"}
    assert resolve("slope").implicit == {"slope-pressure-gradient", "slope-divergence"}
    assert resolve("transport").implicit == {"vertical-advection"}
    assert resolve("mixing").implicit == {"vertical-diffusion"}
    assert resolve("all-explicit").implicit == set()
    assert resolve("all-implicit").implicit == set(CATALOGUE)


@pytest.mark.parametrize("text", ["Sound + Buoyancy", "sound+buoyancy", " SOUND+ buoyancy "])
def test_spelling_is_forgiving(text):
    splitting = resolve(text)
    assert splitting.name == "sound+buoyancy"
    assert splitting.implicit == resolve("sound").implicit | resolve("buoyancy").implicit


@pytest.mark.parametrize("text", ["vertical pressure gradient", "Vertical_Pressure-Gradient"])
def test_terms_answer_to_spaces_hyphens_and_underscores(text):
    assert resolve(text).implicit == {"vertical-pressure-gradient"}
    assert resolve({text: "After_Step"}).terms("after-step") == ("vertical-pressure-gradient",)


@given(st.lists(st.sampled_from([*GROUPS, *CATALOGUE]), min_size=1, max_size=8))
def test_lists_are_unions(names):
    expected = set().union(*(GROUPS.get(name, (name,)) for name in names))
    assert resolve("+".join(names)).implicit == expected


@given(st.dictionaries(st.sampled_from(list(CATALOGUE)), st.sampled_from(TREATMENTS)))
def test_mapping_gives_every_term_its_treatment(given_treatment):
    splitting = resolve(given_treatment)
    assert set(splitting.treatment) == set(CATALOGUE)
    for term in CATALOGUE:
        assert splitting.treatment[term] == given_treatment.get(term, "explicit")
    names = [name for treatment in TREATMENTS for name in splitting.terms(treatment)]
    assert sorted(names) == sorted(CATALOGUE)


def test_mapping_changes_a_named_splitting():
    splitting = resolve({"name": "sound", "vertical-diffusion": "after-step-implicit"})
    assert splitting.implicit == resolve("sound").implicit
    assert splitting.terms("after-step-implicit") == ("vertical-diffusion",)
    assert splitting.name == "sound, vertical-diffusion after-step-implicit"
    assert resolve({"name": "sound"}).name == "sound"


def test_one_term_may_be_treated_differently():
    splitting = resolve("sound").with_treatment("upper-damping", "after-step")
    assert splitting.treatment["upper-damping"] == "after-step"
    assert "upper-damping" not in splitting.implicit
    with pytest.raises(TypeError):
        splitting.treatment["upper-damping"] = "explicit"


@pytest.mark.parametrize(
    ("wrong", "nearest"),
    [
        ("sond", "sound"),
        ("sound+boyancy", "buoyancy"),
        ("all-explicite", "all-explicit"),
        ("slope-divergense", "slope-divergence"),
        ("vertical presure gradient", "vertical-pressure-gradient"),
    ],
)
def test_unknown_name_is_told_the_nearest(wrong, nearest):
    with pytest.raises(InputError, match=f"the nearest is '{nearest}'"):
        resolve(wrong, where="valley.toml: split")


def test_every_mistake_has_its_own_line():
    with pytest.raises(InputError) as caught:
        resolve(
            {"bouyancy": "implicit", "shear": "implict", "rotation": "explicit"},
            where="a.toml: split",
        )
    term, treatment = caught.value.problems
    assert term.startswith("a.toml: split: unknown term 'bouyancy'; the nearest is 'buoyancy'")
    assert treatment.startswith("a.toml: split.shear: unknown treatment 'implict'")
    assert "the nearest is 'implicit'" in treatment
    with pytest.raises(InputError) as caught:
        resolve("sond+sound+slop")
    assert len(caught.value.problems) == 2


@pytest.mark.parametrize("text", ["", " + ", "sound+", "all-explicit+sound", "all-implicit+slope"])
def test_incomplete_lists_are_refused(text):
    with pytest.raises(InputError):
        resolve(text)


def test_names_that_stand_alone_say_so():
    with pytest.raises(InputError, match=r"'all-explicit' in 'all-explicit\+sound' stands alone"):
        resolve("all-explicit+sound")


def test_a_name_given_twice_counts_once():
    assert resolve("sound + Sound").name == "sound"
