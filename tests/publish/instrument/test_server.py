"""The socket's shell: slow, silent, flooding, half-open and too many clients harm nobody; stops overtake; PyVISA."""

import contextlib
import ipaddress
import os
import random
import socket
import struct
import threading
import time
from dataclasses import replace

import pytest

from hvhost.bench.instrument import Instrument
from hvhost.publish.instrument import attach
from hvhost.publish.instrument.server import ServerLimits
from hvhost.publish.instrument.session import TalkLimits
from hvhost.publish.snapshot import Permission
from hvhost.words.errors import CannotConnect
from tests.publish.instrument.fakes import BENCH, FakeBench
from tests.publish.instrument.serving import served


def test_a_bench_without_the_section_gets_no_socket() -> None:
    """Off unless the bench file names it; named, it is an outlet and a service."""
    bench = FakeBench()
    attach(BENCH, bench)
    assert (bench.outlets, bench.services) == ([], [])
    attach(replace(BENCH, instrument=Instrument(host="127.0.0.1", port=5025)), bench)
    assert [one.name for one in bench.outlets] == ["instrument"]
    assert [name for name, _ in bench.services] == ["instrument"]


def test_a_plain_socket_session() -> None:
    """Identity, seat, set-points with slew, output refused then allowed, measurement, trip, queue, reset."""
    with served() as made:
        line = made.client()
        assert line.ask("*IDN?").startswith("hvhost,demo,0,")
        assert line.ask("SYST:LOCK:REQ?") == "1"
        line.write("VOLT 2KV;SLEW 20KV/S")
        assert line.ask("SYST:ERR?").startswith("-113")  # SLEW stands at the root there
        line.write("VOLT:SLEW 5KV/S;:CURR 1MA;:OUTP ON")
        assert line.ask("SYST:ERR?") == '-221,"Settings conflict;no direct run is armed at the bench"'
        made.do(made.bench.arm)
        assert line.ask("OUTP ON;*OPC?;:SYST:ERR?") == '1;0,"No error"'
        assert line.ask("MEAS:VOLT?;CURR?") == "2.000000E+03;2.500000E-04"
        assert line.ask("VOLT 9KV;VOLT?") == "9.000000E+03"
        made.do(lambda: made.bench.trip("overcurrent"))
        assert line.ask("*OPC?") == "1"
        assert line.ask("SYST:ERR?") == '-300,"Device-specific error;tripped: overcurrent"'
        assert line.ask('OUTP:PROT:CLE "overcurrent";TRIP?') == "0"


def test_a_pyvisa_session() -> None:
    """The library that laboratories use, in pure Python, over a raw socket: the same session through its eyes."""
    visa = pytest.importorskip("pyvisa") if not os.environ.get("HVHOST_CI") else __import__("pyvisa")
    with served() as made:
        manager = visa.ResourceManager("@py")
        try:
            bench = manager.open_resource(f"TCPIP::127.0.0.1::{made.server.port}::SOCKET", read_termination="\n",
                                          write_termination="\n", timeout=20_000)
            assert bench.query("*IDN?").split(",")[:3] == ["hvhost", "demo", "0"]
            assert bench.query("SYST:LOCK:REQ?") == "1"
            bench.write("*CLS;STAT:QUES:ENAB 512;*SRE 8")
            bench.write("VOLT:LEV 2KV;SLEW 5000;:CURR 1 MA")
            bench.write("OUTP ON")
            assert int(bench.query("SYST:ERR:CODE?")) == -221
            made.do(made.bench.arm)
            bench.write("OUTP ON;*OPC")
            assert bench.query("*OPC?") == "1"
            assert int(bench.query("*ESR?")) & 1
            assert bench.query_ascii_values("MEAS:VOLT?;CURR?", separator=";") == [2000.0, 2.5e-4]
            made.do(lambda: made.bench.trip("breakdown"))
            made.wait(lambda: made.server.device.trips, "the trip")
            assert int(bench.query("*STB?")) & 64
            assert int(bench.query("STAT:QUES?")) == 512
            assert "tripped: breakdown" in bench.query("SYST:ERR?")
            assert bench.query("SYST:ERR?") == '0,"No error"'
            bench.close()
        finally:
            manager.close()


def test_a_stop_overtakes_everything_that_waits() -> None:
    """Behind a wait and five hundred lines of its own connection, from the socket to the bench."""
    with served() as made:
        line = made.client()
        made.do(made.bench.arm)
        assert line.ask("SYST:LOCK:REQ?") == "1"
        line.write("VOLT 24KV;:CURR 1MA;:OUTP ON;*WAI")
        made.wait(lambda: "set" in made.bench.methods, "the set-point")
        line.socket.sendall(b"VOLT 24KV\n" * 500 + b"OUTP ON\n" + b"OUTP OFF\n")
        made.wait(lambda: "lower" in made.bench.methods, "the lowering")
        assert line.ask("*OPC?;:OUTP?") == "1;0"
        assert made.do(lambda: made.bench.methods[-1]) == "lower"


def test_the_seat_is_free_when_its_connection_closes() -> None:
    """However it closes."""
    with served() as made:
        for goodbye in (b"", b"VOLT 5"):
            line = made.client()
            assert line.ask("SYST:LOCK:REQ?") == "1"
            line.socket.sendall(goodbye)
            line.close()
            made.wait(lambda: made.bench.seat.holder is None, "the seat")
        line = made.client()
        assert line.ask("SYST:LOCK:REQ?") == "1"
        line.socket.setsockopt(socket.SOL_SOCKET, socket.SO_LINGER, struct.pack("ii", 1, 0))  # a reset
        line.close()
        made.wait(lambda: made.bench.seat.holder is None, "the seat")


def test_a_client_that_says_all_at_once_and_closes_its_side_gets_its_answers() -> None:
    """As 'printf | nc' does; a stop without a newline counts, the connection closes when all is answered."""
    with served() as made:
        line = made.client()
        line.socket.sendall(b"*IDN?\nMEAS:VOLT?\noutp off")
        line.socket.shutdown(socket.SHUT_WR)
        assert line.read().startswith("hvhost")
        assert line.read() == "0.000000E+00"
        assert line.read() == ""
        made.wait(lambda: made.bench.methods == ["lower"], "the stop")
        made.wait(lambda: made.server.view().clients == 0, "the end")


def test_a_client_that_does_not_read_is_asked_nothing_more_and_then_disconnected() -> None:
    """Others do not notice; memory stays bounded; its stops are taken until then."""
    limits = ServerLimits(unread=4_096, unread_s=0.5, talk=TalkLimits(rate_hz=1e6, burst=1e6, lost_most=10**9))
    with served(limits) as made:
        slow, other = made.client(), made.client()
        made.wait(lambda: made.server.view().clients == 2, "both")
        began_s = time.monotonic()
        slow.socket.setsockopt(socket.SOL_SOCKET, socket.SO_RCVBUF, 4_096)
        slow.socket.settimeout(0.05)
        line = b";".join([b"*IDN?"] * 30) + b"\n"
        until_s = time.monotonic() + 20.0
        with contextlib.suppress(OSError):
            while made.do(lambda: made.server.view().clients) == 2 and time.monotonic() < until_s:
                with contextlib.suppress(TimeoutError):
                    slow.socket.sendall(line * 20)
                assert other.ask("*OPC?") == "1"
        made.wait(lambda: made.server.view().clients == 1, "the disconnection")
        assert time.monotonic() - began_s > 0.5  # it had its time to read
        assert other.ask("*IDN?").startswith("hvhost")


def test_a_flood_is_ended_and_counted_and_others_do_not_notice() -> None:
    """Lines as fast as the socket takes them, and a line that never ends."""
    with served(ServerLimits(talk=TalkLimits(rate_hz=100.0, burst=10.0, waiting=20, lost_most=500))) as made:
        other = made.client()
        for flood in (b"*ESE?\n" * 10_000, b"V" * 2_000_000):
            bad = made.client()
            made.wait(lambda: made.server.view().clients == 2, "both")
            with contextlib.suppress(ConnectionError, TimeoutError):
                for _ in range(20):
                    bad.socket.sendall(flood)
            made.wait(lambda: made.server.view().clients == 1, "the end of the flood")
            assert other.ask("*OPC?") == "1"
        assert made.do(lambda: made.server.view().dropped) >= 1_000


def test_silent_and_half_open_clients_cost_a_place_and_nothing_else() -> None:
    """Connections that never say a word; the kernel is told to find out which of them are gone."""
    with served() as made:
        silent = [made.client() for _ in range(30)]
        line = made.client()
        assert line.ask("*IDN?").startswith("hvhost")
        assert made.do(lambda: made.server.view().clients) == 31

        def probes() -> tuple[int, int]:
            connection = next(iter(made.server._connections.values()))
            raw = connection._transport.get_extra_info("socket")  # type: ignore[union-attr]
            return (raw.getsockopt(socket.SOL_SOCKET, socket.SO_KEEPALIVE),
                    raw.getsockopt(socket.IPPROTO_TCP, socket.TCP_NODELAY))

        assert all(made.do(probes))
        for one in silent:
            one.close()
        made.wait(lambda: made.server.view().clients == 1, "their end")


def test_more_clients_than_places_may_still_stop() -> None:
    """A connection beyond the limit lowers and cuts, says so, and makes room when it is the oldest."""
    with served(ServerLimits(clients=2, stops_only=2)) as made:
        full = [made.client() for _ in range(2)]
        assert all(one.ask("*OPC?") == "1" for one in full)
        extra = [made.client() for _ in range(2)]
        for one in extra:
            assert "only stops" in one.ask("*IDN?")
        extra[0].write("OUTP OFF")
        made.wait(lambda: made.bench.methods == ["lower"], "the stop")
        third = made.client()
        assert "only stops" in third.ask("*IDN?")
        assert extra[0].read() == ""
        extra[1].write("ABOR")
        made.wait(lambda: made.bench.methods == ["lower", "cut"], "the cut")


def test_who_is_not_listed_is_turned_away_unheard() -> None:
    """Told once, counted always; loopback is this machine itself and always may."""
    place = Instrument(host="127.0.0.1", port=0, allow=(ipaddress.ip_network("192.0.2.0/24"),))
    with served(place=place) as made:
        assert made.client().ask("*OPC?") == "1"
        made.do(lambda: setattr(made.server, "place", _Nobody()))
        for _ in range(3):
            stranger = made.client()
            with contextlib.suppress(ConnectionError):
                stranger.write("OUTP OFF")
            assert stranger.read() == ""
        made.wait(lambda: made.server.refused == 3, "three refusals")
        assert made.bench.methods == []
        assert sum("refused" in text for text in made.bench.said) == 1


class _Nobody:
    """A place that admits nobody."""

    def admits(self, peer: str) -> bool:
        """No."""
        return False


def test_a_place_that_is_taken_is_told_in_a_sentence() -> None:
    """The daemon runs on and tries again; the sentence says what to do."""
    with served() as made:
        taken = Instrument(host="127.0.0.1", port=made.server.port)
        with pytest.raises(CannotConnect, match="a free address of this machine"), served(place=taken):
            pass


def test_ten_thousand_fuzzed_lines_over_the_socket() -> None:
    """Noise and mutated commands, a question after every hundred: always answered, nothing switched on."""
    rng = random.Random(7)
    real = [b"VOLT 5KV", b"OUTP ON", b"*ESE?", b"STAT:OPER:ENAB 5", b'OUTP:PROT:CLE "x"', b"VOLT MAX;SLEW DEF"]
    with served(ServerLimits(talk=TalkLimits(rate_hz=1e6, burst=1e6))) as made:
        line = made.client()
        for number in range(100):
            lines = []
            for _ in range(100):
                garbled = bytearray(rng.choice(real))
                for _ in range(rng.randrange(4)):
                    garbled[rng.randrange(len(garbled))] = rng.randrange(256)
                lines.append(bytes(garbled).replace(b"\n", b" "))
            line.socket.sendall(b"\n".join(lines) + b"\n")
            line.write(f"*CLS;*ESE {number};*IDN?;*ESE?")
            while not (answer := line.read()).startswith("hvhost,demo,0,"):
                assert answer  # of a line that noise left alone
            assert answer.endswith(f";{number}")
        view = made.do(made.server.view)
        assert (view.dropped, view.failed, view.clients) == (0, 0, 1)
        assert made.bench.permission is Permission.IDLE
        assert "set" not in made.bench.methods


def test_fifty_clients_ask_at_once_and_all_are_answered() -> None:
    """Each its own answers in order, while pictures go on."""
    with served() as made:
        lines = [made.client() for _ in range(50)]
        failures: list[str] = []

        def script(number: int) -> None:
            for turn in range(5):
                answer = lines[number].ask(f"*ESE {number};:MEAS:VOLT?;*ESE?")
                if answer != f"0.000000E+00;{number}":
                    failures.append(f"{number}/{turn}: {answer}")

        threads = [threading.Thread(target=script, args=(number,)) for number in range(50)]
        for one in threads:
            one.start()
        for one in threads:
            one.join(30.0)
        assert failures == []
        assert made.do(lambda: made.server.view().dropped) == 0


def test_the_service_ends_with_every_connection() -> None:
    """Nothing of it stays behind when the daemon ends."""
    with served() as made:
        line = made.client()
        assert line.ask("*OPC?") == "1"
        made.do(made.end_service)
        assert line.read() == ""
        assert made.do(made.server.view).clients == 0
        with pytest.raises(ConnectionRefusedError):
            socket.create_connection(("127.0.0.1", made.server.port), timeout=1.0)
