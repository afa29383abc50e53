"""What a board does whatever a host says: lines written by hand, judged by the truth file."""

import random

from tests.process.figures import figure
from tests.process.judge import ENERGISED, HOST_SILENT, LOWERING, OFF, REQUESTED, assert_never_released, stopped
from tests.process.rawhost import SAMPLE_TICKS, RawHost
from tests.process.relay import sealed
from tests.process.scene import Scene, wait

RISE = (13107, 32767, 20_000)  # 5 kV in two seconds
STAY = (13107, 32767, 600_000)
FUZZ_LINES = 6000
VERBS = ("hello", "info", "get", "put", "save", "arm", "seg", "renew", "lower", "arc", "reset", "again", "snap",
         "stored", "cut", "press", "energise", "inhibit")


def test_cut_behind_a_torn_line() -> None:
    """A cut written behind a line that was torn off anywhere is obeyed: it begins with LF."""
    with Scene() as scene, RawHost(scene.start_standin(tcp=True)) as host:
        host.hello()
        segment = sealed(f"seg 9 {host.session:08X} 60000 60000 30000".encode())
        for length in range(1, len(segment), 3):  # off: every tearing answered, nothing else happens
            host.write(segment[:length] + host.cut())
            assert host.wait_answer(host.stop, "cut").startswith("ok")
        host.energise(lambda: scene.control("press 0.4"), RISE, STAY)
        scene.wait_volts(3000.0)
        assert scene.truth.last["mcu"] == ENERGISED
        torn = sealed(f"seg {host.number + 1} {host.session:08X} 60000 60000 30000".encode())[:37]
        host.write(torn)
        before = scene.tick_now()
        host.write(host.cut())
        assert host.wait_answer(host.stop, "cut").startswith("ok")
        cut = scene.truth.first(lambda line: line["mcu"] == OFF, before - 50)
        wait(lambda: scene.truth.first(stopped, before - 50), "the cut")
        assert cut is None or stopped(cut)
        later = scene.tick_now() + 5000
        wait(lambda: scene.tick_now() > later, "half a second")
        assert max(line["v_word"] for line in scene.truth.states) <= RISE[0]


def fuzzed(rng: random.Random, host: RawHost) -> bytes:
    """One line with a right CRC: a request that fits, one with a field changed, or words that fit nothing."""
    verb = rng.choice(VERBS)
    numbers = [0, 1, 2, host.number, host.number + 1, host.arms + 1, host.event, 4, 5, 500, 20_000, 65_535, 65_536,
               4_294_967_295, rng.randrange(1 << 32), -1]
    words = [f"{host.session:08X}", host.settings, "0000ABCD", "00100000", "FFFFFFFF", "vmax", "warn",
             "pause=1,300,60000", "vmax=1", "arc=0", "press", ""]
    fields = [str(rng.choice(numbers)) if rng.random() < 0.7 else rng.choice(words) for _ in range(rng.randrange(6))]
    head = [verb, str(host.number + 1), f"{host.session:08X}"] if rng.random() < 0.7 else [verb]
    return sealed(" ".join(head + fields).encode("ascii"))


def test_never_released_without_a_press() -> None:
    """Whatever the host sends, without a press no inhibit is released, no relay closed, no word written."""
    rng = random.Random(20)
    with Scene() as scene, RawHost(scene.start_standin(tcp=True)) as host:
        host.hello()
        accepted = 0
        for number in range(FUZZ_LINES):
            if number % 400 == 0:  # a sound session and a sound arm, so that the lines meet an open request
                host.hello()
                accepted += host.arm().startswith("ok")
                host.number += 1
                host.send(f"seg {host.number} {host.session:08X} 20000 20000 10000")
                host.ask("info", 0)
            line = fuzzed(rng, host)
            host.write(line)
            answer = f"{host.number + 1}"
            if any(body.split(" ")[1] == answer and body.startswith("ok") for body in host.answers[-3:]):
                host.number += 1
        host.hello()  # its answers come behind everything
        assert accepted >= 5, "too few arms were accepted for the lines to mean anything"
        assert any(line["mcu"] == REQUESTED for line in scene.truth.states)
        assert_never_released(scene.truth.states)
        assert not any(line["relay"] or line["power"] for line in scene.truth.states)
        assert all(line["mcu"] in (OFF, REQUESTED) for line in scene.truth.states)


def test_arm_again_behind_a_cut() -> None:
    """An arm sent again behind a cut arms nothing: as a repeat it is not executed, as a new request it is refused."""
    with Scene() as scene, RawHost(scene.start_standin(tcp=True)) as host:
        host.hello()
        assert host.arm().startswith("ok")
        wait(lambda: scene.truth.last.get("mcu") == REQUESTED, "the request")
        again = sealed(f"arm {host.number} {host.session:08X} {host.arms} 0000ABCD {host.settings} {host.event}"
                       .encode())
        seen = host.event
        host.write(host.cut() + again)
        assert host.wait_answer(host.stop, "cut").startswith("ok")
        assert host.ask("arm", host.arms, "0000ABCD", host.settings, seen).split(" ")[0] == "err"
        assert host.ask("arm", host.arms, "0000ABCD", host.settings, host.event).split(" ")[0] == "err"
        assert host.ask("arm", host.arms + 1, "0000ABCD", host.settings, seen).endswith(" event")
        scene.control("press 0.4")
        later = scene.tick_now() + 20_000
        wait(lambda: scene.tick_now() > later, "two seconds")
        cut = scene.truth.events("cut")[-1]
        assert all(line["mcu"] == OFF for line in scene.truth.states if line["tick"] > cut["tick"])
        assert_never_released(scene.truth.states)


def test_renewals_that_fall_behind() -> None:
    """A host that judges at half the pace of the samples loses the lease when its sample is one lease old."""
    with Scene() as scene, RawHost(scene.start_standin(tcp=True)) as host:
        host.hello()
        host.energise(lambda: scene.control("press 0.4"), RISE, STAY)
        scene.wait_volts(3000.0)
        start = host.index
        host.judged = lambda: start + (host.index - start) // 2
        begun = start * SAMPLE_TICKS
        wait(lambda: scene.truth.last["mcu"] in (LOWERING, OFF), "the lowering")
        lowering = scene.truth.first(lambda line: line["mcu"] == LOWERING, begun - 1000)
        assert lowering is not None
        # at half pace the sample is one lease old after two; a renewal is sent each 50 ms, a block takes 32 ms
        lease = host.lease_ms * 10
        assert lease <= lowering["tick"] - begun <= 2 * lease + 20
        assert lowering["causes"] & HOST_SILENT
        figure("judging at half pace: to lowering (two leases at most)", (lowering["tick"] - begun) / 1e4, "s")
        answer = host.ask("seg", 20_000, 32_767, 20_000)
        assert answer.startswith("err"), answer
