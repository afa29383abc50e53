"""The outlet that starts the delivery: when a run closed, when something is due, and never in the daemon itself."""

import asyncio
import json
import sys
from collections.abc import Callable, Coroutine
from dataclasses import replace
from pathlib import Path
from typing import Any

import pytest

from hvhost.bench.archive import Archive
from hvhost.bench.file import bench_from
from hvhost.publish import delivering
from hvhost.publish.delivering import ResultsOutlet, attach
from hvhost.publish.outlet import Outlet
from hvhost.record.catalogue import list_runs
from tests.bench.changes import DEMO, changed
from tests.pictures.states import RUNNING
from tests.publish.test_delivery import made


class FakeHost:
    """Plays the daemon."""

    def __init__(self, root: Path) -> None:
        self.root = root
        self.outlets: list[Outlet] = []
        self.services: dict[str, Callable[[], Coroutine[Any, Any, None]]] = {}
        self.told: list[str] = []

    def ask(self, method: str, params: dict[str, Any], who: str) -> dict[str, Any]:
        """The runs folder."""
        assert (method, params) == ("status", {})
        return {"runs_folder": str(self.root)}

    def add_outlet(self, outlet: Outlet) -> None:
        """Keep it."""
        self.outlets.append(outlet)

    def add_service(self, name: str, service: Callable[[], Coroutine[Any, Any, None]]) -> None:
        """Keep it."""
        self.services[name] = service

    def say(self, text: str) -> None:
        """Keep it."""
        self.told.append(text)


async def until(condition: Callable[[], Any]) -> None:
    """Look until it holds, at most half a minute."""
    async with asyncio.timeout(30.0):
        while not condition():
            await asyncio.sleep(0.02)


def test_without_the_section_nothing_is_attached(tmp_path: Path) -> None:
    """Off unless the bench file names a folder."""
    host = FakeHost(tmp_path)
    attach(bench_from("b.yaml", DEMO), host)
    assert (host.outlets, host.services) == ([], {})
    attach(bench_from("b.yaml", changed("archive.results=/srv/results")), host)
    assert [outlet.name for outlet in host.outlets] == list(host.services) == ["results"]


def test_a_run_that_closes_is_handed_over_and_a_failure_is_said_once(tmp_path: Path,
                                                                    monkeypatch: pytest.MonkeyPatch) -> None:
    """What is due at the start goes at once, the next one when its verdict appears; failures are counted."""
    root = tmp_path / "runs"
    made(root)
    (tmp_path / "results").mkdir()
    host = FakeHost(root)
    outlet = ResultsOutlet(Archive(results=str(tmp_path / "results")), host)
    monkeypatch.setattr(delivering, "LOOK_S", 600.0)

    async def body() -> None:
        task = asyncio.create_task(outlet.serve())
        await until(lambda: [run.delivery for run in list_runs(root)] == ["delivered"])
        (tmp_path / "results").rename(tmp_path / "moved")
        await asyncio.to_thread(made, root, "0002")
        for text in ("", "pass", "pass", ""):
            outlet.offer_nowait(replace(RUNNING, verdict_text=text))
        await until(lambda: host.told)
        assert outlet.view().failed == 1
        outlet.offer_nowait(replace(RUNNING, verdict_text="fail"))
        await asyncio.sleep(0.2)
        task.cancel()
        with pytest.raises(asyncio.CancelledError):
            await task

    asyncio.run(body())
    assert len(host.told) == 1
    assert "not handed over" in host.told[0]
    assert "make it, or change the bench file" in host.told[0]


def test_a_process_that_dies_is_said_too(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    """Whatever becomes of the child, the daemon says a sentence and goes on."""
    root = tmp_path / "runs"
    made(root)
    host = FakeHost(root)
    outlet = ResultsOutlet(Archive(results=str(tmp_path)), host)
    words = (sys.executable, "-c", "raise SystemExit('out of luck')")
    monkeypatch.setattr(delivering, "command_of", lambda root: words)

    async def body() -> None:
        task = asyncio.create_task(outlet.serve())
        await until(lambda: host.told)
        task.cancel()
        with pytest.raises(asyncio.CancelledError):
            await task

    asyncio.run(body())
    assert host.told == ["result of run ? not handed over, tried again: out of luck"]


def test_the_daemon_s_end_ends_the_process(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    """A child that waits is told to end, and waited for."""
    root = tmp_path / "runs"
    made(root)
    pid = tmp_path / "pid"
    words = (sys.executable, "-c", f"import os, time; open({str(pid)!r}, 'w').write(str(os.getpid())); time.sleep(600)")
    monkeypatch.setattr(delivering, "command_of", lambda root: words)
    outlet = ResultsOutlet(Archive(results=str(tmp_path)), FakeHost(root))

    async def body() -> None:
        task = asyncio.create_task(outlet.serve())
        await until(lambda: pid.exists() and pid.read_text())
        task.cancel()
        with pytest.raises(asyncio.CancelledError):
            await task

    asyncio.run(body())
    assert not Path(f"/proc/{pid.read_text()}").exists()


def test_answers_of_another_form_are_no_traceback(tmp_path: Path) -> None:
    """The outlet takes what the process prints as untrusted text."""
    host = FakeHost(tmp_path)
    outlet = ResultsOutlet(Archive(results=str(tmp_path)), host)
    for out in (b"", b"[]", b"{", json.dumps({"failed": 3}).encode()):
        outlet._tell(out, b"", 9)
    assert host.told == ["result of run ? not handed over, tried again: it ended with code 9"]
