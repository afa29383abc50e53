"""The instrument socket, the whole way: PyVISA and sockets, the real daemon, a stand-in behind a pseudo-terminal."""

import contextlib
import os
import socket
from collections.abc import Iterator
from typing import Any

import pytest

from tests.process.judge import ENERGISED
from tests.process.scene import SHORT_BLEED, Scene, wait
from tests.publish.instrument.serving import Line

HEAD = "attended: yes\n"


def _free_port() -> int:
    with socket.socket() as probe:
        probe.bind(("127.0.0.1", 0))
        return int(probe.getsockname()[1])


@contextlib.contextmanager
def whole() -> Iterator[tuple[Scene, int]]:
    """A stand-in and a daemon with an instrument socket; the latch of the boot is cleared."""
    port = _free_port()
    section = f"{HEAD}instrument:\n  listen: 127.0.0.1:{port}\n"
    with Scene(changes=(*SHORT_BLEED, (HEAD, section))) as scene:
        scene.start_standin()
        scene.start_daemon()
        scene.ready()
        yield scene, port


@contextlib.contextmanager
def visa_session(port: int) -> Iterator[Any]:
    """A session of PyVISA's pure Python manager; on a machine that is the project's own it must be there."""
    module = __import__("pyvisa") if os.environ.get("HVHOST_CI") else pytest.importorskip("pyvisa")
    manager = module.ResourceManager("@py")
    try:
        with manager.open_resource(f"TCPIP::127.0.0.1::{port}::SOCKET", read_termination="\n",
                                   write_termination="\n", timeout=30_000) as bench:
            yield bench
    finally:
        manager.close()


@contextlib.contextmanager
def lines(port: int, count: int) -> Iterator[list[Line]]:
    """So many plain sockets, closed at the end."""
    made = [Line(port) for _ in range(count)]
    try:
        yield made
    finally:
        for line in made:
            line.close()


def test_a_script_runs_the_bench_from_identity_to_the_reset_after_a_trip() -> None:
    """Output refused, then armed at the bench by both acts, ramp, measurement, trip, causes, reset."""
    with whole() as (scene, port), visa_session(port) as bench, lines(port, 1) as (other,):
        assert bench.query("*IDN?").startswith("hvhost,demo,0,")
        assert bench.query("*TST?;:SYST:ERR?") == '0;0,"No error"'

        # control is with the local client: nothing may be set, nothing switched on
        assert bench.query("SYST:LOCK:REQ?;OWN?") == '0;"scenario"'
        bench.write("VOLT 5KV")
        assert bench.query("SYST:ERR?").startswith("-203,")

        # the local client prepares and arms a direct run, the press is made at the bench, control changes hands
        opened = scene.call("direct", specimen="S-1", operator="scenario", reason="scenario", repeat_of="scenario")
        scene.run_id = str(opened["run"])
        scene.call("seat.release")
        assert bench.query("SYST:LOCK:REQ?") == "1"
        bench.write("*CLS;STAT:QUES:ENAB 512;*SRE 8")
        bench.write("VOLT 4KV;:CURR 2 MA;:VOLT:SLEW 4 kV/s")
        bench.write("OUTP ON")
        assert bench.query("SYST:ERR?") == '-221,"Settings conflict;no direct run is armed at the bench"'
        assert bench.query("SYST:LOCK:REL;OWN?") == '"NONE"'
        scene.take_seat()
        scene.arm()
        scene.call("seat.release")
        assert bench.query("SYST:LOCK:REQ?") == "1"
        wait(lambda: bench.query("STAT:OPER:COND?") == "64", "the request")
        bench.write("OUTP ON")
        assert "waits for the press" in bench.query("SYST:ERR?")
        scene.control("press 0.4")
        wait(lambda: int(bench.query("STAT:OPER:COND?")) & 2048, "the warning")
        bench.write("OUTP ON")  # kept through proving and warning
        assert bench.query("*OPC?;:SYST:ERR?") == '1;0,"No error"'
        assert scene.truth.last["mcu"] == ENERGISED
        volts, amps = (float(text) for text in bench.query("MEAS:VOLT?;CURR?").split(";"))
        assert volts == pytest.approx(4e3, rel=0.02)
        assert abs(amps) < 2e-3
        assert bench.query("OUTP?;:OUTP:PROT:TRIP?") == "1;0"

        # a set-point acts at once, and the trip in the ramp ends the wait with its cause
        bench.write("VOLT:SLEW 500")
        assert float(bench.query("VOLT 8KV;*OPC;VOLT?")) == 8e3
        scene.control("fault on i-offset=20000")
        assert bench.query("*OPC?") == "1"
        scene.control("fault off i-offset")
        told = bench.query("SYST:ERR?")
        assert told.startswith('-300,"Device-specific error;tripped: ')
        assert int(bench.query("*STB?")) & 64
        assert int(bench.query("STAT:QUES?")) & 512
        causes = bench.query("OUTP:PROT:CAUS?")
        assert "overcurrent" in causes
        assert "overcurrent" in told
        wait(lambda: bench.query("OUTP?") == "0", "off")

        # only the whole set of causes clears the latch
        bench.write("OUTP:PROT:CLE")
        assert bench.query("SYST:ERR?").startswith("-109,")
        bench.write("*RST")
        assert bench.query("OUTP:PROT:TRIP?") == "1"

        def cleared() -> bool:
            bench.write(f"OUTP:PROT:CLE {bench.query('OUTP:PROT:CAUS?')}")
            return bench.query("OUTP:PROT:TRIP?") == "0"

        wait(cleared, "the reset")
        assert other.ask("*IDN?") == bench.query("*IDN?")


def test_a_stop_from_a_connection_without_the_seat_lowers_a_plain_sockets_run() -> None:
    """OUTPut OFF from the one without control: the bench lowers; the holder must acknowledge; the record names who."""
    with whole() as (scene, port), lines(port, 2) as (holder, other):
        opened = scene.call("direct", specimen="S-2", operator="scenario", reason="scenario", repeat_of="scenario")
        scene.run_id = str(opened["run"])
        scene.arm()
        scene.control("press 0.4")
        scene.call("seat.release")
        assert holder.ask("SYST:LOCK:REQ?") == "1"
        holder.write("VOLT 3KV;:CURR 2MA;:VOLT:SLEW MAX")
        wait(lambda: holder.ask("STAT:OPER:COND?") == "256", "energised")
        assert holder.ask("OUTP ON;*OPC?") == "1"
        assert other.ask("OUTP OFF;*OPC?;:OUTP?") == "1;0"
        holder.write("OUTP ON")
        assert holder.ask("SYST:ERR?").startswith('-203,"Command protected;stopped by instrument 127.0.0.1:')
        assert scene.said("lowered by instrument 127.0.0.1:")
        scene.wait_closed()
        assert scene.status()["outcome"] == "lowered"


def test_a_direct_run_whose_controller_is_gone_lowers() -> None:
    """The connection closes, the seat is free, nobody takes it: after ten seconds the bench lowers by itself."""
    with whole() as (scene, port), lines(port, 1) as (holder,):
        opened = scene.call("direct", specimen="S-3", operator="scenario", reason="scenario", repeat_of="scenario")
        scene.run_id = str(opened["run"])
        scene.arm()
        scene.control("press 0.4")
        scene.call("seat.release")
        assert holder.ask("SYST:LOCK:REQ?") == "1"
        holder.write("VOLT 2KV;:CURR 2MA;:OUTP ON")
        assert holder.ask("SYST:ERR?").startswith(('0,"No error"', "-221"))
        wait(lambda: int(holder.ask("STAT:OPER:COND?")) & 256, "energised")
        assert holder.ask("OUTP ON;*OPC?") == "1"
        holder.close()
        assert scene.wait_outcome()["why"] == "nobody has had control for 10 s"
