"""What commands print: no escape of a run gets out, tables align, numbers are short and honest."""

import json
import unicodedata

import pytest
from hypothesis import given
from hypothesis import strategies as st

from auditd.cli.output import message, number, percent, print_json, print_table, safe, safe_lines, worth


@given(text=st.text(alphabet=st.characters(), max_size=60))
def test_nothing_that_steers_a_terminal_gets_out(text):
    """No character of Unicode's categories C (control, format, surrogate, private) is printed as it is."""
    assert all(unicodedata.category(character)[0] != "C" for character in safe(text))
    assert safe(safe(text)) == safe(text)


@pytest.mark.parametrize(
    ("text", "shown"),
    [
        ("a\x1b[2Jb", "a\\x1b[2Jb"),
        ("line\nnext\r\t", "line\\nnext\\r\\t"),
        ("right\u202eleft", "right\\u202eleft"),
        ("\x9b31m", "\\x9b31m"),
        ("\udc80", "\\udc80"),
        ("naïve π 模拟", "naïve π 模拟"),
    ],
)
def test_escapes_are_shown_as_text(text, shown):
    """ECMA-48's ESC and CSI, newlines and bidirectional overrides read as escapes; letters stay."""
    assert safe(text) == shown


def test_messages_keep_their_lines_and_go_to_stderr(capsys):
    """Own newlines of a message are kept, and stdout stays free for data."""
    message("one\ntwo\x1b")
    assert capsys.readouterr() == ("", "one\ntwo\\x1b\n")
    assert safe_lines("a\nb") == "a\nb"


def test_tables_align_and_have_no_trailing_blanks(capsys):
    """Texts to the left, numbers to the right, None as nothing."""
    print_table(["name", "n"], [["a", 1], ["longer", 1234], [None, None]], right=[1])
    assert capsys.readouterr().out == "name       n\na          1\nlonger  1234\n\n"


def test_json_is_one_document(capsys):
    """What is printed parses as one JSON document and holds text as it was, escapes included."""
    print_json({"schema": 1, "text": "\x1b\u202e"})
    out = capsys.readouterr().out
    assert json.loads(out) == {"schema": 1, "text": "\x1b\u202e"}
    assert "\x1b" not in out


@pytest.mark.parametrize(
    ("value", "shown"),
    [
        (None, "-"),
        (0.0, "0 %"),
        (-0.001, "0 %"),
        (-0.0, "0 %"),
        (0.126, "13 %"),
        (1.0, "100 %"),
        (-0.06, "-6 %"),
    ],
)
def test_shares_are_per_cent_without_a_negative_zero(value, shown):
    """A share that rounds to nothing is nothing."""
    assert percent(value) == shown


@pytest.mark.parametrize(
    ("value", "shown"),
    [(None, "-"), (1437.2, "1437"), (99.96, "100"), (17.83, "17.8"), (1.0, "1"), (12345678.0, "12345678")],
)
def test_effective_numbers_are_counts(value, shown):
    """1,437 runs are not written 1.44e+03."""
    assert worth(value) == shown


def test_numbers_have_few_digits_and_a_dash_where_there_is_none():
    """Three significant digits unless more are asked; whole numbers stay whole."""
    assert (number(None), number(3.14159), number(3.14159, 5), number(12345)) == (
        "-",
        "3.14",
        "3.1416",
        "12345",
    )
