"""From the arm to the output: every refusal, the press, proving, the warning."""

import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from hvhost.wire.lines import seal
from hvhost.wire.vocabulary import ERR_NUMBERS, Cause, CutWhy, Err, Fitted, Inputs, McuState, VoidWhy
from tests.standin.fakes import ALL, SESSION, SETTINGS, Bench


def prepared(case: str) -> tuple[Bench, dict[str, int]]:
    """A bench on which exactly one thing stands against an arm, and the arm's fields."""
    bench = Bench()
    board = bench.board
    contacts = {"interlock": Inputs.INTERLOCK, "emergency": Inputs.EMERGENCY, "grounding": Inputs.GROUND_OPEN,
                "auxiliary": Inputs.AUXILIARY, "polarity": Inputs.POLARITY}
    fields = {"arm": {"arm": 2}, "settings": {"settings": 1}, "event": {"event": 1}, "looser": {"oc": 20001},
              "range": {"oc": 0}}
    if case in contacts:
        board.open(contacts[case])
    elif case == "danger":
        board.forced[Inputs.DANGER] = True
    elif case == "zero":
        board.v = 61
    elif case == "input":
        board.close(Inputs.ARM_INPUT)
    elif case == "latched":
        bench.cut(rule=4)
    elif case == "lease":
        bench.renewing = False
        bench.pass_ms(600)
    elif case == "state":
        bench.warned()
    bench.pass_ms(20)
    return bench, fields.get(case, {})


@pytest.mark.parametrize("case", ["arm", "settings", "event", "lease", "latched", "interlock", "emergency",
                                  "grounding", "auxiliary", "polarity", "danger", "zero", "input", "looser", "range",
                                  "state"])
def test_each_ground_refuses_an_arm_with_its_code_and_an_event(case):
    """What is not current or not in place refuses, is told as an event, and takes no arm number (PROTOCOL 5.4, 5.6)."""
    bench, fields = prepared(case)
    arms = bench.mcu.core.arms
    assert bench.arm(**fields) == case
    assert bench.event("refused").b == ERR_NUMBERS[Err(case)]
    assert bench.mcu.core.arms == arms
    assert bench.state is (McuState.WARNING if case == "state" else McuState.OFF)


@pytest.mark.parametrize("pause", [(0, 0, 0), (4, 200, 10_000), (3, 199, 10_000), (3, 200, 9_999)])
def test_an_arc_reaction_beyond_the_eeproms_bounds_is_refused(pause):
    """Count, rest and window are bounded by the EEPROM (PROTOCOL 11.2)."""
    assert Bench().arm(pause=pause) == "reaction"


def test_a_pause_without_a_provable_inhibit_is_refused():
    """Power stays on in a pause, so the inhibit must be provable (PROTOCOL 11.3)."""
    bench = Bench(SETTINGS.with_(fitted=ALL & ~Fitted.INHIBIT_BACK))
    assert bench.arm(pause=(3, 200, 10_000)) == "reaction"
    assert bench.arm() == ""


def test_an_arm_sent_again_behind_a_cut_is_refused():
    """The very bytes of an accepted arm do nothing once a cut came between, in this session or a new one (S3)."""
    bench = Bench()
    line = bench.arm_line()
    bench.n += 1
    bench.line(line)
    assert bench.state is McuState.REQUESTED
    bench.cut()
    bench.line(line)  # the repeat of an answered request: the same answer, nothing executed
    assert bench.state is McuState.OFF
    fresh = bench.arm_line(event=bench.mcu.core.stream.number - 1)
    bench.n += 1
    bench.line(fresh)
    assert bench.last().code == "event"
    bench.hello(session=5)
    bench.session = 5
    bench.pass_ms(100)
    bench.line(line.replace(f"{SESSION:08X}".encode(), b"00000005").replace(b"arm 2 ", b"arm 1 "))
    assert bench.last().code == "event"
    assert bench.state is McuState.OFF


def test_a_new_arm_voids_the_one_that_waits():
    """Only the newest arm can be pressed (PROTOCOL 5.8)."""
    bench = Bench()
    bench.arm(tag=1)
    assert bench.arm(tag=2) == ""
    assert bench.event("void").b == VoidWhy.NEW_ARM
    bench.press()
    assert bench.event("pressed").a == 2
    assert bench.mcu.core.tag == 2


@pytest.mark.parametrize(("ms", "goes_on"), [(150, False), (210, True), (2_900, True)])
def test_the_press_lasts_from_a_fifth_of_a_second_to_three(ms, goes_on):
    """A brush of the input is no press (PROTOCOL 5.10)."""
    bench = Bench()
    bench.arm()
    bench.press(ms)
    assert bench.state is (McuState.PROVING if goes_on else McuState.REQUESTED)


def test_a_press_that_never_ends_is_a_stuck_input():
    """Held for more than three seconds: refused with `input`, void, off (PROTOCOL 5.10)."""
    bench = Bench()
    bench.arm()
    bench.press(3_100)
    assert bench.state is McuState.OFF
    assert bench.event("refused").b == ERR_NUMBERS[Err.INPUT]
    assert bench.dead


def test_a_press_before_the_arm_does_not_count():
    """The press must begin after the arm: an input held before it refuses the arm (PROTOCOL 5.10)."""
    bench = Bench()
    bench.board.close(Inputs.ARM_INPUT)
    bench.pass_ms(100)
    assert bench.arm() == "input"


def test_no_press_within_thirty_seconds_voids():
    """The request expires by itself (PROTOCOL 5.10)."""
    bench = Bench()
    bench.arm()
    bench.pass_ms(29_990)
    assert bench.state is McuState.REQUESTED
    bench.pass_ms(20)
    assert bench.state is McuState.OFF
    assert bench.event("void").b == VoidWhy.EXPIRED
    assert bench.event("cut").a == CutWhy.EXPIRED


def test_without_an_arm_input_no_press_is_asked_for():
    """The setting says so, and proving begins at once (PROTOCOL 5.11)."""
    bench = Bench(SETTINGS.with_(fitted=ALL & ~Fitted.ARM_INPUT))
    assert bench.arm() == ""
    bench.until(McuState.WARNING, 100)
    assert "pressed" not in bench.kinds()


def test_proving_moves_the_inhibit_with_the_relay_open_then_closes_the_relay_inhibited():
    """Never are relay closed and inhibit released together before the warning's end (PROTOCOL 5.12)."""
    bench = Bench()
    seen: list[tuple[bool, bool]] = []
    drive = bench.board.drive

    def watch(*, inhibit: bool, clear: bool, relay: bool) -> None:
        assert clear or bench.state is McuState.WARNING
        if not seen or seen[-1] != (inhibit, relay):
            seen.append((inhibit, relay))
        drive(inhibit=inhibit, clear=clear, relay=relay)

    bench.board.drive = watch
    bench.warned()
    # after a boot the relay opens once more; (inhibit, relay)
    assert seen == [(False, False), (True, False), (True, True), (True, False), (True, True)]
    assert bench.event("proven").a == Fitted.INHIBIT | Fitted.RELAY
    assert bench.event("proven").b == Fitted.INHIBIT | Fitted.CLEAR | Fitted.RELAY
    assert bench.mcu.core.inputs & Inputs.PROVEN
    bench.cut()
    bench.pass_ms(300)
    seen.clear()
    bench.warned()
    assert seen == [(False, False), (True, False), (True, True)]  # its opening was seen at the cut


@pytest.mark.parametrize(("bit", "level"), [(Inputs.INHIBIT_BACK, True), (Inputs.INHIBIT_BACK, False),
                                            (Inputs.RELAY_BACK, False), (Inputs.RELAY_BACK, True),
                                            (Inputs.DANGER, False)])
def test_a_read_back_that_does_not_follow_latches_cut_path(bit, level):
    """Within one second or not at all (PROTOCOL 5.13)."""
    bench = Bench()
    bench.arm()
    bench.board.forced[bit] = level
    bench.press()
    bench.pass_ms(1_100)
    assert bench.dead
    assert bench.mcu.latched == Cause.CUT_PATH


def test_a_means_without_a_read_back_is_not_proven():
    """Nothing proven, no PROVEN bit; the bench counts as programming only (PROTOCOL 5.14)."""
    bench = Bench(SETTINGS.with_(fitted=ALL & ~(Fitted.INHIBIT_BACK | Fitted.RELAY_BACK)))
    bench.warned()
    assert bench.event("proven").a == 0
    assert not bench.mcu.core.inputs & Inputs.PROVEN


def test_the_warning_lasts_its_time_with_everything_asserted():
    """For `warn` ms the danger signal is lit, inhibit and clear asserted, words zero (PROTOCOL 5.15)."""
    bench = Bench(SETTINGS.with_(warn=4_000)).warned()
    began = bench.event("warning").tick
    assert bench.eeprom.kept.mark == 1
    assert bench.eeprom.kept.tag == 0xABCD1234
    while bench.state is McuState.WARNING:
        assert bench.board.inhibit
        assert bench.board.clear
        assert bench.mcu.v_word == 0
        bench.pass_ms(50)
    assert bench.event("energised").tick - began == 40_000


def test_tightened_limits_hold_for_one_arm_only():
    """The last run's pause and limits are gone in the next run (PROTOCOL 5.9)."""
    bench = Bench().energised(v=0, pause=(2, 300, 20_000), vmax=1_000, oc=500, persist=1)
    assert bench.seg(1_001) == "ceiling"
    assert bench.mcu.core.rules.over_i == 500
    assert bench.mcu.core.reaction.pause is not None
    bench.lower()
    assert bench.mcu.core.settings == SETTINGS
    assert bench.mcu.core.rules.over_i == 20_000
    assert bench.mcu.core.rules.persist == 2
    bench.pass_ms(400)
    bench.energised(v=0)
    assert bench.mcu.core.reaction.pause is None
    bench.board.i = 600
    bench.pass_ms(20)
    assert bench.seg(1_001) == ""
    assert bench.state is McuState.ENERGISED


@settings(max_examples=60, deadline=None)
@given(st.lists(st.tuples(st.sampled_from(["seg", "reset", "cut", "lower", "arc", "hello", "arm", "pause", "wait"]),
                          st.integers(0, 65535), st.integers(0, 3000)), max_size=25))
def test_without_a_press_the_inhibit_is_never_released(acts):
    """Whatever a host sends and however long it waits: no press, no output (PROTOCOL 16.1)."""
    bench = Bench()
    for act, a, b in acts:
        n = bench.n + 1
        if act in ("arm", "pause"):
            bench.arm(pause=(2, 300, 20_000) if act == "pause" else None)
            continue
        if act == "wait":
            bench.pass_ms(b)
        elif act == "hello":
            bench.hello(session=a + 1)
        else:
            body = {"seg": f"seg {n} {bench.session:08X} {a} {a} {b}", "cut": f"cut {a} {b % 3}",
                    "reset": f"reset {n} {bench.session:08X} {bench.causes:08X} {b % 2}",
                    "lower": f"lower {a} {bench.session:08X}", "arc": f"arc {a} {bench.session:08X} {b}"}[act]
            bench.n += act in ("seg", "reset")
            bench.line(body)
        assert bench.board.inhibit
        assert bench.board.clear
        assert not bench.board.relay
        assert bench.mcu.v_word == 0
    assert all(inhibit and not relay and v_cmd == 0.0 for v_cmd, inhibit, relay in bench.board.outputs)


def test_bytes_of_an_accepted_arm_replayed_by_the_line_are_one_arm():
    """A doubled line is a repeat by number and is executed once."""
    bench = Bench()
    line = seal(bench.arm_line())
    bench.n += 1
    bench.mcu.feed(line + line, bench.tick)
    bench.collect()
    assert bench.kinds().count("requested") == 1
