"""``hvhost deliver``: at once what the daemon would try again later."""

from pathlib import Path

import pytest

from hvhost.cli import main
from tests.bench.changes import DEMO, changed
from tests.publish.test_delivery import made


def test_what_is_due_goes_over_now(tmp_path: Path, capsys: pytest.CaptureFixture[str]) -> None:
    """A failure is code 7 and a sentence; then it goes; then nothing is due."""
    root, results, bench = tmp_path / "runs", tmp_path / "results", tmp_path / "b.yaml"
    made(root)
    bench.write_text(changed(f"archive.results={results}"), encoding="utf-8")
    words = ["deliver", str(bench), "--runs", str(root)]
    assert main(words) == 7
    assert "make it, or change" in capsys.readouterr().err
    results.mkdir()
    assert main(words) == 0
    assert "handed over" in capsys.readouterr().out
    assert main(words) == 0
    assert "nothing is due" in capsys.readouterr().out


def test_a_bench_without_an_archive_is_told_what_is_missing(tmp_path: Path, capsys: pytest.CaptureFixture[str]) -> None:
    """Exit code 5: nothing was done."""
    (tmp_path / "b.yaml").write_text(DEMO, encoding="utf-8")
    assert main(["deliver", str(tmp_path / "b.yaml")]) == 5
    assert "a section 'archive'" in capsys.readouterr().err
