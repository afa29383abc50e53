"""The log: three styles, one line each, nothing forged, nobody waited for."""

import json
import os
import threading

import pytest

from hvhost.publish.log import LINES_MAX, TEXT_MAX, Log, Silent, Style, leads_to_journal, log_of, printable


class Pipe:
    """A pipe whose reading end the test holds."""

    def __init__(self) -> None:
        self.reader, self.writer = os.pipe()

    def lines(self, count: int) -> list[str]:
        """Wait for so many lines."""
        data = b""
        while data.count(b"\n") < count:
            data += os.read(self.reader, 65536)
        return data.decode().splitlines()

    def close(self) -> None:
        os.close(self.reader)
        os.close(self.writer)


def test_plain_journal_and_json() -> None:
    """A line for a terminal, one with the level that a journal takes (sd-daemon(3)), one flat JSON object."""
    pipe = Pipe()
    Log(pipe.writer, bench="demo")("ready")
    journal = Log(pipe.writer, Style.JOURNAL, bench="demo")
    journal.close(10.0)
    assert pipe.lines(1) == ["hvhost: ready"]
    for level, text in (("trip", "cut"), ("attention", "late"), ("notice", "said"), ("note", "heard")):
        journal.write(level, text)
    assert pipe.lines(4) == ["<2>demo: cut", "<4>demo: late", "<5>demo: said", "<6>demo: heard"]
    Log(pipe.writer, Style.JSON, bench="demo", utc_ns=lambda: 17).write("trip", "cut \"now\" µ", n=4, run="260101n1")
    assert json.loads(pipe.lines(1)[0]) == {"t": 17, "level": "trip", "bench": "demo", "text": "cut \"now\" µ", "n": 4,
                                            "run": "260101n1"}
    Log(pipe.writer, Style.JSON, bench="demo", prefixed=True, utc_ns=lambda: 17).write("trip", "cut")
    assert pipe.lines(1)[0].startswith("<2>{")
    pipe.close()


@pytest.mark.parametrize("style", list(Style))
def test_no_text_makes_two_lines_or_moves_a_cursor(style: Style) -> None:
    """Line ends, escapes and separators of Unicode are written out, and a line has a longest length."""
    pipe = Pipe()
    log = Log(pipe.writer, style, bench="demo", utc_ns=lambda: 0)
    log.write("note", "a\n<0>demo: forged\x1b[2J\u2028b\x00")
    log.write("note", "x" * 100_000)
    first, second = pipe.lines(2)
    assert first.isprintable()
    assert "\x1b" not in first
    assert len(second) < TEXT_MAX + 200
    pipe.close()


def test_a_reader_who_never_reads_holds_nobody() -> None:
    """Far more lines than a pipe holds: each call returns, memory is bounded, what was dropped is counted and told."""
    pipe = Pipe()
    log = Log(pipe.writer, bench="demo", lines_max=50)
    for k in range(3000):
        log(f"line {k} " + "x" * 100)
    assert len(log._lines) <= 51
    assert log.dropped > 0
    log.close(0.0)
    log("after")
    seen: list[str] = []
    while not seen or not seen[-1].endswith("after"):
        seen += pipe.lines(1)
    told = [int(line.split()[1]) for line in seen if "lines of the log were dropped" in line]
    assert sum(told) == log.dropped
    assert len(seen) - len(told) + log.dropped == 3001
    pipe.close()


def test_a_stream_that_was_made_non_blocking_is_waited_for_by_the_thread() -> None:
    """Whoever shares the terminal may have set it so: whole lines come all the same."""
    pipe = Pipe()
    os.set_blocking(pipe.writer, False)
    log = Log(pipe.writer, bench="demo", lines_max=LINES_MAX)
    count = 200
    for k in range(count):
        log(f"{k} " + "x" * 1500)
    lines = pipe.lines(count)
    assert len(lines) == count
    assert all(line.endswith("x") for line in lines)
    pipe.close()


def test_a_stream_that_is_gone_costs_lines_and_nothing_else() -> None:
    """A closed reader: every line is counted as dropped, nothing is raised, the end does not wait."""
    pipe = Pipe()
    os.close(pipe.reader)
    log = Log(pipe.writer)
    for k in range(10):
        log(str(k))
    log.close(10.0)
    assert log.dropped >= 9
    os.close(pipe.writer)


def test_a_silent_log_says_nothing() -> None:
    """For a command whose user is told by itself."""
    pipe = Pipe()
    before = threading.active_count()
    Silent(pipe.writer)("unheard")
    assert threading.active_count() == before
    pipe.close()


def test_the_journal_is_known_by_its_stream() -> None:
    """JOURNAL_STREAM names device and inode (systemd.exec(5)); another stream, or none, is no journal."""
    pipe = Pipe()
    status = os.fstat(pipe.writer)
    here = {"JOURNAL_STREAM": f"{status.st_dev}:{status.st_ino}"}
    assert leads_to_journal(pipe.writer, here)
    assert not leads_to_journal(pipe.writer, {})
    assert not leads_to_journal(pipe.writer, {"JOURNAL_STREAM": f"{status.st_dev}:{status.st_ino + 1}"})
    pipe.close()
    assert not leads_to_journal(pipe.writer, here)


def test_the_option_chooses_the_style() -> None:
    """'auto' is plain where no journal reads; the others are what they say."""
    assert log_of("auto", "demo").style is Style.PLAIN
    assert [log_of(str(style), "demo").style for style in Style] == list(Style)


def test_printable_leaves_what_people_read() -> None:
    """Units of the trade stay; the rest is escaped."""
    assert printable("12 µA, 2.2 kΩ, −3") == "12 µA, 2.2 kΩ, −3"
    assert printable("a\tb\r\n") == "a\\tb\\r\\n"
