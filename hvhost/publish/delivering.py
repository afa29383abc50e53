"""The outlet ``results``: starts the process that hands results over, when a run closed and now and then.

Nothing is delivered in the daemon itself: it only looks whether anything is due, in a thread, and waits for the
process.  What failed is said once, counted in ``status`` and on the screen, and tried again.
"""

import asyncio
import contextlib
import json
import time
from pathlib import Path

from hvhost.bench.archive import Archive
from hvhost.bench.model import Bench
from hvhost.publish.delivery import command_of, next_try_ns, text_of
from hvhost.publish.outlet import Host
from hvhost.publish.snapshot import OutletView, Snapshot
from hvhost.record.remembered import RememberedRuns

LOOK_S = 20.0  # how often it looks without a reason
TERM_S = 10.0  # the process has this long where the daemon ends
SAID_MAX = 65_536


class ResultsOutlet:
    """Watches for closed runs; ``serve`` is its task."""

    name = "results"

    def __init__(self, archive: Archive, host: Host) -> None:
        self._archive, self._host = archive, host
        self._wake = asyncio.Event()
        self._verdict = ""
        self._runs: RememberedRuns | None = None
        self._told: dict[str, str] = {}
        self._failing = 0

    def offer_nowait(self, snapshot: Snapshot) -> None:
        """A verdict that appears says that a run was closed."""
        if snapshot.verdict_text and snapshot.verdict_text != self._verdict:
            self._wake.set()
        self._verdict = snapshot.verdict_text

    def view(self) -> OutletView:
        """How many results could not be handed over yet."""
        return OutletView(name=self.name, failed=self._failing)

    async def serve(self) -> None:
        """Deliver until the daemon ends."""
        root = Path(str(self._host.ask("status", {}, self.name)["runs_folder"]))
        self._runs = RememberedRuns(root)
        while True:
            if await asyncio.to_thread(self._any_due, root):
                await self._deliver(root)
            with contextlib.suppress(TimeoutError):
                await asyncio.wait_for(self._wake.wait(), LOOK_S)
            self._wake.clear()

    def _any_due(self, root: Path) -> bool:
        """Whether anything is due now; in a thread, since it looks at every run folder."""
        assert self._runs is not None
        due = [run.path.name for run in self._runs.runs() if run.delivery == "due"]
        now_ns = time.time_ns()
        tries = [next_try_ns(root, name) for name in due]
        self._failing = sum(at > 0 for at in tries)
        return any(at <= now_ns for at in tries)

    async def _deliver(self, root: Path) -> None:
        child = await asyncio.create_subprocess_exec(
            *command_of(root), stdin=asyncio.subprocess.PIPE, stdout=asyncio.subprocess.PIPE,
            stderr=asyncio.subprocess.PIPE)
        try:
            out, err = await child.communicate(text_of(self._archive))
        except asyncio.CancelledError:
            with contextlib.suppress(ProcessLookupError):
                child.terminate()
            with contextlib.suppress(TimeoutError):
                await asyncio.wait_for(child.wait(), TERM_S)
            raise
        self._tell(out[:SAID_MAX], err[-SAID_MAX:], child.returncode or 0)

    def _tell(self, out: bytes, err: bytes, code: int) -> None:
        """Say each failure once; one that is over is forgotten."""
        try:
            failed = {str(name): str(text) for name, text in json.loads(out)["failed"].items()}
        except (ValueError, KeyError, TypeError, AttributeError):
            failed = {"": err.decode("utf-8", "replace").strip()[-300:] or f"it ended with code {code}"}
        for name, text in failed.items():
            if self._told.get(name) != text:
                self._host.say(f"result of run {name or '?'} not handed over, tried again: {text}")
        self._told = failed
        self._failing = len(failed)


def attach(bench: Bench, host: Host) -> None:
    """Hand results over where the bench file says where to."""
    if bench.archive is None:
        return
    outlet = ResultsOutlet(bench.archive, host)
    host.add_outlet(outlet)
    host.add_service(outlet.name, outlet.serve)
