"""What the client asks: texts instead of paths, finite magnitudes, names for the record."""

from base64 import b64decode
from pathlib import Path

import pytest

from hvhost.client.asking import (
    Prepared,
    Who,
    findings_text,
    run_params,
    set_params,
    snapshot_of,
    stop_of,
    text_of,
    who_of,
)
from hvhost.words.errors import CannotConnect, CommandRefused, FileFault

ANSWER = {"run": "270115n1", "title": "withstand", "specimen": "S-1", "folder": "/r/x", "v_highest": 12e3,
          "duration_s": 90, "findings": ["a note"], "more": 1}


def test_files_are_sent_as_text_and_never_as_a_path(tmp_path: Path) -> None:
    """The daemon gets the contents and a name to show, nothing that it could open."""
    plan, sheet = tmp_path / "p.yaml", tmp_path / "s.yaml"
    plan.write_text("plan: Ω\n", encoding="utf-8")
    sheet.write_text("sheet: x\n")
    params = run_params(plan, str(sheet), specimen="S-1", operator="", values=None, reason="", repeat_of="")
    assert b64decode(params["plan"]).decode() == "plan: Ω\n"
    assert (params["plan_file"], params["sheet_file"]) == ("p.yaml", "s.yaml")
    assert str(tmp_path) not in str(params)
    assert run_params(plan, None, specimen="S-1", operator="", values={"v": "1 kV"}, reason="",
                      repeat_of="")["values"] == {"v": "1 kV"}


def test_a_file_that_cannot_be_read_is_named(tmp_path: Path) -> None:
    """Missing, a folder, or not UTF-8: a sentence with its path."""
    (tmp_path / "x").write_bytes(b"\xff")
    for name in ("absent", ".", "x"):
        with pytest.raises(FileFault, match="a readable text file"):
            text_of(tmp_path / name)


@pytest.mark.parametrize("volts", [-1.0, float("nan"), float("inf"), "5 kV", None])
def test_a_set_point_is_a_finite_magnitude(volts: object) -> None:
    """Refused before anything is sent."""
    with pytest.raises(CommandRefused):
        set_params(volts, 1e-3, None)  # type: ignore[arg-type]


def test_slew_is_left_to_the_bench_where_none_is_given() -> None:
    """Numbers of any kind become floats."""
    assert set_params(5000, 1e-3, None) == {"volts": 5000.0, "amps": 1e-3}
    assert set_params(5e3, 1e-3, 500) == {"volts": 5e3, "amps": 1e-3, "slew": 500.0}


def test_a_request_says_who_and_proves_control_where_it_has_it() -> None:
    """The name goes on the record; the ticket only where there is one."""
    assert Who(name="a").params(x=1) == {"as": "a", "x": 1}
    assert Who(name="a", ticket="t").params() == {"as": "a", "ticket": "t"}
    assert who_of("me").name == "me"
    assert who_of("").name


def test_answers_of_another_form_are_sentences() -> None:
    """An older daemon, or none of ours, breaks no script with a KeyError."""
    assert Prepared.of(ANSWER).folder == Path("/r/x")
    with pytest.raises(CannotConnect, match="is it a daemon of ours"):
        Prepared.of({"run": 1})
    with pytest.raises(CannotConnect, match="none yet"):
        snapshot_of(None)
    assert stop_of(None) == (-1, "")
    assert stop_of({"seq": 4, "stop": "cut sent"}) == (4, "cut sent")
    assert findings_text(FileFault("x", findings=("one", "two"))) == "one\ntwo"
