"""The commands that ask a daemon for one thing: ``reset``, ``set``, ``seat``, ``status``, ``arm``."""

import json
from pathlib import Path

import pytest

from hvhost.cli import arm, exits, reset, seat, status
from hvhost.cli import set as set_command
from hvhost.publish.tickets import ticket_file
from hvhost.words.errors import CommandRefused, QuantityFault, UsageFault
from tests.cli.test_follow import CLOSED
from tests.cli.test_follow import status as status_of
from tests.publish.serving import served

SHOT = {"bench": "demo", "bench_title": "Demonstration", "link": "greeted", "link_text": "greeted x, boot 1",
        "permission": "idle", "voltage": "below threshold", "voltage_text": "upper bound 10 V is below 60 V",
        "inputs": [{"name": "interlock", "state": "open", "judgement": "not ok"}], "seat": "", "latched": [],
        "next_acts": ["arm"], "reading": {"volts": 1.0, "amps": 0.0}}


@pytest.mark.parametrize(("reply", "code"), [("ok", exits.PASSED), ("refused: causes", exits.REFUSED)])
def test_reset_waits_for_the_board_s_answer(tmp_path: Path, capsys: pytest.CaptureFixture[str], reply: str,
                                            code: int) -> None:
    """The whole set goes out, the board's own answer decides."""
    with served(tmp_path) as fake:
        fake.answers.update({"seat.take": {"ticket": "t"}, "reset": {"ticket_number": 7}, "reply": {"reply": reply}})
        assert reset.run(["breakdown", "host silent", "--grounded", "--socket", fake.path]) == code
        sent = dict(fake.asked)["reset"]
    assert (sent["causes"], sent["grounded"], sent["ticket"]) == (["breakdown", "host silent"], True, "t")
    told = capsys.readouterr()
    assert "latch cleared" in told.out if code == exits.PASSED else "refused: causes" in told.err


def test_set_reads_quantities_before_it_asks(tmp_path: Path, capsys: pytest.CaptureFixture[str]) -> None:
    """Volts, amps and slew are parsed here; a comma or a missing unit never reaches the daemon."""
    with served(tmp_path) as fake:
        fake.answers.update({"seat.take": {"ticket": "t"}, "set": {"volts": 5e3, "amps": 1e-3, "slew": 500.0}})
        for words in (("5,0 kV", "1 mA"), ("5", "1 mA"), ("5 kV", "1 kV")):
            with pytest.raises(QuantityFault):
                set_command.run([*words, "--socket", fake.path])
        assert not fake.asked
        assert set_command.run(["5 kV", "1 mA", "--slew", "500 V/s", "--socket", fake.path]) == exits.PASSED
        sent = dict(fake.asked)["set"]
    assert (sent["volts"], sent["amps"], sent["slew"]) == (5e3, 1e-3, 500.0)
    assert "heading for 5 kV, limit 1 mA, at 500 V/s" in capsys.readouterr().out


def test_seat_is_kept_until_it_is_lost(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    """The ticket lies beside the socket while the command runs, and is gone after."""
    monkeypatch.setattr("time.sleep", lambda seconds: None)
    with served(tmp_path) as fake:
        fake.answers.update({"seat.take": {"ticket": "t"}, "seat.check": {"holder": "me"}})
        kept: list[bool] = []

        def on_call(method: str) -> None:
            if method == "seat.check":
                kept.append(ticket_file(fake.path).exists())
                if len(kept) > 2:
                    fake.answers["seat.check"] = CommandRefused("control of the bench", "it is with other", "seat")

        fake.on_call = on_call
        with pytest.raises(CommandRefused):
            seat.run(["--socket", fake.path])
        assert all(kept)
        assert not ticket_file(fake.path).exists()


def test_status_tells_state_contacts_and_what_hinders(tmp_path: Path, capsys: pytest.CaptureFixture[str]) -> None:
    """A few plain lines, or the whole as JSON."""
    with served(tmp_path) as fake:
        fake.answers["status"] = {**status_of(**CLOSED), "obstacles": ["interlock open"], "snapshot": SHOT}
        assert status.run(["--socket", fake.path]) == exits.PASSED
        told = capsys.readouterr().out
        for words in ("link: greeted x, boot 1", "interlock: open", "hinders arming", "next: arm", "control: nobody"):
            assert words in told
        assert status.run(["--socket", fake.path, "--json"]) == exits.PASSED
        assert json.loads(capsys.readouterr().out)["obstacles"] == ["interlock open"]


def test_arm_without_anything_to_arm_is_usage(tmp_path: Path) -> None:
    """Neither a prepared run nor a specimen for a direct one."""
    with served(tmp_path) as fake:
        fake.answers.update({"seat.take": {"ticket": "t"}, "status": status_of(**{**CLOSED, "stage": ""})})
        with pytest.raises(UsageFault, match="a prepared run"):
            arm.run(["--socket", fake.path])


def test_a_refused_arm_keeps_a_run_that_was_prepared_before(tmp_path: Path) -> None:
    """``hvhost arm`` did not open it, so it does not cancel it."""
    with served(tmp_path) as fake:
        fake.answers.update({"seat.take": {"ticket": "t"}, "status": status_of(stage="prepared"),
                             "arm": CommandRefused("a bench that may be armed", "interlock open", "arm")})
        with pytest.raises(CommandRefused, match="interlock open"):
            arm.run(["--socket", fake.path])
        assert "cancel" not in [method for method, _ in fake.asked]


def test_cancel_needs_no_seat(tmp_path: Path, capsys: pytest.CaptureFixture[str]) -> None:
    """``arm --cancel`` voids, whoever asks."""
    with served(tmp_path) as fake:
        fake.answers["cancel"] = {"cancelled": "n1"}
        assert arm.run(["--cancel", "--socket", fake.path]) == exits.PASSED
        assert [method for method, _ in fake.asked] == ["cancel"]
    assert capsys.readouterr().out == "cancelled: n1\n"
