"""Lines for people, notes for the record, answers for whoever asked: all bounded."""

from hvhost.supervisor.telling import LOG_KEPT, REPLIES_KEPT, Teller


def test_lines_are_numbered_and_the_oldest_go() -> None:
    """A client that looks now and then sees which ones it missed."""
    teller = Teller()
    for number in range(LOG_KEPT + 5):
        teller.say(float(number), "note", f"line {number}")
    assert len(teller.log) == LOG_KEPT
    assert [line.number for line in teller.log] == list(range(6, LOG_KEPT + 6))


def test_replies_are_kept_for_a_while() -> None:
    """The last ones."""
    teller = Teller()
    for ticket in range(REPLIES_KEPT + 3):
        teller.reply(ticket, "ok")
    assert len(teller.replies) == REPLIES_KEPT
    assert 0 not in teller.replies
