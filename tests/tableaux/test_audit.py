import time
from dataclasses import replace

import pytest

from levelstride.tableaux import audit, find, names
from levelstride.tableaux.tableau import CoefficientText


@pytest.mark.parametrize("name", names())
def test_every_tableau_passes_and_measures_what_it_declares(name):
    tableau = find(name)
    report = audit(tableau)
    assert report.violations == ()
    assert report.passed
    assert report.nonlinear_order == tableau.order
    assert report.explicit_order == tableau.explicit_order
    assert report.implicit_order == tableau.implicit_order
    assert report.linear_order >= report.nonlinear_order
    assert report.linear_order == tableau.declared.get("linear_order", report.linear_order)
    assert report.nonlinear_order == min(
        report.explicit_order, report.implicit_order, report.coupling_order
    )
    assert [w.order for w in report.worst] == [1, 2, 3, 4, 5]
    assert all(abs(w.residual) <= report.tolerance for w in report.worst[: tableau.order])


def test_an_audit_is_quick():
    started = time.perf_counter()
    audit(find("ARK4(3)6L[2]SA"))
    assert time.perf_counter() - started < 1.0


def spoilt(name, **rows):
    """The tableau with some rows or weights of its coefficient text replaced."""
    tableau = find(name)
    return replace(tableau, coefficient_text=replace(tableau.coefficient_text, **rows))


def test_a_spoilt_coupling_fails_with_the_condition_named():
    """Both tables keep their order 2; only the condition that joins them is broken."""
    text = CoefficientText(
        a_explicit=(("0", "0"), ("1", "0")),
        b_explicit=("1/2", "1/2"),
        a_implicit=(("1/4", "0"), ("1/4", "1/4")),
        b_implicit=("0", "1"),
    )
    tableau = replace(find("SSP2(2,2,2)"), coefficient_text=text, declared={})
    report = audit(tableau)
    assert (report.explicit_order, report.implicit_order, report.coupling_order) == (2, 2, 1)
    assert report.nonlinear_order == 1
    (line,) = report.violations
    assert line.startswith("coupling condition b_im.c_ex = 1/2 of order 2 is missed by 0.5")
    assert "1 more coupling conditions fail" in line


def test_a_typing_error_in_one_entry_is_found():
    table = find("ARS(3,4,3)").coefficient_text.a_explicit
    row = ("0.3212788860286280", *table[2][1:])
    report = audit(spoilt("ARS(3,4,3)", a_explicit=(*table[:2], row, *table[3:])))
    assert not report.passed
    assert report.nonlinear_order == 1
    assert report.violations[0].startswith(
        "explicit condition b_ex.c_ex = 1/2 of order 2 is missed"
    )
    assert 'allowed is 1e-20 at precision "long"' in report.violations[0]


def test_a_sign_error_is_found():
    table = find("IMKG254c").coefficient_text.a_implicit
    row = tuple(f"-({x})" if x != "0" else x for x in table[3])
    report = audit(spoilt("IMKG254c", a_implicit=(*table[:3], row, *table[4:])))
    assert not report.passed


def test_tables_that_are_not_triangular_are_named():
    report = audit(
        spoilt(
            "ARS(1,1,1)",
            a_explicit=(("1/2", "0"), ("1", "0")),
            a_implicit=(("0", "1/3"), ("0", "1")),
        )
    )
    shapes = [line for line in report.violations if "must be 0" in line]
    assert shapes[0].startswith("a_explicit row 1 entry 1 is 1/2")
    assert shapes[1].startswith("a_implicit row 1 entry 2 is 1/3")
    assert not report.a_stable


def test_false_claims_beside_the_order_are_found():
    tableau = find("ARS(2,3,2)")
    claims = {
        "stages": 4,
        "stiffly_accurate": False,
        "singly_diagonal": False,
        "imaginary_axis_limit": "2",
        "value_at_infinity": "inf",
        "c_explicit": ["0", "1/2", "1"],
    }
    lines = audit(replace(tableau, declared=claims)).violations
    assert len(lines) == 6
    for key in claims:
        assert any(line.startswith(key) for line in lines)


def test_a_claimed_order_above_the_measured_fails():
    report = audit(replace(find("SIL3"), order=3))
    assert not report.passed
    assert any("of order 3 is missed by" in line for line in report.violations)


def test_row_sums_of_the_two_tables_may_differ():
    assert audit(find("ARS(3,4,3)")).row_sum_difference < 1e-15
    assert audit(find("BHR(5,5,3)")).row_sum_difference < 1e-12
    assert audit(find("IMEX-SSP2(2,3,2)")).row_sum_difference > 0.005
