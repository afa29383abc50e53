"""The status model beside the standards' bits."""

from hypothesis import given
from hypothesis import strategies as st

from hvhost.publish.instrument.errors import Err
from hvhost.publish.instrument.status import BITS_16, Register, StandardEvent, Status, StatusByte

MASKS = st.integers(0, 0xFFFF)


def test_bits_are_the_standards() -> None:
    """IEEE 488.2 11.2 and 11.5.1, SCPI-99 volume 1 chapter 9 (as two independent libraries have them)."""
    assert {bit.name: bit.bit_length() - 1 for bit in StatusByte} == {
        "ERRORS": 2, "QUESTIONABLE": 3, "MESSAGE": 4, "EVENT": 5, "MASTER": 6, "OPERATION": 7}
    assert {bit.name: bit.bit_length() - 1 for bit in StandardEvent} == {
        "OPERATION_COMPLETE": 0, "REQUEST_CONTROL": 1, "QUERY_ERROR": 2, "DEVICE_ERROR": 3, "EXECUTION_ERROR": 4,
        "COMMAND_ERROR": 5, "USER_REQUEST": 6, "POWER_ON": 7}


def test_a_fresh_connection_says_that_its_registers_are_fresh() -> None:
    """Power on is set once, nothing is enabled, no summary stands."""
    status = Status()
    assert (status.take_esr(), status.take_esr()) == (128, 0)
    assert (status.ese, status.sre, status.byte(message=False)) == (0, 0, 0)
    assert (status.operation.ptr, status.operation.ntr, status.questionable.ptr) == (32_767, 0, 32_767)


def test_an_error_sets_its_event_its_summary_and_the_master_summary() -> None:
    """The chain from a command error to a service request, link by link."""
    status = Status()
    status.take_esr()
    status.error(Err.UNDEFINED_HEADER)
    assert status.byte(message=False) == 4
    status.ese = 32
    assert status.byte(message=False) == 4 | 32
    status.sre = 32
    assert status.byte(message=False) == 4 | 32 | 64
    assert status.take_esr() == 32
    assert status.byte(message=False) == 4


def test_an_answer_that_waits_is_mav() -> None:
    """Bit 4 is the output queue's."""
    assert Status().byte(message=True) == 16


def test_service_request_enable_has_no_bit_six() -> None:
    """IEEE 488.2, 11.3.2: the master summary cannot enable itself."""
    status = Status()
    status.sre = 255
    assert status.sre == 191


def test_a_rise_passes_the_positive_filter_and_a_fall_the_negative_one() -> None:
    """Only transitions make events; what stays true makes none."""
    register = Register()
    register.show(0b01)
    assert (register.take_event(), register.take_event()) == (1, 0)
    register.show(0b01)
    assert register.event == 0
    register.show(0b10)
    assert register.take_event() == 2
    register.ptr, register.ntr = 0, 0b10
    register.show(0b01)
    assert register.take_event() == 2


def test_reading_events_clears_them_but_no_condition() -> None:
    """The condition is what is true; reading changes nothing of it."""
    register = Register()
    register.show(5)
    register.take_event()
    assert register.condition == 5


def test_cls_clears_events_and_errors_and_leaves_enables_and_filters() -> None:
    """IEEE 488.2, 10.3."""
    status = Status()
    status.ese, status.sre = 255, 191
    status.operation.enable = status.operation.ptr = 7
    status.operation.show(3)
    status.error(Err.CONFLICT)
    status.clear()
    assert (status.esr, status.operation.event, len(status.errors), status.byte(message=False)) == (0, 0, 0, 0)
    assert (status.ese, status.sre, status.operation.enable, status.operation.ptr, status.operation.condition) == (
        255, 191, 7, 7, 3)


def test_preset_enables_nothing_and_passes_every_rise() -> None:
    """SCPI-99 volume 2, 20.7; events, errors, ESE and SRE are not its business."""
    status = Status()
    status.ese = 1
    status.questionable.show(1)
    status.questionable.enable = status.questionable.ntr = 9
    status.questionable.ptr = 0
    status.preset()
    register = status.questionable
    assert (register.enable, register.ptr, register.ntr, register.event, status.ese) == (0, 32_767, 0, 1, 1)


def test_enabled_device_events_reach_the_status_byte() -> None:
    """OPERation is bit 7 and QUEStionable bit 3."""
    status = Status()
    status.operation.enable = status.questionable.enable = 1
    status.operation.show(1)
    assert status.byte(message=False) == 128
    status.questionable.show(1)
    assert status.byte(message=False) == 128 | 8


@given(st.lists(MASKS, max_size=20), MASKS, MASKS)
def test_events_are_exactly_the_filtered_transitions(shown: list[int], ptr: int, ntr: int) -> None:
    """Compared with a slow twin that looks at one bit at a time; bit 15 never is anything but 0."""
    register = Register()
    register.ptr, register.ntr = ptr & BITS_16, ntr & BITS_16
    wanted, before = 0, 0
    for condition in shown:
        register.show(condition)
        for bit in range(15):
            was, now = before >> bit & 1, condition >> bit & 1
            if (now > was and ptr >> bit & 1) or (was > now and ntr >> bit & 1):
                wanted |= 1 << bit
        before = condition
    assert register.event == wanted
    assert register.condition < 1 << 15
