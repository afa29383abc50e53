"""What the MCU kept is stored where it belongs before the MCU may forget it."""

import json
from collections.abc import Iterator
from pathlib import Path

import pytest

from hvhost.publish.keeping import RETRY_S, UNCLAIMED
from hvhost.record.folder import RunFolder
from hvhost.record.manifest import revisions_of
from hvhost.record.recorder import RecorderHealth
from hvhost.supervisor.states import LinkState, Permission
from hvhost.words.errors import RecordFault
from tests.supervisor.lab import Lab


@pytest.fixture
def lab(tmp_path: Path) -> Iterator[Lab]:
    """A bench in memory, in a hold."""
    made = Lab(tmp_path)
    yield made.energise().held()
    made.end()


def arced(lab: Lab) -> Lab:
    """An arc, and the MCU off."""
    return lab.fault("arc").until(lambda: lab.permission is Permission.IDLE, 1.0)


def told_stored(lab: Lab) -> bool:
    """Whether the MCU was told that it may forget a snapshot."""
    return any(b"stored " in data for _, data in lab.sent)


def test_the_mcu_is_told_when_the_disk_has_it_and_not_before(lab: Lab) -> None:
    """A recorder that has not synced yet holds it back."""
    recording = lab.station.recording
    assert recording is not None
    behind = RecorderHealth(queued=3, lost=0, written_bytes=1, last_sync_age_s=1e6, failed="")
    recording.health = lambda: behind  # type: ignore[method-assign]
    arced(lab).pass_s(2.0)
    assert lab.core.evidence.fetching
    assert not told_stored(lab)
    del recording.health  # type: ignore[method-assign]
    lab.pass_s(0.2)
    assert told_stored(lab)


def test_a_recorder_that_failed_leaves_it_with_the_mcu(lab: Lab) -> None:
    """Not on the disk, not forgotten; and the run need not wait for it."""
    recording = lab.station.recording
    assert recording is not None
    failed = RecorderHealth(queued=0, lost=1, written_bytes=1, last_sync_age_s=0.0, failed="disk full")
    recording.health = lambda: failed  # type: ignore[method-assign]
    arced(lab)
    lab.closed()
    assert not told_stored(lab)


def test_what_no_folder_claims_is_kept_in_a_file_of_its_own(lab: Lab) -> None:
    """The run's folder is gone: causes and snapshot become lines of the file for things of no known run."""
    arced(lab).unplug()
    lab.station.requests.folder_of_tag = lambda tag: None  # type: ignore[method-assign]
    lab.plug().until(lambda: lab.core.state.link is LinkState.GREETED, 5.0).pass_s(1.0)
    lines = [json.loads(line) for line in (lab.runs / UNCLAIMED).read_text(encoding="ascii").splitlines()]
    assert {line["kind"] for line in lines} == {"causes", "evidence"}
    assert lab.said("is of no known run")
    assert told_stored(lab)


def test_a_folder_that_cannot_be_written_is_tried_again_and_bars_arming(lab: Lab) -> None:
    """Said, kept, tried again; nothing may be armed meanwhile."""
    arced(lab).unplug()
    folder: RunFolder = lab.jobs[0].folder

    def refuse(tag: int) -> RunFolder:
        raise RecordFault("a folder that can be written", "disk full", "runs")

    lab.station.requests.folder_of_tag = refuse  # type: ignore[method-assign]
    lab.plug().until(lambda: lab.core.state.link is LinkState.GREETED, 5.0).pass_s(1.0)
    assert lab.said("not stored yet")
    assert any("earlier run" in text for text in lab.ask("status")["obstacles"])
    assert not told_stored(lab)
    lab.station.requests.folder_of_tag = lambda tag: folder  # type: ignore[method-assign]
    lab.pass_s(RETRY_S + 0.5)
    assert {r["kind"] for r in revisions_of(folder)} == {"causes", "evidence"}
    assert told_stored(lab)
