"""How a diagnosis says one thing."""

from hvhost.cli.diagnosis import Verdict, attention, fault, note, ok, unknown


def test_a_line_says_how_it_was_found_what_and_the_remedy() -> None:
    """Verdict, name, found, remedy where one is needed."""
    assert ok("clock", "synchronised").text == "ok         clock: synchronised"
    assert fault("disk", "full", "make room").text == "fault      disk: full; make room"
    assert note("daemon", "none").text == "note       daemon: none"
    assert unknown("clock", "nobody tells").verdict is Verdict.UNKNOWN


def test_json_holds_plain_values() -> None:
    """For scripts: four texts."""
    assert attention("port name", "it may change", "name it by id").to_json() == {
        "name": "port name", "verdict": "attention", "found": "it may change", "remedy": "name it by id"}
