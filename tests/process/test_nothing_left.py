"""The demonstration as a user starts it: it tells the truth and leaves no process, socket or folder behind."""

import json
import os
import re
import subprocess
import sys
import tempfile
from pathlib import Path

import pytest


def processes() -> dict[int, str]:
    """Every process whose environment carries the scenario's mark, by its command line."""
    found = {}
    for entry in Path("/proc").iterdir():
        if entry.name.isdigit():
            try:
                if MARK.encode() in (entry / "environ").read_bytes():
                    found[int(entry.name)] = (entry / "cmdline").read_bytes().replace(b"\0", b" ").decode()
            except OSError:
                continue
    return found


MARK = f"HVHOST_SCENARIO={os.getpid()}"


@pytest.mark.long
def test_demo() -> None:
    """With standard input closed it ends by itself, passed, with cause, time and voltage that match the truth file."""
    with tempfile.TemporaryDirectory(prefix="hvt-") as folder:
        temp, runs, truth = Path(folder, "tmp"), Path(folder, "runs"), Path(folder, "truth.jsonl")
        temp.mkdir()
        name, _, value = MARK.partition("=")
        done = subprocess.run(
            [sys.executable, "-m", "hvhost", "demo", "--plain", "--runs", str(runs), "--truth", str(truth)],
            stdin=subprocess.DEVNULL, capture_output=True, text=True, timeout=150,
            env={**os.environ, "TMPDIR": str(temp), "XDG_RUNTIME_DIR": str(temp), name: value}, check=False)
        assert done.returncode == 0, done.stdout + done.stderr
        assert not list(temp.rglob("*")), list(temp.rglob("*"))
        assert not processes()
        assert "Traceback" not in done.stdout + done.stderr

        lines = [json.loads(line) for line in truth.read_text(encoding="ascii").splitlines()]
        arc = next(line for line in lines if line.get("what") == "arc")
        cut = next(line for line in lines if line.get("what") == "cut" and line["tick"] >= arc["tick"])
        result = json.loads(next(runs.glob("*/result.json")).read_text(encoding="utf-8"))
        assert result["outcome"] == "tripped"
        assert result["causes"] == ["breakdown"]
        assert result["verdict"] == "fail"
        said = result["breakdowns"][0]["volts"]
        assert abs(said["value"] - arc["value"]) <= 2 * said["u"], (said, arc)
        # from the arc to the inhibit: one sample period, two conversions of persistence, 0.2 ms (PROTOCOL.md 10.1)
        assert 0.0 < cut["t_s"] - arc["t_s"] <= 0.0035
        volts = re.search(r"breakdown at ([\d.]+) kV", done.stdout)
        assert volts is not None
        assert abs(float(volts[1]) * 1e3 - arc["value"]) <= 2 * said["u"]
