"""``hvhost demo``: the whole job in under a minute, against a stand-in, needing nothing but the install."""

import argparse
import json
import subprocess
import sys
import threading
from pathlib import Path

import hvhost
from hvhost.cli import exits
from hvhost.cli.live import clear_boot_latch, press_when_asked
from hvhost.cli.outfile import open_output
from hvhost.cli.rig import Rig
from hvhost.publish.snapshot import Snapshot
from hvhost.words.errors import FileFault

ABOUT = """Starts a stand-in and a daemon, checks bench, plan and run sheet, arms by the simulated press, ramps, holds,
meets a breakdown that the specimen's own physics causes, cuts, follows the discharge, closes the record and prints the
verdict.  In a terminal it shows the screen meanwhile (l lowers, c or SPACE cuts).  Nothing here is energised: MCU,
supply and specimen are software."""
SEED = 7
ENDED_S = 120.0


def examples() -> Path:
    """The folder of the example files: beside the package in a clone, in the environment's share when installed."""
    package = Path(hvhost.__file__).parent
    for folder in (package.parent / "configs", Path(sys.prefix) / "share" / "hvhost" / "examples"):
        if (folder / "demo.bench.yaml").exists():
            return folder
    raise FileFault("the example files", "none", str(package), "install hvhost from its source folder")


def run(argv: list[str]) -> int:
    """Run the demonstration; 0 when it went as scripted."""
    parser = argparse.ArgumentParser(prog="hvhost demo", description=ABOUT, epilog=exits.EPILOG)
    parser.add_argument("--seed", type=int, default=SEED, metavar="N", help=f"of the stand-in (default {SEED})")
    parser.add_argument("--runs", default="", metavar="FOLDER", help="where the run folder goes (default: ./runs)")
    parser.add_argument("--plain", action="store_true", help="lines instead of the screen")
    parser.add_argument("--truth", default="", metavar="FILE", help="keep the stand-in's truth file")
    options = parser.parse_args(argv)
    folder = examples()
    bench, plan, sheet = (folder / f"demo.{kind}.yaml" for kind in ("bench", "plan", "sheet"))
    print(f"seed {options.seed}", flush=True)
    from hvhost.cli.check import run as check

    if check([str(bench), str(plan), str(sheet)]):
        return exits.REFUSED
    print(f"checked: {bench.name}, {plan.name}, {sheet.name}: nothing to remark", flush=True)
    if options.truth:
        open_output(Path(options.truth)).close()
    runs = Path(options.runs or "runs").absolute()
    with Rig(bench, profile="demo", seed=options.seed, runs=runs) as rig:
        clear_boot_latch(rig)
        ended, code = _show(rig, plan, sheet, plain=options.plain or not sys.stdout.isatty())
        if options.truth:
            Path(options.truth).write_bytes(rig.truth.read_bytes())
        truth = rig.truth.read_text(encoding="ascii").splitlines()
    return _tell(ended, code, truth)


def _show(rig: Rig, plan: Path, sheet: Path, *, plain: bool) -> tuple[str, int]:
    """Run the plan in a child, press when asked, show the bench meanwhile; returns its JSON line and exit code."""
    child = subprocess.Popen(
        [sys.executable, "-m", "hvhost", "run", str(plan), "--sheet", str(sheet), "--json", "--reason", "demonstration",
         "--repeat-of", "demonstration", "--socket", rig.socket, "--as", "demonstration"],
        stdin=subprocess.DEVNULL, stdout=subprocess.PIPE, stderr=subprocess.PIPE, text=True, start_new_session=True)
    done = threading.Event()
    threading.Thread(target=press_when_asked, args=(rig, done), daemon=True).start()
    from hvhost.publish.screen import show_lines, show_screen

    def until(shot: Snapshot) -> bool:
        return child.poll() is not None

    try:
        if plain:
            show_lines(rig.socket, sys.stdout, until)
        else:
            show_screen(rig.socket, until, interrupt_stops=True)
        try:
            out, err = child.communicate(timeout=ENDED_S)
        except subprocess.TimeoutExpired:
            child.kill()
            out, err = child.communicate()
    finally:
        done.set()
        if child.poll() is None:
            child.kill()
            child.wait()
    if err.strip():
        print(err.strip(), file=sys.stderr)
    return out.strip(), child.returncode


def _tell(ended: str, code: int, truth: list[str]) -> int:
    """Print cause, voltage, time to the cut and the folder, beside what the plant says really happened."""
    if not ended:
        print("hvhost demo: the run did not begin", file=sys.stderr)
        return code if code > 0 else exits.INTERRUPTED
    status = json.loads(ended.splitlines()[-1])
    result = json.loads((Path(status["folder"]) / "result.json").read_text(encoding="utf-8"))
    print(f"run {status['run']}: {status['outcome']}: {status['why']}")
    print(f"verdict: {status['verdict']}")
    if result["breakdowns"]:
        first = result["breakdowns"][0]
        volts = first["volts"]
        stopped = first["to_stop_s"]
        print(f"breakdown at {volts['value'] / 1e3:.3f} kV ± {2 * volts['u'] / 1e3:.3f} kV (k = 2)"
              + ("" if stopped is None else f", cut at most {stopped * 1e3:.1f} ms after it began"))
    for line in _truth(truth):
        print(line)
    print(f"record: {status['folder']}  (hvhost show {status['run']} --runs {Path(status['folder']).parent})")
    return exits.PASSED if status["outcome"] == "tripped" and status["why"] == "breakdown" else int(status["exit"])


def _truth(lines: list[str]) -> list[str]:
    events = [json.loads(line) for line in lines]
    arcs = [e for e in events if e.get("what") == "arc"]
    if not arcs:
        return []
    cuts = [e for e in events if e.get("what") == "cut" and e["t_s"] >= arcs[0]["t_s"]]
    text = f"the plant itself: arc at {arcs[0]['value'] / 1e3:.3f} kV"
    if cuts:
        text += f", cut {(cuts[0]['t_s'] - arcs[0]['t_s']) * 1e3:.1f} ms after it"
    return [text]


