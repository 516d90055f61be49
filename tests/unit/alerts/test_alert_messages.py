"""Letters to messages: single ones, bursts, and text that is fit for a mail's subject."""

import json
from datetime import UTC, datetime

from hypothesis import given
from hypothesis import strategies as st

from auditd.alerts.message import N_SINGLE, N_TITLE, leading, messages_for
from auditd.alerts.shown import first_line, one_line
from auditd.store.outbox import Letter


def letter(row=1, n_tries=0, **body):
    shown = {
        "id": f"W{row}",
        "kind": "drift",
        "grade": "material",
        "message": "it drifts",
        "campaign": "Tides",
    }
    return Letter(
        row=row,
        alert_id=f"a{row}",
        caution=row,
        target="command:0",
        body=shown | body,
        created_at=datetime(2031, 1, 1, tzinfo=UTC),
        n_tries=n_tries,
    )


def test_up_to_five_letters_go_one_by_one_and_six_as_one():
    """The border of a burst."""
    assert len(messages_for([letter(row) for row in range(N_SINGLE)])) == N_SINGLE
    [one] = messages_for([letter(row) for row in range(N_SINGLE + 1)])
    assert len(one.letters) == N_SINGLE + 1
    assert "6 warnings, led by W0" in one.title


def test_a_single_message_is_the_warning_itself_with_its_alert_id():
    """The contract of a command's standard input: nothing is added."""
    [one] = messages_for([letter(7, log_e=None)])
    assert json.loads(one.document) == letter(7).body | {"log_e": None, "alert_id": "a7"}


def test_a_burst_has_one_id_for_one_set_of_letters_whatever_their_order():
    """A receiver that drops repeats drops a burst sent twice, and takes a larger one."""
    letters = [letter(row) for row in range(8)]
    [one], [again], [more] = (messages_for(some) for some in (letters, letters[::-1], [*letters, letter(9)]))
    ids = [json.loads(message.document)["alert_id"] for message in (one, again, more)]
    assert ids[0] == ids[1] != ids[2]


def test_the_highest_grade_leads_then_the_strongest_evidence_then_the_oldest():
    """The order in which a leading cause is sought."""
    weak, strong, fact = letter(1, log_e=2.0), letter(2, log_e=9.0), letter(3, grade="severe", log_e=None)
    assert leading([weak, strong]) is strong
    assert leading([weak, strong, fact]) is fact
    assert leading([letter(5), letter(4)]).row == 4


def test_letters_tried_least_come_first():
    """One that always fails comes after the others."""
    shown = messages_for([letter(1, n_tries=3), letter(2), letter(3, n_tries=1)])
    assert [message.letters[0].row for message in shown] == [2, 3, 1]


@given(st.text(), st.text(), st.text())
def test_a_title_is_one_printable_line_whatever_the_names_hold(campaign, level, message):
    """No header, escape sequence or line break gets into a mail's subject or a terminal."""
    [one] = messages_for([letter(1, campaign=campaign, along="host", level=level, message=message)])
    assert one.title.isprintable()
    assert len(one.title) <= N_TITLE
    assert all(line.isprintable() for line in one.text.split("\n"))


def test_a_long_line_is_cut_and_bytes_that_are_no_text_are_shown_as_such():
    """Two hundred characters of the first line that says anything."""
    assert one_line("x" * 500) == "x" * 199 + "…"
    assert first_line(b"\n \x1b\n\xff\x00oops\nmore") == "\N{REPLACEMENT CHARACTER} oops"
    assert first_line(b"") == ""
