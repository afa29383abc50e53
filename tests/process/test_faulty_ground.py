"""Port missing, busy, forbidden, not ours; no folder, disk full: a sentence with the remedy, a code, no output.

Nothing is energised in any of them, and nobody is shown a traceback.
"""

import os
import resource
import threading
import tty
from pathlib import Path

import pytest

from hvhost.words.errors import CommandRefused
from tests.process.judge import ENERGISED, LOWERING, OFF, assert_never_released, assert_words_never_rise
from tests.process.scene import CONFIGS, RAMP_THEN_HOLD, Child, Scene, plan_text, wait

CANNOT_CONNECT, REFUSED = 6, 5
BABBLE = [b"temp=23.4 C, humidity=41\r\n", b"\xff\x00\x80 garbage \x01\n", b"b 0 0 0 0 0 0 0 0 0 0 1 AAAA\n",
          b"ok ok ok\n"]


def serve(scene: Scene, port: str, *arguments: str) -> Child:
    """A daemon that is expected to end by itself."""
    made = scene.child("serve", "serve", str(scene.bench_path), "--port", port, "--socket", scene.socket, "--runs",
                       str(scene.runs), "--standin", *arguments)
    made.wait_end()
    return made


def assert_sentence(child: Child, code: int, *words: str) -> None:
    """The exit code, one sentence with these words, no traceback."""
    assert child.process.returncode == code, child.err
    last = child.err.strip().splitlines()[-1]
    assert "expected" in last, child.err
    assert "found" in last, child.err
    for word in words:
        assert word in last, child.err
    assert "Traceback" not in child.err


def test_port_missing() -> None:
    """A device that is not there."""
    with Scene() as scene:
        assert_sentence(serve(scene, str(scene.folder / "none")), CANNOT_CONNECT, "no such device", "plug the board in")
        assert_sentence(serve(scene, "tcp:127.0.0.1:1"), CANNOT_CONNECT, "port.device")
        assert not Path(scene.socket).exists()


def test_second_daemon() -> None:
    """A second daemon on the same port, or on the same socket, is told so; the first serves on."""
    with Scene() as scene:
        scene.start_standin()
        first = scene.start_daemon()
        scene.ready()
        assert_sentence(serve(scene, scene.device), CANNOT_CONNECT, "in use")
        other = scene.child("serve", "serve", str(scene.bench_path), "--port", scene.device, "--socket",
                            str(scene.folder / "o.sock"), "--runs", str(scene.runs))
        other.wait_end()
        assert_sentence(other, CANNOT_CONNECT, "in use by another program", "stop the other program")
        assert scene.snapshot()["link"] == "greeted"
        assert first.process.poll() is None
        assert_never_released(scene.truth.states)


def test_same_socket_other_port() -> None:
    """Two daemons cannot share a control socket; the second leaves the first's in place."""
    with Scene() as scene:
        scene.start_standin()
        scene.start_daemon()
        master, slave = os.openpty()
        try:
            assert_sentence(serve(scene, os.ttyname(slave)), CANNOT_CONNECT, scene.socket)
        finally:
            os.close(master)
            os.close(slave)
        assert scene.snapshot()["bench"] == "demo"


def test_port_not_ours() -> None:
    """A port that talks, but not our protocol, is named as another device; the daemon goes on and nothing is armed."""
    with Scene() as scene:
        master, slave = os.openpty()
        tty.setraw(slave)
        done = threading.Event()

        def babble() -> None:
            while not done.is_set():
                for line in BABBLE:
                    os.write(master, line)
                done.wait(0.02)

        def drain() -> None:
            while not done.is_set():
                os.read(master, 65536)

        threads = [threading.Thread(target=babble, daemon=True), threading.Thread(target=drain, daemon=True)]
        for thread in threads:
            thread.start()
        try:
            scene.start_daemon(os.ttyname(slave))
            wait(lambda: "none of them in this protocol" in scene.snapshot().get("link_text", ""), "the judgement")
            assert scene.snapshot()["link"] in ("lost", "none")
            scene.take_seat()
            with pytest.raises(CommandRefused):
                scene.open_run(plan_text(RAMP_THEN_HOLD))
            scene.daemon.end()
            assert scene.daemon.process.returncode == 0, scene.daemon.err
            assert "Traceback" not in scene.daemon.err
        finally:
            done.set()
            os.write(slave, b"end\n")  # lets the draining thread look again
            threads[0].join(10.0)
            threads[1].join(10.0)
            os.close(master)
            os.close(slave)


def test_runs_folder_not_writable() -> None:
    """A runs folder that cannot be made refuses the run with a sentence; nothing is armed."""
    with Scene() as scene:
        (scene.folder / "file").write_text("no folder", encoding="ascii")
        scene.runs = scene.folder / "file" / "runs"
        scene.start_standin()
        scene.start_daemon()
        scene.ready()
        plan = scene.folder / "plan.yaml"
        plan.write_text(plan_text(RAMP_THEN_HOLD), encoding="utf-8")
        scene.call("seat.release")
        done = scene.command("run", str(plan), "--specimen", "S-1", "--reason", "scenario", "--socket", scene.socket)
        assert done.process.returncode in (REFUSED, 7), done.err
        assert "Traceback" not in done.err + scene.daemon.err
        assert str(scene.runs) in done.err, done.err
        assert "expected" in done.err
        assert scene.snapshot()["permission"] == "idle"
        assert_never_released(scene.truth.states)


def test_disk_full_in_mid_run() -> None:
    """A record that can grow no further ends the run safely: lowered, and told as such."""
    with Scene() as scene:
        scene.start_standin()
        daemon = scene.start_daemon()
        scene.ready()
        scene.energise(plan_text(RAMP_THEN_HOLD))
        scene.wait_volts(6000.0)
        assert scene.truth.last["mcu"] == ENERGISED
        before = scene.tick_now()
        size = (scene.run_folder() / "run.hvb").stat().st_size
        resource.prlimit(daemon.pid, resource.RLIMIT_FSIZE, (size + 4096, size + 4096))
        wait(lambda: scene.truth.last["mcu"] in (LOWERING, OFF), "the lowering")
        wait(lambda: scene.truth.last["mcu"] == OFF, "off")
        begun = scene.truth.first(lambda line: line["mcu"] == LOWERING, before)
        assert begun is not None
        assert_words_never_rise([line for line in scene.truth.states if line["tick"] >= begun["tick"]])
        status = scene.wait_closed()
        assert status["outcome"] == "record failed", status
        assert daemon.process.poll() is None
        assert "Traceback" not in daemon.err
        assert scene.status()["snapshot"]["record"]["text"]


def test_faulty_bench_file() -> None:
    """A bench file with faults is refused whole, each with its line."""
    with Scene() as scene:
        text = scene.bench_path.read_text(encoding="utf-8")
        scene.bench_path.write_text(text.replace("lease:\n  time: 500 ms", "lease:\n  time: 5 s")
                                    .replace("polarity: positive\n", "polarity: upward\n"), encoding="utf-8")
        made = serve(scene, str(scene.folder / "none"))
        assert made.process.returncode == REFUSED
        assert "Traceback" not in made.err
        assert sum(f"bench.yaml:{line}" in made.err for line in range(1, 200)) >= 2, made.err


@pytest.mark.parametrize("arguments", [
    ("status",), ("lower",), ("cut",), ("arm",), ("set", "1 kV", "1 mA"), ("reset", "breakdown"), ("watch",),
    ("seat",), ("run", str(CONFIGS / "demo.plan.yaml"), "--specimen", "S-1")], ids=lambda words: words[0])
def test_no_daemon(arguments: tuple[str, ...]) -> None:
    """Without a daemon every command says so, and a stop names the emergency switching off."""
    with Scene() as scene:
        done = scene.command(*arguments, "--socket", scene.socket)
        assert done.process.returncode == CANNOT_CONNECT, done.out + done.err
        assert "hvhost serve BENCH" in done.err
        assert "Traceback" not in done.err
        if arguments[0] in ("lower", "cut"):
            assert "use the emergency switching off" in done.err
