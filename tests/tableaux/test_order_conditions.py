import itertools

import numpy as np
import pytest

from levelstride.tableaux import find
from levelstride.tableaux.order_conditions import Tree, residuals, trees


@pytest.mark.parametrize(("order", "count"), [(1, 2), (2, 4), (3, 14), (4, 52), (5, 214)])
def test_number_of_two_coloured_trees(order, count):
    generated = trees(order)
    assert len(generated) == count
    assert len({shape(tree) for tree in generated}) == count
    assert all(tree.order == order for tree in generated)


def shape(tree):
    return tree.colour, tuple(sorted(shape(branch) for branch in tree.branches))


@pytest.mark.parametrize(("order", "count"), [(1, 1), (2, 1), (3, 2), (4, 4), (5, 9)])
def test_one_colour_gives_the_classical_rooted_trees(order, count):
    assert sum(tree.family == "explicit" for tree in trees(order)) == count
    assert sum(tree.family == "implicit" for tree in trees(order)) == count


@pytest.mark.parametrize("order", [1, 2, 3, 4, 5])
def test_tall_trees_are_all_colour_sequences(order):
    assert sum(tree.tall for tree in trees(order)) == 2**order


def test_density_of_known_trees():
    leaf = Tree("ex")
    bush = Tree("im", (leaf, leaf, leaf))
    assert bush.density == 4
    assert Tree("ex", (bush,)).density == 20
    assert Tree("ex", (Tree("im", (leaf,)), leaf)).density == 8


def test_conditions_read_as_in_the_literature():
    ex, im = Tree("ex"), Tree("im")
    assert im.condition() == "sum b_im = 1"
    assert Tree("ex", (im,)).condition() == "b_ex.c_im = 1/2"
    assert Tree("im", (Tree("ex", (im,)),)).condition() == "b_im.A_ex(c_im) = 1/6"
    assert Tree("im", (Tree("ex", (im, im)), ex)).condition() == (
        "b_im.(A_ex(c_im * c_im) * c_ex) = 1/15"
    )


@pytest.mark.parametrize("name", ["ARS(3,4,3)", "ARK4(3)6L[2]SA", "SSP2(3,3,2)", "UJ3(1,3,2)"])
def test_tall_conditions_are_products_of_the_tables(name):
    tableau = find(name)
    tables = {"ex": tableau.a_explicit, "im": tableau.a_implicit}
    weights = {"ex": tableau.b_explicit, "im": tableau.b_implicit}
    by_colours = {
        colours_down(r.tree): float(r.value) for r in residuals(tableau.exact, 4) if r.tree.tall
    }
    for order in (1, 2, 3, 4):
        for colours in itertools.product(("ex", "im"), repeat=order):
            product = np.ones(tableau.nstage)
            for colour in reversed(colours[1:]):
                product = tables[colour] @ product
            missed = weights[colours[0]] @ product - 1.0 / np.prod(np.arange(1, order + 1))
            assert by_colours[colours] == pytest.approx(missed, abs=1e-14)


def colours_down(tree):
    return (tree.colour, *(c for branch in tree.branches for c in colours_down(branch)))


def test_third_order_conditions_against_the_hand_written_list():
    """Bushy trees with every colouring, with abscissae that differ between the tables."""
    tableau = find("SSP3(4,3,3)")
    c = {"ex": tableau.c_explicit, "im": tableau.c_implicit}
    b = {"ex": tableau.b_explicit, "im": tableau.b_implicit}
    assert np.abs(c["ex"] - c["im"]).max() > 0.1
    found = {r.tree.condition(): float(r.value) for r in residuals(tableau.exact, 3)}
    for root, one, two in itertools.product(("ex", "im"), repeat=3):
        text = f"b_{root}.(c_{max(one, two)} * c_{min(one, two)}) = 1/3"
        if text not in found:
            text = f"b_{root}.(c_{min(one, two)} * c_{max(one, two)}) = 1/3"
        assert found[text] == pytest.approx(b[root] @ (c[one] * c[two]) - 1 / 3, abs=1e-14)
