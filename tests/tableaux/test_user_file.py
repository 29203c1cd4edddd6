import contextlib

import pytest
from hypothesis import HealthCheck, given, settings
from hypothesis import strategies as st

from levelstride.errors import InputError
from levelstride.tableaux import find, read_file

GOOD = """
[[tableau]]
name = "Own(2,3,2)"
order = 2
a_explicit = [[0, 0, 0], ["1/2", 0, 0], [0, 0.5, 0]]
b_explicit = [0, 0, 1]
a_implicit = [[0, 0, 0], [0, "1/2", 0], [0, 0, "1/2"]]
b_implicit = [0, 0, 1]
"""


@pytest.fixture
def written(tmp_path):
    def write(text):
        path = tmp_path / "own.toml"
        path.write_text(text, encoding="utf-8")
        return path

    return write


def problems_of(path):
    with pytest.raises(InputError) as error:
        read_file(path)
    return error.value.problems


def test_a_sound_file_is_read_and_found(written):
    (own,) = read_file(written(GOOD))
    assert (own.name, own.order, own.implicit_solves) == ("Own(2,3,2)", 2, 2)
    assert own.coefficient_text.a_explicit[2][1] == "0.5"
    assert find("own232", among=(own,)) is own


def test_an_explicit_method_is_read(written):
    text = '[[explicit]]\nname = "Mine"\norder = 2\na = [[0, 0], [1, 0]]\nb = [0.5, 0.5]\n'
    (own,) = read_file(written(text))
    assert own.kind == "explicit"
    assert own.imaginary_axis_limit == 0.0


def test_a_tableau_that_fails_its_audit_says_which_condition_and_by_how_much(written):
    path = written(GOOD.replace('[0, "1/2", 0], [0', '[0, "1/2", 0], ["1/5"'))
    lines = problems_of(path)
    assert len(lines) == 2
    for line in lines:
        assert line.startswith(f"{path}: tableau 1: 'Own(2,3,2)' fails its audit: ")
    assert "implicit condition b_im.c_im = 1/2 of order 2 is missed by 0.2" in lines[0]
    assert "allowed is 1e-12" in lines[0]
    assert "coupling condition b_ex.c_im = 1/2 of order 2 is missed by 0.2" in lines[1]


def test_too_few_digits_fail(written):
    text = GOOD.replace("0.5, 0]", "0.50001, 0]")
    assert any("missed by 1e-05" in line for line in problems_of(written(text)))


def test_all_problems_come_at_once(written):
    path = written(
        """
colour = 1
[[tableau]]
name = ""
ordr = 2
precision = "fine"
a_explicit = [["0", "0"], ["1/0", "0"]]
b_explicit = ["1", true]
a_implicit = [["0", "0"], ["import os", "1"]]
b_implicit = "1"
stages = -1
a_stable = "yes"
[[tableau]]
name = "Ragged"
order = 1
a_explicit = [["0"], ["1", "0"]]
b_explicit = ["1", "0"]
a_implicit = [["0", "0"]]
b_implicit = ["0", "1", "0"]
[[tableau]]
name = "ars343"
order = 1
a_explicit = [["0"]]
b_explicit = ["1"]
a_implicit = [["1"]]
b_implicit = ["1"]
[[explicit]]
name = "Wrong"
order = 9
a = [["0"]]
b = [nan]
"""
    )
    text = "\n".join(problems_of(path))
    for expected in [
        "colour: unknown key; the nearest known one is",
        "tableau 1: name: received ''",
        "tableau 1: ordr: unknown key; the nearest known one is 'order'",
        "tableau 1: order: is missing",
        "tableau 1: precision: received 'fine', allowed are",
        "tableau 1: a_explicit row 2 entry 1: coefficient '1/0' divides by zero",
        "tableau 1: b_explicit entry 2: received True",
        "tableau 1: a_implicit row 2 entry 1: coefficient 'import os'",
        "tableau 1: b_implicit: a list of 1 to 32 coefficients",
        "tableau 1: stages: received -1",
        "tableau 1: a_stable: received 'yes'",
        "tableau 2: a_explicit row 1: has 1 entries; the table is square, give 2",
        "tableau 2: a_implicit: has 1 rows",
        "tableau 2: b_implicit: has 3 entries",
        "tableau 3: name: 'ars343' is the name of a built-in tableau",
        "explicit 1: order: received 9",
        "explicit 1: b entry 1: coefficient 'nan'",
    ]:
        assert expected in text


def test_names_used_twice_are_refused(written):
    (line,) = problems_of(written(GOOD + GOOD.replace("Own(2,3,2)", "own 232")))
    assert "tableau 2: name: 'own 232' is used by 'Own(2,3,2)'" in line


@pytest.mark.parametrize(
    ("content", "reason"),
    [
        (b"not toml at all =", "is not TOML"),
        (b"\xff\xfe\x00", "is not UTF-8"),
        (b"", "holds no tableau"),
        (b"tableau = 3", "[[tableau]]"),
        (b"tableau = [1, 2]", "[[tableau]]"),
        (b"format = 2\n" + GOOD.encode(), "format: received 2"),
        (b"#" * 1_000_001, "is longer than"),
        (b"x = " + b"[" * 5000, "is not TOML"),
        (b"x = " + b"9" * 5000, "is not TOML"),
    ],
)
def test_files_that_are_no_tableau_files(tmp_path, content, reason):
    path = tmp_path / "own.toml"
    path.write_bytes(content)
    (line,) = problems_of(path)
    assert line.startswith(f"{path}: ")
    assert reason in line


def test_files_that_cannot_be_read(tmp_path):
    assert "cannot be read" in problems_of(tmp_path / "absent.toml")[0]
    assert "cannot be read" in problems_of(tmp_path)[0]
    assert "is no file name" in problems_of("a\0b")[0]


def test_a_byte_order_mark_and_windows_line_ends_are_read(tmp_path):
    path = tmp_path / "own.toml"
    path.write_bytes(b"\xef\xbb\xbf" + GOOD.replace("\n", "\r\n").encode())
    assert read_file(path)[0].name == "Own(2,3,2)"


@settings(max_examples=60, suppress_health_check=[HealthCheck.function_scoped_fixture])
@given(data=st.data())
def test_damaged_files_never_end_in_another_error(written, data):
    start = data.draw(st.integers(0, len(GOOD)))
    length = data.draw(st.integers(0, 20))
    filling = data.draw(st.text(alphabet='[]{}",=.0123456789/-aeinfsqrt_\n', max_size=8))
    with contextlib.suppress(InputError):
        read_file(written(GOOD[:start] + filling + GOOD[start + length :]))
