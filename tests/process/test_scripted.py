"""The Python client, the example notebook and the archive against a daemon and a stand-in in processes of their own."""

import asyncio
import json
import os
import subprocess
import sys
from itertools import pairwise
from pathlib import Path

import numpy as np
import pandas as pd
import pytest

from hvhost.client import CannotConnect, CommandRefused, connect, connect_async
from hvhost.record.folder import RunFolder
from hvhost.record.manifest import check_folder
from tests.process.judge import ENERGISED, OFF
from tests.process.scene import CONFIGS, QUICK, SHORT_BLEED, Scene, plan_text, wait

ARCHIVE = """
archive:
  results: FOLDER/results
  decimal: comma
  separator: semicolon
  zone: Europe/Berlin
  command: [PYTHON, FOLDER/import.py]
  rehearsals: yes
"""
IMPORT = """
import pathlib, sys
here = pathlib.Path(__file__).parent
with (here / "imported.txt").open("a") as file:
    file.write(sys.argv[1] + "\\n")
sys.exit(0 if (here / "works").exists() else "the laboratory's system does not answer")
"""


def test_the_example_notebook_runs_and_never_arms() -> None:
    """As a script it prepares, waits for somebody else's arm and press, sets, reads, lowers, and finds its record."""
    with Scene() as scene:
        scene.start_standin()
        scene.start_daemon()
        scene.ready()
        scene.call("seat.release")
        with (scene.folder / "notebook.out").open("wb") as out:
            script = subprocess.Popen(
                [sys.executable, str(CONFIGS / "notebook.py")], stdin=subprocess.DEVNULL, stdout=out,
                stderr=subprocess.STDOUT, env={**os.environ, "HVHOST_SOCKET": scene.socket})
        try:
            wait(lambda: scene.status()["stage"] == "prepared", "the script's run")
            assert scene.truth.last.get("mcu") != ENERGISED
            arming = scene.child("arm", "arm", "--socket", scene.socket, "--quiet")
            wait(lambda: scene.snapshot()["permission"] == "requested", "the request")
            scene.control("press 0.4")
            assert script.wait(60.0) == 0, (scene.folder / "notebook.out").read_text()
        finally:
            if script.poll() is None:
                script.kill()
                script.wait()
        arming.wait_end()
        said = (scene.folder / "notebook.out").read_text()
        assert " 3.0 kV " in said
        assert "lowered" in said
        assert "NB-1" in said


def test_set_points_readings_and_stops_from_both_flavours() -> None:
    """The script shares the terminal's control, sees every sample once, and its cut is confirmed."""
    with Scene() as scene:
        scene.start_standin()
        scene.start_daemon()
        scene.ready()
        scene.run_id = str(scene.call("direct", specimen="PY-1", operator="scenario", reason="scenario")["run"])
        scene.call("seat.release")
        with connect(scene.socket, who="script") as bench:
            with pytest.raises(CommandRefused, match="direct run"):
                bench.set(volts=1e3, amps=1e-3)
            scene._ticket = (Path(scene.socket + ".seat")).read_text()
            scene.arm()
            scene.control("press 0.4")
            bench.wait_energised(30.0)
            bench.set(volts=3e3, amps=1e-3, slew=4e3)
            blocks = list(bench.readings(seconds=1.0))
            assert sum(map(len, blocks)) >= 1000
            assert all(b.index == a.index + len(a) for a, b in pairwise(blocks))
            assert {b.state for b in blocks} == {"energised"}
            asyncio.run(_parallel(scene.socket))
            bench.cut()
            wait(lambda: scene.truth.last.get("mcu") == OFF, "the cut")
            with pytest.raises(CommandRefused):
                bench.set(volts=1e3, amps=1e-3)
            scene.wait_closed()
            record = bench.record()
            rows = np.searchsorted(record["index"], [b.index for b in blocks])
            for row, block in zip(rows, blocks, strict=True):
                assert np.abs(record["voltage_kV"][row : row + len(block)] * 1e3 - block.volts).max() < 0.01
        assert not Path(scene.socket + ".seat").exists()


async def _parallel(socket: str) -> None:
    async with connect_async(socket, who="parallel") as bench:
        await bench.set(volts=4e3, amps=1e-3, slew=4e3)  # shares the control of the same user
        reached = await bench.wait_until(lambda s: s.reading is not None and (s.reading.volts or 0.0) > 3.9e3, 20.0)
        assert reached.run is not None
        blocks = [block async for block in bench.readings(every=50, seconds=0.5)]
        assert all((b.volts_min <= b.volts).all() and (b.volts <= b.volts_max).all() for b in blocks)
        assert [run.specimen for run in await bench.runs("specimen = PY-1")] == ["PY-1"]
        with pytest.raises(CannotConnect, match="condition"):
            await bench.wait_until(lambda s: False, 0.1)


def test_results_are_handed_over_and_a_failing_command_is_listed_and_tried_again() -> None:
    """At close a row appears whole in the folder; the command that fails leaves the run due, listed with its words."""
    with Scene(changes=(*SHORT_BLEED, ("  restrike: 20 ms\n", "  restrike: 20 ms\n" + ARCHIVE))) as scene:
        text = scene.bench_path.read_text()
        scene.bench_path.write_text(text.replace("FOLDER", str(scene.folder)).replace("PYTHON", sys.executable))
        (scene.folder / "results").mkdir()
        (scene.folder / "import.py").write_text(IMPORT)
        scene.start_standin()
        daemon = scene.start_daemon()
        scene.ready()
        scene.energise(plan_text(QUICK), specimen="BU 7/2")
        scene.wait_closed()
        wait(lambda: "not handed over" in daemon.err, "the failure")
        assert "does not answer" in daemon.err
        (name,) = os.listdir(scene.folder / "results")
        assert name.startswith("no-order_BU-7-2_")
        listed = scene.command("runs", "--runs", str(scene.runs), "--undelivered")
        assert "does not answer" in listed.out
        outlets = {one["name"]: one for one in scene.snapshot()["outlets"]}
        assert outlets["results"]["failed"] == 1
        (scene.folder / "works").touch()
        done = scene.command("deliver", str(scene.bench_path), "--runs", str(scene.runs))
        assert "handed over" in done.out, done.err
        assert scene.command("runs", "--runs", str(scene.runs), "--undelivered").out == ""
        row = pd.read_csv(scene.folder / "results" / name, sep=";", decimal=",").iloc[0]
        folder = next(scene.runs.glob("2*"))
        result = json.loads((folder / "result.json").read_text())
        assert (row["specimen"], row["verdict"]) == ("BU 7/2", result["verdict"])
        assert row["highest_kV"] == pytest.approx(result["highest_v"] / 1e3, rel=1e-6)
        assert check_folder(RunFolder(folder)).sound
