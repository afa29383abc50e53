"""``hvhost run``: files are sent as text, what is missing is asked for, and nothing half done stays behind."""

import io
import sys
from base64 import b64decode
from pathlib import Path
from typing import Any

import pytest

from hvhost.cli import exits, run
from hvhost.words.errors import CommandRefused, FileFault, UsageFault
from tests.cli.test_follow import CLOSED, status
from tests.publish.serving import FakeBench, served

OPENED = {"run": "n1", "title": "Withstand", "specimen": "S-1", "v_highest": 8e3, "duration_s": 60.0,
          "findings": ["note: something"]}


@pytest.fixture
def plan(tmp_path: Path) -> Path:
    """A file that is sent as it is."""
    path = tmp_path / "plan.yaml"
    path.write_text("plan: Größe\n", encoding="utf-8")
    return path


def prepared(fake: FakeBench, **changes: Any) -> None:
    """A bench on which a run can be opened."""
    fake.answers.update({"seat.take": {"ticket": "t"}, "run": OPENED, "status": status(stage="prepared", **changes),
                         "arm": {}, "cancel": {"cancelled": "n1"}})


def asked(fake: FakeBench) -> list[str]:
    """The methods that were asked for, looks left out."""
    return [method for method, _ in fake.asked if method != "status"]


def test_a_run_goes_to_its_verdict(tmp_path: Path, plan: Path, capsys: pytest.CaptureFixture[str]) -> None:
    """Seat, run, arm, follow; the plan travels as base64 of its text, with the caller's name."""
    with served(tmp_path) as fake:
        prepared(fake)
        fake.on_call = lambda method: fake.answers.update(
            {"status": status(**CLOSED, outcome="finished", verdict="pass")}) if method == "arm" else None
        code = run.run([str(plan), "--specimen", "S-1", "--value", "a = 3 kV", "--socket", fake.path, "--as", "me"])
    assert code == exits.PASSED
    assert asked(fake) == ["seat.take", "run", "arm"]
    sent = dict(fake.asked)["run"]
    assert b64decode(sent["plan"]).decode() == "plan: Größe\n"
    assert (sent["plan_file"], sent["specimen"], sent["values"]) == ("plan.yaml", "S-1", {"a": "3 kV"})
    told = capsys.readouterr()
    assert "up to 8 kV, at most 60 s" in told.out
    assert "note: something" in told.err


def test_a_refused_arm_cancels_the_run(tmp_path: Path, plan: Path, capsys: pytest.CaptureFixture[str]) -> None:
    """What this command opened and could not arm it does not leave open."""
    with served(tmp_path) as fake:
        prepared(fake)
        fake.answers["arm"] = CommandRefused("a bench that may be armed", "interlock open", "arm")
        with pytest.raises(CommandRefused, match="interlock open"):
            run.run([str(plan), "--specimen", "S-1", "--socket", fake.path])
    assert asked(fake)[-1] == "cancel"
    assert "n1 is cancelled" in capsys.readouterr().err


def test_an_arm_that_the_board_refused_cancels_the_run(tmp_path: Path, plan: Path) -> None:
    """The board's refusal comes later, as a reason on the prepared run."""
    with served(tmp_path) as fake:
        prepared(fake)
        fake.on_call = lambda method: fake.answers.update(
            {"status": status(stage="prepared", why="arm refused: latched")}) if method == "arm" else None
        assert run.run([str(plan), "--specimen", "S-1", "--socket", fake.path]) == exits.REFUSED
    assert asked(fake)[-1] == "cancel"


@pytest.mark.parametrize(("typed", "arms"), [("n1\n", True), ("", False)])
def test_without_an_arm_input_the_name_is_typed(tmp_path: Path, plan: Path, monkeypatch: pytest.MonkeyPatch,
                                                typed: str, arms: bool) -> None:
    """The run's name from the input goes with the arm; where the input ends, nothing is armed or left."""
    monkeypatch.setattr(sys, "stdin", io.StringIO(typed))
    with served(tmp_path) as fake:
        prepared(fake, arm_input=False)
        fake.on_call = lambda method: fake.answers.update({"status": status(**CLOSED)}) if method == "arm" else None
        words = [str(plan), "--specimen", "S-1", "--socket", fake.path]
        if arms:
            run.run(words)
            assert dict(fake.asked)["arm"]["typed"] == "n1"
        else:
            with pytest.raises(UsageFault, match="the run's name typed"):
                run.run(words)
            assert asked(fake)[-1] == "cancel"


def test_prepare_leaves_the_arming(tmp_path: Path, plan: Path) -> None:
    """``--prepare`` opens and does not arm."""
    with served(tmp_path) as fake:
        prepared(fake)
        assert run.run([str(plan), "--specimen", "S-1", "--prepare", "--socket", fake.path]) == exits.PASSED
    assert asked(fake) == ["seat.take", "run"]


def test_faults_before_anything_is_sent(tmp_path: Path, plan: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    """A file that is not there, no specimen without a terminal, a value without a name: refused here."""
    monkeypatch.setattr(sys, "stdin", io.StringIO(""))
    with pytest.raises(FileFault, match=r"none\.yaml"):
        run.run([str(tmp_path / "none.yaml"), "--specimen", "S-1"])
    with pytest.raises(UsageFault, match="--specimen"):
        run.run([str(plan)])
    with pytest.raises(UsageFault, match="NAME=QUANTITY"):
        run.run([str(plan), "--specimen", "S-1", "--value", "3 kV"])
    (tmp_path / "latin.yaml").write_bytes(b"plan: \xe9\n")
    with pytest.raises(FileFault, match=r"latin\.yaml"):
        run.run([str(tmp_path / "latin.yaml"), "--specimen", "S-1"])
