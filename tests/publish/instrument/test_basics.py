"""The commands of every instrument: IEEE 488.2's mandatory ones, STATus and SYSTem."""

import pytest

from hvhost import __version__
from hvhost.publish.instrument.basics import COMMON, STATUS, SYSTEM, always
from hvhost.publish.snapshot import LinkState, Permission, RecordView
from tests.publish.instrument.fakes import Talk


def test_the_mandatory_common_commands_are_there() -> None:
    """The thirteen of IEEE 488.2, 4.4.2 (certain, and seen in an independent library's list)."""
    forms = {f"{one.pattern}{mark}" for one in COMMON
             for mark, form in (("", one.act), ("?", one.query)) if form is not None}
    assert forms == {"*CLS", "*ESE", "*ESE?", "*ESR?", "*IDN?", "*OPC", "*OPC?", "*RST", "*SRE", "*SRE?", "*STB?",
                     "*TST?", "*WAI"}


def test_the_required_commands_of_the_standard_are_there() -> None:
    """SCPI-99 volume 1, 4.2.1: SYSTem:ERRor[:NEXT]?, SYSTem:VERSion?, STATus of both registers, STATus:PRESet."""
    patterns = {one.pattern for one in (*STATUS, *SYSTEM)}
    assert {"SYSTem:ERRor[:NEXT]", "SYSTem:VERSion", "STATus:PRESet"} <= patterns
    for register in ("OPERation", "QUEStionable"):
        assert {f"STATus:{register}[:EVENt]", f"STATus:{register}:CONDition", f"STATus:{register}:ENABle"} <= patterns
    assert always(())


def test_identity_has_four_fields() -> None:
    """IEEE 488.2, 10.14: maker, model, serial number, firmware; 0 where there is none."""
    assert Talk().client().ask("*IDN?").split(",") == ["hvhost", "demo", "0", __version__]


def test_the_standards_version() -> None:
    """SCPI-99 volume 2, 21.21: YYYY.V."""
    assert Talk().client().ask("SYST:VERS?") == "1999.0"


def test_masks_of_the_status_byte() -> None:
    """*ESE and *SRE keep what is set; bit 6 of *SRE is always 0; what does not fit is out of range."""
    client = Talk().client()
    assert client.ask("*ESE 255;*SRE #HFF;*ESE?;*SRE?") == "255;191"
    client.write("*ESE 256")
    client.write("*SRE -1")
    assert [text.partition(",")[0] for text in client.errors()] == ["-222", "-222"]


def test_the_status_byte_of_a_command_error() -> None:
    """Error queue, event summary, master summary, and an answer that waits."""
    client = Talk().client()
    client.write("*CLS;*ESE 32;*SRE 32")
    client.write("FOO")
    assert client.ask("*STB?") == str(4 | 32 | 64)
    assert client.ask("*ESE?;*STB?") == f"32;{4 | 16 | 32 | 64}"
    assert client.ask("*ESR?;*STB?") == f"32;{4 | 16}"


def test_reset_lowers_and_programs_nothing_and_clears_no_latch_and_no_status() -> None:
    """IEEE 488.2, 10.32 leaves queue, registers and enables; and a latch is no setting."""
    talk = Talk()
    client, other = talk.client().take_seat(), talk.client()
    client.write("VOLT 5KV;:CURR 1MA;:VOLT:SLEW 100;LIM 6KV")
    talk.bench.latched = ("overcurrent",)
    talk.show()
    other.write("*ESE 7;FOO")
    other.write("*RST")
    assert talk.bench.methods[-1] == "lower"
    assert client.ask("VOLT?;:CURR?;:VOLT:SLEW?;LIM?") == "0.000000E+00;0.000000E+00;5.000000E+03;2.400000E+04"
    assert client.ask("OUTP:PROT:TRIP?") == "1"
    assert other.ask("*ESE?") == "7"
    assert [text.partition(",")[0] for text in other.errors()] == ["-300", "-113"]


def test_self_test_tells_what_is_wrong() -> None:
    """0 where the bench could be worked with; else 1, and the reasons in the queue."""
    talk = Talk()
    client = talk.client()
    assert client.ask("*TST?") == "0"
    talk.bench.link, talk.bench.link_text = LinkState.OBSERVE, "settings differ"
    talk.bench.record = RecordView(ok=False, text="disk full")
    talk.show()
    assert client.ask("*TST?") == "1"
    assert client.errors() == ['-330,"Self-test failed;link: settings differ"',
                               '-330,"Self-test failed;record: disk full"']


@pytest.mark.parametrize("register", ["OPER", "QUES"])
def test_masks_of_the_device_registers(register: str) -> None:
    """Set and read back, decimal or not; bit 15 stays 0; STATus:PRESet restores the filters."""
    client = Talk().client()
    root = f"STAT:{register}"
    assert client.ask(f"{root}:ENAB?;PTR?;NTR?") == "0;32767;0"
    assert client.ask(f"{root}:ENAB 65535;PTR #H0F;NTR 3;ENAB?;PTR?;NTR?") == "32767;15;3"
    assert client.ask(f"STAT:PRES;:{root}:ENAB?;PTR?;NTR?") == "0;32767;0"
    client.write(f"{root}:ENAB 65536")
    assert client.error() == -222


def test_a_trip_is_read_through_the_status_registers() -> None:
    """From the condition to the service request, as a script would wait for it."""
    talk = Talk()
    client = talk.client()
    client.write("*CLS;STAT:QUES:ENAB 512;*SRE 8")
    talk.bench.arm()
    talk.after(0.2)
    assert client.ask("*STB?") == "0"
    assert client.ask("STAT:OPER:COND?") == "256"
    talk.bench.trip("overcurrent")
    talk.after(0.1)
    assert client.ask("*STB?") == str(4 | 8 | 64)
    assert client.ask("STAT:QUES:COND?") == "512"
    assert (client.ask("STAT:QUES?"), client.ask("STAT:QUES:EVEN?")) == ("512", "0")
    assert client.errors() == ['-300,"Device-specific error;tripped: overcurrent"']
    assert client.ask("STAT:QUES:COND?;*STB?") == "512;16"


def test_waiting_for_the_press_is_waiting_for_arm() -> None:
    """Bit 6 of OPERation is the standard's own."""
    talk = Talk()
    client = talk.client()
    talk.bench.arm(Permission.REQUESTED)
    talk.show()
    assert client.ask("STAT:OPER:COND?;EVEN?") == "64;64"


def test_errors_one_by_one_and_all_at_once() -> None:
    """NEXT, ALL, CODE and COUNt; taken errors are gone."""
    client = Talk().client()
    client.write("FOO")
    client.write("BAR")
    assert client.ask("SYST:ERR:COUN?") == "2"
    assert client.ask("SYST:ERR:CODE?") == "-113"
    client.write("*ESE 300")
    assert client.ask("SYST:ERR:ALL?") == '-113,"Undefined header;BAR",-222,"Data out of range;0 to 255"'
    assert client.ask("SYST:ERR:ALL?") == '0,"No error"'
    client.write("FOO")
    client.write("BAR")
    assert client.ask("SYST:ERR:CODE:ALL?") == "-113,-113"
    assert client.ask("SYST:ERR:CODE:ALL?;COUN?") == "0"  # and no more: COUNt is no node below CODE
    assert client.error() == -113


# ---------------------------------------------------------------- the seat


def test_the_seat_is_asked_for_told_and_given_back() -> None:
    """The standard's own LOCK nodes."""
    talk = Talk()
    one, two = talk.client(), talk.client()
    assert one.ask("SYST:LOCK:OWN?") == '"NONE"'
    assert (one.ask("SYST:LOCK:REQ?"), two.ask("SYST:LOCK:REQ?")) == ("1", "0")
    assert (one.ask("SYST:LOCK:OWN?"), two.ask("SYST:LOCK:OWN?")) == ('"instrument 1"', '"instrument 1"')
    two.write("SYST:LOCK:REL")
    assert two.errors() == ['-203,"Command protected;control is not with this connection"']
    one.write("SYST:LOCK:REL")
    assert (one.error(), one.ask("SYST:LOCK:OWN?"), two.ask("SYST:LOCK:REQ?")) == (0, '"NONE"', "1")


def test_setting_without_the_seat_is_protected() -> None:
    """-203 for every setting command, and nothing changes; reading needs no seat."""
    talk = Talk()
    client = talk.client()
    for text in ("VOLT 5", "CURR 1MA", "VOLT:SLEW 100", "VOLT:LIM 5", "CURR:LIM 1MA", "OUTP ON",
                 'OUTP:PROT:CLE "overcurrent"'):
        client.write(text)
        assert client.errors() == ['-203,"Command protected;nobody has it"'], text
    assert talk.device.settings == talk.device.reset_settings()
    assert client.ask("VOLT?;:OUTP?") == "0.000000E+00;0"


def test_after_a_stop_by_somebody_else_the_holder_acknowledges_by_asking_again() -> None:
    """Until then set-points are refused, with the stop's name."""
    talk = Talk()
    holder, other = talk.client().take_seat(), talk.client()
    other.write("OUTP OFF")
    holder.write("VOLT 5")
    assert holder.errors() == ['-203,"Command protected;stopped by instrument 2"']
    assert holder.ask("SYST:LOCK:REQ?") == "1"
    assert "seat.acknowledge" in talk.bench.methods
    holder.write("VOLT 5")
    assert holder.error() == 0


def test_a_holder_who_lost_the_seat_is_told_so() -> None:
    """Taken over at the bench: the next set-point is refused, and asking again is refused too."""
    talk = Talk()
    client = talk.client().take_seat()
    talk.bench.seat.take("bob", "bobs", talk.bench.now_s, reason="end of shift")
    client.write("VOLT 5")
    assert client.errors() == ['-203,"Command protected;control is with bob"']
    assert client.ask("SYST:LOCK:REQ?") == "0"
    client.write("SYST:LOCK:REL")
    assert client.error() == -203
    assert talk.bench.seat.holder is not None
    assert talk.bench.seat.holder.name == "bob"
