"""What the MCU kept goes into the record that it belongs to, and only then may the MCU forget it.

A snapshot of the open run is in its record as soon as it was fetched; the MCU is told when the disk has it.  Causes,
events and snapshots of an earlier run become revisions of that run's folder, or, where no folder carries their tag,
a line of the file for things of no known run.  Nothing may be armed until that is done (`supervisor.arming`).
"""

import json
import os
from typing import TYPE_CHECKING, Any

from hvhost.record.manifest import append_revision, revisions_of
from hvhost.supervisor.aftermath import Aftermath
from hvhost.supervisor.evidence import Snapshot
from hvhost.words.errors import CommandRefused, RecordFault

if TYPE_CHECKING:
    from hvhost.publish.station import Station

UNCLAIMED = "of-no-known-run.jsonl"
SYNCED_S = 1.0  # a sync so much later than an entry was handed over has that entry: the recorder syncs once a second
RETRY_S = 5.0


class Keeping:
    """Stores evidence for one station."""

    def __init__(self, station: "Station") -> None:
        self._station = station
        self._fresh: list[tuple[Snapshot, float]] = []  # of the open run, with the time of their entry
        self._older: list[Snapshot | Aftermath] = []
        self._not_before_s = 0.0

    def step(self, now_s: float) -> None:
        """Store what can be stored now."""
        station, core = self._station, self._station.core
        if not (core.evidence.ready or core.aftermath.ready or self._fresh or self._older):
            return
        for snapshot in core.evidence.take():
            run = core.run
            if run is not None and station.recording is not None and run.spec.tag == snapshot.tag:
                self._fresh.append((snapshot, now_s))
            else:
                self._older.append(snapshot)
        if self._fresh:
            self._confirm_synced(now_s)
        ready = bool(self._older or core.aftermath.ready)
        if ready and station.recording is None and not station.closing and now_s >= self._not_before_s:
            self._append(now_s)

    def _confirm_synced(self, now_s: float) -> None:
        station = self._station
        recording = station.recording
        if recording is None:  # closed meanwhile, END written and synced or failed
            self._fresh.clear()
            return
        health = recording.health()
        if health.failed:  # not on the disk: the MCU keeps it, and the run need not wait for it
            self._fresh.clear()
            station.core.evidence.stored()
            return
        while self._fresh and now_s - health.last_sync_age_s >= self._fresh[0][1] + SYNCED_S:
            self._forget(self._fresh.pop(0)[0])

    def _append(self, now_s: float) -> None:
        """Add everything of earlier runs to their folders; what cannot be written is tried again later."""
        core = self._station.core
        try:
            while core.aftermath.ready:
                self._add(core.aftermath.ready[0])
                core.aftermath.ready.pop(0)
            while self._older:
                one = self._older[0]
                self._add(one)
                self._older.pop(0)
                if isinstance(one, Snapshot):
                    self._forget(one)
        except (RecordFault, OSError) as error:
            self._not_before_s = now_s + RETRY_S
            core.say(now_s, "attention", f"evidence of an earlier run is not stored yet: {error}")

    def _add(self, one: Snapshot | Aftermath) -> None:
        station = self._station
        kind, data = ("evidence", _snapshot(one)) if isinstance(one, Snapshot) else ("causes", _causes(one))
        folder = station.requests.folder_of_tag(one.tag)
        if folder is None:
            station.core.say(station.clock.now_s(), "attention", f"{kind} with tag {one.tag:08X} is of no known run")
            self._unclaimed(kind, data)
            return
        known = [r.get("data", {}) for r in revisions_of(folder) if r.get("kind") == kind]
        if kind == "causes" and any((k.get("boot"), k.get("causes")) == (data["boot"], data["causes"]) for k in known):
            return  # told at an earlier greeting
        append_revision(folder, kind, data, utc_ns=station.clock.utc_ns())
        station.core.say(station.clock.now_s(), "note", f"{kind} added to run {folder.path.name}")

    def _unclaimed(self, kind: str, data: dict[str, Any]) -> None:
        root = self._station.runs_root
        root.mkdir(parents=True, exist_ok=True)
        with (root / UNCLAIMED).open("a", encoding="ascii") as file:
            file.write(json.dumps({"kind": kind, "utc_ns": self._station.clock.utc_ns(), "data": data}) + "\n")
            file.flush()
            os.fsync(file.fileno())

    def _forget(self, snapshot: Snapshot) -> None:
        """Tell the MCU that it may forget a snapshot."""
        try:
            self._station.command("stored", {"number": snapshot.number}, "hvhost")
        except CommandRefused:  # the link went meanwhile: the next greeting fetches it again
            self._station.core.evidence.stored()


def _snapshot(snapshot: Snapshot) -> dict[str, Any]:
    return {"tag": snapshot.tag, "snapshot": snapshot.number, "kind": snapshot.kind, "trigger": snapshot.trigger,
            "index": snapshot.index, "lost": snapshot.lost, "codes": list(snapshot.codes)}


def _causes(one: Aftermath) -> dict[str, Any]:
    return {"tag": one.tag, "boot": one.boot, "causes": one.causes, "words": list(one.words),
            "host_rule": one.host_rule, "energised_mark": one.mark,
            "events": [[e.number, e.tick, e.kind, e.a, e.b] for e in one.events]}
