"""Manifest and revisions."""

import os
import shutil
import subprocess
from pathlib import Path

import pytest

from hvhost.record.folder import RunFolder
from hvhost.record.manifest import append_revision, check_folder, file_hash, revisions_of, write_manifest
from hvhost.words.errors import RecordFault
from tests.record.making import Case, made_run


@pytest.fixture
def folder(tmp_path: Path) -> RunFolder:
    """A short run with its manifest."""
    made = made_run(tmp_path, Case(hold_s=0.2))
    write_manifest(made, ("a remark",))
    return made


def test_a_closed_folder_is_sound_until_a_byte_changes(folder: RunFolder) -> None:
    """One changed byte in any file is found, and so is a file added or removed."""
    assert check_folder(folder).sound
    data = bytearray(folder.blocks.read_bytes())
    data[50] ^= 1
    folder.blocks.write_bytes(data)
    assert check_folder(folder).faults == ("run.hvb: changed since the close",)
    (folder.path / "bench.yaml").unlink()
    (folder.path / "new.txt").write_text("x")
    assert set(check_folder(folder).faults) == {"run.hvb: changed since the close", "bench.yaml: missing",
                                                "new.txt: not in the manifest"}


def test_sha256sum_agrees_with_the_manifest(folder: RunFolder) -> None:
    """Outside check: GNU coreutils' sha256sum reads the manifest and finds every file as it says."""
    tool = shutil.which("sha256sum")
    if tool is None:
        assert not os.environ.get("HVHOST_CI"), "sha256sum is missing: install coreutils"
        pytest.skip("sha256sum is not on this machine")
    done = subprocess.run([tool, "--check", "--strict", folder.manifest.name], cwd=folder.path, capture_output=True,
                          text=True, check=False)
    assert done.returncode == 0, done.stderr


def test_file_hash_of_a_published_vector(tmp_path: Path) -> None:
    """Outside check: SHA-256 of 'abc' (FIPS 180-4 example)."""
    (tmp_path / "abc").write_bytes(b"abc")
    assert file_hash(tmp_path / "abc") == "ba7816bf8f01cfea414140de5dae2223b00361a396177a9cb410ff61f20015ad"


def test_revisions_form_a_chain_and_change_nothing(folder: RunFolder) -> None:
    """What is learned later is appended, each naming the one before; the closed files stay as they were."""
    append_revision(folder, "evidence", {"causes": 4}, utc_ns=1)
    append_revision(folder, "inspection", {"kind": "puncture"}, utc_ns=2)
    assert [r["number"] for r in revisions_of(folder)] == [1, 2]
    assert revisions_of(folder)[0]["previous"] == file_hash(folder.manifest)
    assert check_folder(folder).sound


def test_equal_evidence_is_appended_once(folder: RunFolder) -> None:
    """Fetching the same evidence after each relinking does not pile up."""
    first = append_revision(folder, "evidence", {"causes": 4}, utc_ns=1)
    assert append_revision(folder, "evidence", {"causes": 4}, utc_ns=9) == first
    assert len(revisions_of(folder)) == 1


def test_a_revision_changed_or_taken_out_is_found(folder: RunFolder) -> None:
    """The chain shows a changed or missing revision."""
    for k in range(3):
        append_revision(folder, "evidence", {"k": k}, utc_ns=k)
    second = folder.revisions / "0002-evidence.json"
    text = second.read_text()
    second.write_text(text.replace('"k": 1', '"k": 7'))
    assert check_folder(folder).faults == ("revisions/0003-evidence.json: does not follow the one before",)
    second.unlink()
    assert any("number 2 expected" in fault for fault in check_folder(folder).faults)
    second.write_text("{")
    assert any("not readable" in fault for fault in check_folder(folder).faults)
    assert [r["kind"] for r in revisions_of(folder)] == ["evidence", "unreadable", "evidence"]


@pytest.mark.parametrize("kind", ["", "../x", "a b", "ü"])
def test_a_revision_kind_is_a_plain_word(folder: RunFolder, kind: str) -> None:
    """A kind becomes part of a file name, so it is letters, digits and dashes."""
    with pytest.raises(RecordFault, match="revision kind"):
        append_revision(folder, kind, {}, utc_ns=0)
