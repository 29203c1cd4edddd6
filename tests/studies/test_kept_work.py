import pytest

from examples import records
from levelstride.errors import CalculationError
from levelstride.execution.serial import serial
from levelstride.results.dataset import Limit
from levelstride.results.kept import KeptItems
from levelstride.studies.advised_step import Choice
from levelstride.studies.compared_row import CompareItem, RowFinding
from levelstride.studies.kept_work import Part, Task, count_left, do_all


def found(item):
    """A finding that tells whether its limit was known."""
    if item.tableau == "fails":
        raise CalculationError("no such luck")
    choice = Choice(1.0, None, "known" if item.limit else "new", None)
    limit = item.limit or records.limit(tableau=item.tableau)
    return RowFinding(limit, choice, choice)


def task(name, key="ab" * 8):
    item = CompareItem(b"", name, "sound")
    return Task(found, item, name, RowFinding, key, (Part("limit", Limit, "cd" * 8),))


@pytest.fixture(name="kept")
def _kept(tmp_path):
    return KeptItems(tmp_path)


def test_what_is_found_is_kept_and_found_again(kept):
    told = []
    (first,) = do_all([task("one")], None, kept, lambda *what: told.append(what))
    assert told == [(0, 1, "one"), (1, 1, "")]
    assert first.accurate.binding == "new"
    assert count_left([task("one")], kept) == 0
    (again,) = do_all([task("fails")], None, kept)
    assert again == first


def test_a_part_serves_another_task(kept):
    do_all([task("one")], None, kept)
    (other,) = do_all([task("two", "ef" * 8)], None, kept)
    assert other.accurate.binding == "known"
    assert other.limit.tableau == "one"


def test_answers_are_in_order_whoever_works_and_errors_are_raised():
    tasks = [task("one"), task("two")]
    with serial() as executor:
        assert [one.limit.tableau for one in do_all(tasks, executor)] == ["one", "two"]
        with pytest.raises(CalculationError, match="no such luck"):
            do_all([task("fails")], executor)
    assert count_left(tasks, None) == 2
