"""The form at rest of whole files."""

import hashlib
from pathlib import Path

import pytest

from hvhost.record import repack as repack_module
from hvhost.record.blockfile import read_blocks
from hvhost.record.entries import Damage, Entry
from hvhost.record.repack import live_hash, repack
from tests.record.making import Case, made_run


def test_the_form_at_rest_holds_the_same_entries_and_proves_it(tmp_path: Path) -> None:
    """Repacking changes bytes, not contents: every entry and sequence number is equal, and the live hash is kept."""
    path = made_run(tmp_path, Case(hold_s=0.5)).blocks
    before = [(e.seq, e.content) for e in read_blocks(path) if isinstance(e, Entry)]
    digest, size = hashlib.sha256(path.read_bytes()).hexdigest(), path.stat().st_size
    done = repack(path)
    assert (done.before, done.after, done.live_sha256, done.left) == (size, path.stat().st_size, digest, "")
    assert [(e.seq, e.content) for e in read_blocks(path) if isinstance(e, Entry)] == before
    assert live_hash(path) == digest
    assert [p.name for p in path.parent.iterdir() if p.name.startswith(".")] == []


def test_repacking_twice_changes_nothing(tmp_path: Path) -> None:
    """A file at rest stays as it is."""
    path = made_run(tmp_path, Case(hold_s=0.2)).blocks
    repack(path)
    data = path.read_bytes()
    assert repack(path).after == len(data)
    assert path.read_bytes() == data


def test_a_damaged_file_is_left_as_evidence(tmp_path: Path) -> None:
    """One flipped bit and nothing is rewritten."""
    path = made_run(tmp_path, Case(hold_s=0.2)).blocks
    data = bytearray(path.read_bytes())
    data[len(data) // 2] ^= 8
    path.write_bytes(data)
    assert repack(path).left.startswith("damaged")
    assert path.read_bytes() == data
    assert sum(isinstance(f, Damage) for f in read_blocks(path)) == 1


def test_a_shorter_form_that_is_not_equal_never_takes_the_name(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    """If packing had a fault, the proof fails and the original stays."""
    path = made_run(tmp_path, Case(hold_s=0.2)).blocks
    data = path.read_bytes()
    monkeypatch.setattr(repack_module, "pack_payload", lambda kind, flags, payload: (flags, payload[:-1] + b"?"))
    assert repack(path).left == "the shorter form was not equal"
    assert path.read_bytes() == data


def test_bytes_per_pair_at_rest(tmp_path: Path) -> None:
    """At 1 k pairs/s with noise of 2.5 codes on both channels the block file takes less than 4 bytes a pair."""
    path = made_run(tmp_path, Case(hold_s=20.0)).blocks
    pairs = 1000 * 20 + 5000 + 960 + 640
    assert repack(path).after / pairs < 4.0
