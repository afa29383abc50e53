"""B9: a plan of ten minutes rehearsed under the virtual clock, with its split; B8: what its record weighs at rest.

The judged figure is the wall time of the command itself, start to exit.  The split is taken in this process on the
same plan: the line between stand-in and station is timed from both sides, and the plant is run once more alone.
"""

import json
import subprocess
import sys
import time
from pathlib import Path

from hvhost.bench.file import load_bench
from hvhost.record.data import load_run
from hvhost.record.folder import RunFolder
from hvhost.record.recorder import InlineRecorder
from hvhost.speed.figures import Line
from hvhost.speed.scene import catch
from hvhost.speed.setting import Setting
from hvhost.standin.bench import StandIn, config_of
from hvhost.standin.eeprom import Eeprom
from hvhost.standin.params import demo
from hvhost.words.errors import CannotConnect

PLAN = """plan: Ten minutes
specimen: not self-restoring
released: {{by: speed, on: 2026-01-01}}
current_limit: 1 mA
steps:
  - ramp: {{to: 10 kV, duration: 3 s}}
  - hold: {{name: long, for: {hold_s:.1f} s, at_most: {most_s:.1f} s, clock: accumulate, readings: [{reading_s:.1f} s]}}
  - ramp: {{to: 0 V, rate: 2 kV/s}}
acceptance:
  - criterion: no breakdown
  - {{criterion: leakage below, limit: 20 µA, hold: long, at: {reading_s:.1f} s}}
"""
MINUTES, QUICK_MINUTES = 10.0, 1.0
REPEATS = 3
EDGES_S = 20.0  # ramps, warning, discharge: what a run has beside its hold


def measure(setting: Setting) -> list[Line]:
    """Return the lines of B9 and the size of B8."""
    minutes = QUICK_MINUTES if setting.minutes < 1.0 else MINUTES
    hold_s = minutes * 60.0 - EDGES_S
    plan = setting.place() / "ten.plan.yaml"
    plan.write_text(PLAN.format(hold_s=hold_s, most_s=hold_s * 1.1, reading_s=min(60.0, hold_s / 2)), encoding="utf-8")
    repeats = 1 if minutes < MINUTES else REPEATS
    told = []
    for k in range(repeats):
        setting.say(f"rehearsal {k + 1} of {repeats}")
        told.append(_rehearse(setting, plan))
    best = sorted(told, key=lambda one: one["command_s"])[len(told) // 2]
    split = _split(setting, hold_s)
    note = (f"{best['virtual_s']:.0f} s at 1 k pairs/s; core and line {best['wall_s']:.2f} s, closing "
            f"{best['close_s']:.2f} s; in a run of its own: " + ", ".join(f"{k} {v:.2f} s" for k, v in split.items()))
    bound = 20.0 * minutes / MINUTES
    if minutes < MINUTES:
        note += f"; shortened to {minutes:g} min, bound in proportion"
    return [
        Line(budget="B9", what=f"rehearse --fast, {minutes:g} minutes", measured=best["command_s"], unit="s",
             bound=bound, aim=bound / 4, against="the wall clock, median of " + str(repeats), note=note,
             raw={"runs": told, "split_s": split}),
        _size(best)]


def _rehearse(setting: Setting, plan: Path) -> dict[str, float]:
    runs = setting.place()
    begun = time.perf_counter()
    done = subprocess.run(
        [sys.executable, "-m", "hvhost", "rehearse", str(setting.bench), str(plan), "--fast", "--specimen", "S",
         "--seed", "1", "--set", "specimen.strength_v=40 kV", "--runs", str(runs), "--json"],
        stdin=subprocess.DEVNULL, capture_output=True, text=True)
    command_s = time.perf_counter() - begun
    try:
        told = json.loads(done.stdout.splitlines()[0])
    except (IndexError, ValueError):
        raise CannotConnect("a rehearsal", done.stderr.strip()[-300:] or "no word of it", "speed B9") from None
    folder = next(path for path in runs.iterdir() if path.is_dir())
    size = sum(file.stat().st_size for file in folder.rglob("*") if file.is_file())
    files = {file.name: file.stat().st_size for file in folder.iterdir() if file.is_file()}
    return {**told, "command_s": command_s, "bytes": size, "files": files,
            "rows": load_run(RunFolder.at(folder)).rows}


def _size(told: dict[str, float]) -> Line:
    return Line(budget="B8", what="at rest after close, all files", measured=told["bytes"] / told["rows"],
                unit="B/pair", bound=10.0, aim=6.0, against=f"{told['rows']:.0f} pairs kept",
                note=", ".join(f"{name} {size / told['rows']:.2f}" for name, size in told["files"].items()  # type: ignore[attr-defined]
                               if size / told["rows"] >= 0.01), raw={"files": told["files"]})


def _split(setting: Setting, hold_s: float) -> dict[str, float]:
    """Seconds of wall time by MCU, plant and host, scaled to the plan's length from a tenth of it."""
    setting.say("the split")
    span_s = hold_s / 10.0
    begun = time.perf_counter()
    scene = catch(setting.bench, setting.place(), InlineRecorder.open, ramp_s=3.0, hold_s=span_s)
    whole_s = time.perf_counter() - begun
    begun = time.perf_counter()
    scene.player(len(scene.given), setting.place(), InlineRecorder.open).close()
    host_s = time.perf_counter() - begun
    virtual_s = scene.given[-1].at_ns * 1e-9
    plant_s = _plant(setting, virtual_s)
    scale = (hold_s + EDGES_S) / virtual_s
    return {"host": host_s * scale, "plant": plant_s * scale,
            "MCU and line": max(0.0, whole_s - host_s - plant_s) * scale}


def _plant(setting: Setting, virtual_s: float) -> float:
    """Seconds that the plant alone takes for so long at full voltage."""
    params = demo()
    config = config_of(params)
    standin = StandIn(params, 1, eeprom=Eeprom(load_bench(setting.bench).settings()), config=config)
    plant, dt_s = standin.plant, config.sample_ticks / config.tick_hz
    plant.drive(inhibit=False, clear=False, relay=True)
    begun = time.perf_counter()
    for _ in range(int(virtual_s / dt_s)):
        plant.advance(dt_s, 4.0, 2.5)
        plant.sample()
        plant.inputs()
    return time.perf_counter() - begun
