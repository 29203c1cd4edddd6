"""No term is lost: the parts add up to the whole operator, however they are sorted."""

import itertools
from dataclasses import replace

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from levelstride.operator.terms import CATALOGUE, assemble
from levelstride.splitting import resolve, split_operator
from levelstride.splitting.groups import GROUPS, TREATMENTS, WHOLE
from oracles.columns import random_column, random_wave, seeds

NAMED = [
    *WHOLE,
    *(
        "+".join(names)
        for k in range(1, len(GROUPS) + 1)
        for names in itertools.combinations(GROUPS, k)
    ),
]
assignments = st.dictionaries(st.sampled_from(list(CATALOGUE)), st.sampled_from(TREATMENTS))
single_terms = st.lists(st.sampled_from(list(CATALOGUE)), min_size=1, max_size=6).map("+".join)


def check_sum(seed, splitting, reference):
    column = random_column(seed, everything=True, stable=False, reference=reference)
    air, wave = column.airs[0], random_wave(seed, column)
    terms = assemble(column, air, wave)
    parts = split_operator(splitting, column, air, wave)
    rng = np.random.default_rng(seed)
    state = rng.normal(size=parts.layout.size) + 1j * rng.normal(size=parts.layout.size)
    pieces = [parts.slow, parts.fast, parts.after, parts.after_implicit]
    whole = sum(term.apply(state) for term in terms.values())
    scale = sum(np.abs(term.apply(state)) for term in terms.values())
    if reference:
        fixed = assemble(column, column.reference, wave)
        scale = scale + 2 * sum(np.abs(term.apply(state)) for term in fixed.values())
    for added in (sum(piece.apply(state) for piece in pieces), parts.whole.apply(state)):
        assert np.all(np.abs(added - whole) <= 1e-13 * scale)
    return column, air, wave, terms, parts


@settings(max_examples=2, deadline=None)
@given(seed=seeds, reference=st.booleans())
@pytest.mark.parametrize("name", NAMED)
def test_parts_add_up_for_every_named_splitting(name, seed, reference):
    check_sum(seed, resolve(name), reference)


@settings(max_examples=60, deadline=None)
@given(seed=seeds, reference=st.booleans(), treatment=assignments)
def test_parts_add_up_for_any_assignment(seed, reference, treatment):
    check_sum(seed, resolve(treatment), reference)


@settings(max_examples=30, deadline=None)
@given(seed=seeds, reference=st.booleans(), names=single_terms)
def test_parts_add_up_for_any_list_of_single_terms(seed, reference, names):
    check_sum(seed, resolve(names), reference)


@settings(max_examples=30, deadline=None)
@given(seed=seeds, treatment=assignments)
def test_each_part_holds_its_own_terms_only(seed, treatment):
    splitting = resolve(treatment)
    *_, terms, parts = check_sum(seed, splitting, False)
    named = zip(
        TREATMENTS, (parts.slow, parts.fast, parts.after, parts.after_implicit), strict=True
    )
    for treatment_name, part in named:
        expected = sum(terms[name].to_dense() for name in splitting.terms(treatment_name))
        scale = max(np.abs(term.diagonals).max(initial=0.0) for term in terms.values())
        assert np.abs(part.to_dense() - expected).max() <= 1e-14 * scale
    active = {name for name in splitting.implicit if not terms[name].is_zero}
    assert parts.implicit_terms == active


@settings(max_examples=20, deadline=None)
@given(seed=seeds)
def test_reference_state_carries_the_fast_part(seed):
    column, air, wave, _, parts = check_sum(seed, resolve("sound+buoyancy"), True)
    alone = replace(column, reference=None)
    on_reference = split_operator(resolve("sound+buoyancy"), alone, column.reference, wave)
    np.testing.assert_array_equal(parts.fast.to_dense(), on_reference.fast.to_dense())
    same = replace(column, reference=air)
    plain = split_operator(resolve("sound+buoyancy"), alone, air, wave)
    again = split_operator(resolve("sound+buoyancy"), same, air, wave)
    scale = np.abs(plain.whole.diagonals).max()
    assert np.abs((again.slow - plain.slow).diagonals).max(initial=0.0) <= 1e-14 * scale


@settings(max_examples=20, deadline=None)
@given(seed=seeds)
def test_parts_are_real_where_the_terms_are(seed):
    column = random_column(seed)
    flat = replace(column, slope_f=np.zeros(column.levels.nlev + 1))
    wave = random_wave(seed, column)
    assert split_operator(resolve("sound"), flat, flat.airs[0], wave).is_real
    moving = random_column(seed, everything=True)
    assert not split_operator(resolve("sound"), moving, moving.airs[0], wave).is_real
