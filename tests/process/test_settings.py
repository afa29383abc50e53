"""Blank settings refuse to arm and commissioning mends them; settings that differ are linked to observe only."""

import json

import pytest

from hvhost.words.errors import CommandRefused
from tests.process.judge import assert_never_released
from tests.process.scene import QUICK, Scene, plan_text, wait


def refused_to_open(scene: Scene) -> str:
    """What the daemon says when a run is asked for."""
    with pytest.raises(CommandRefused) as refused:
        scene.open_run(plan_text(QUICK))
    return str(refused.value)


def test_blank_settings_and_commissioning() -> None:
    """A blank board cannot be armed; commissioned with the interlock open it can, and who did it is kept."""
    with Scene(commissioned=False) as scene:
        scene.start_standin()
        daemon = scene.start_daemon()
        wait(lambda: scene.snapshot().get("link") == "observe only", "the link")
        scene.take_seat()
        assert "blank" in refused_to_open(scene)
        assert "hvhost commission" in scene.snapshot()["next_acts"][0]
        daemon.end()

        arguments = ("commission", str(scene.bench_path), "--port", scene.device, "--runs", str(scene.runs), "--yes",
                     "--as", "scenario")
        closed = scene.command(*arguments)
        assert closed.process.returncode == 5, closed.err
        assert "interlock" in closed.err
        assert not (scene.folder / "eeprom.bin").exists() or "blank" in closed.out
        scene.control("interlock open")
        unanswered = scene.command(*(word for word in arguments if word != "--yes"))
        assert unanswered.process.returncode == 2, unanswered.err
        assert "give --yes" in unanswered.err
        done = scene.command(*arguments)
        assert done.process.returncode == 0, done.err
        assert "written and read back" in done.out
        entry = json.loads((scene.runs / "commissioning.jsonl").read_text().splitlines()[-1])
        assert entry["by"] == "scenario"
        scene.control("interlock close")
        scene.control("reset-outside")
        again = scene.command(*arguments)
        assert again.process.returncode == 0, again.err
        assert "agree" in again.out

        scene.start_daemon()
        scene.ready()
        scene.energise(plan_text(QUICK))
        assert scene.wait_closed()["outcome"] == "finished"


def test_settings_that_differ() -> None:
    """The daemon names both values, observes, can cut, and opens no run."""
    with Scene() as scene:
        scene.start_standin()
        text = scene.bench_path.read_text(encoding="utf-8")
        assert "  voltage: 24 kV  " in text
        scene.bench_path.write_text(text.replace("  voltage: 24 kV  ", "  voltage: 20 kV  ")
                                    .replace("overvoltage: 24.8 kV", "overvoltage: 21 kV"), encoding="utf-8")
        scene.start_daemon()
        wait(lambda: scene.snapshot().get("link") == "observe only", "the link")
        wait(lambda: scene.snapshot().get("reading"), "a reading")
        said = scene.status()["snapshot"]["link_text"]
        assert "20 kV" in said or "20.0" in said, said
        assert "24 kV" in said or "24.0" in said, said
        scene.take_seat()
        assert "observe only" in refused_to_open(scene)
        cut = scene.command("cut", "--socket", scene.socket)
        assert cut.process.returncode == 0, cut.err
        assert "cut confirmed" in cut.out
        assert_never_released(scene.truth.states)


