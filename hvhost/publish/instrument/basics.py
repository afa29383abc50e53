"""The commands that every instrument of the standards has: IEEE 488.2's common ones, STATus and SYSTem of SCPI-99."""

from collections.abc import Callable

from hvhost import __version__
from hvhost.publish.instrument.errors import Entry, Err, ScpiError, quoted
from hvhost.publish.instrument.session import Session, Stop, Waiting
from hvhost.publish.instrument.status import BITS_8, Register
from hvhost.publish.instrument.syntax import Param
from hvhost.publish.instrument.tree import Command
from hvhost.publish.instrument.values import mask_of
from hvhost.publish.snapshot import LinkState

Params = tuple[Param, ...]

MASK_16_MAX = 65_535  # bit 15 may be sent and is always 0
SCPI_VERSION = "1999.0"
SELF_TEST_FAILED = "1"


def always(params: Params) -> bool:
    """A stop whatever its parameters."""
    return True


# ---------------------------------------------------------------- IEEE 488.2


def _clear(session: Session, params: Params) -> None:
    session.status.clear()
    session.completing = False


def _set_ese(session: Session, params: Params) -> None:
    session.status.ese = mask_of(params[0], BITS_8)


def _set_sre(session: Session, params: Params) -> None:
    session.status.sre = mask_of(params[0], BITS_8)


def _identity(session: Session, params: Params) -> str:
    """Maker, model, serial number (0: none), firmware: the model is the bench."""
    return f"hvhost,{session.device.bench.name},0,{__version__}"


def _complete(session: Session, params: Params) -> None:
    session.completing = session.device.busy
    if not session.completing:
        session.status.operation_complete()


def _complete_query(session: Session, params: Params) -> Waiting:
    yield from session.until_done()
    return "1"


def _wait(session: Session, params: Params) -> Waiting:
    yield from session.until_done()
    return None


def _reset(session: Session, params: Params) -> None:
    session.completing = False
    session.device.reset()
    if not session.stopped_already(Stop.LOWER):
        session.stop(Stop.LOWER)


def _self_test(session: Session, params: Params) -> Waiting:
    """0 where the bench could be worked with: link greeted, settings agreeing, record able to write."""
    yield from session.until_seen()
    shot = session.device.shot
    assert shot is not None
    faults = [text for bad, text in ((shot.link is not LinkState.GREETED, f"link: {shot.link_text}"),
                                     (not shot.record.ok, f"record: {shot.record.text}")) if bad]
    for text in faults:
        session.status.error(Err.SELF_TEST, text)
    return SELF_TEST_FAILED if faults else "0"


COMMON: tuple[Command, ...] = (
    Command(pattern="*CLS", act=_clear, does="clears the event registers and the error queue, cancels *OPC"),
    Command(pattern="*ESE", act=_set_ese, query=lambda s, p: str(s.status.ese), takes="<mask>", least=1, most=1,
            does="event status enable: which standard events make bit 5 of the status byte"),
    Command(pattern="*ESR", query=lambda s, p: str(s.status.take_esr()),
            does="the standard events, which reading clears"),
    Command(pattern="*IDN", query=_identity, does="identity: hvhost, the bench's name, 0, the version"),
    Command(pattern="*OPC", act=_complete, query=_complete_query,
            does="sets event bit 0, or answers 1, when no ramp and no lowering is under way"),
    Command(pattern="*RST", act=_reset, stop=always,
            does="lowers, and programs 0 V, 0 A, the bench's slew and limits; clears no latch"),
    Command(pattern="*SRE", act=_set_sre, query=lambda s, p: str(s.status.sre), takes="<mask>", least=1, most=1,
            does="service request enable: which bits of the status byte make its bit 6"),
    Command(pattern="*STB", query=lambda s, p: str(s.status.byte(message=s.answering)), does="the status byte"),
    Command(pattern="*TST", query=_self_test, does="0: link greeted and record ready; else 1 and errors -330"),
    Command(pattern="*WAI", act=_wait, does="what follows waits for the end of a ramp or lowering"),
)

# ---------------------------------------------------------------- STATus

Pick = Callable[[Session], Register]


def _condition(pick: Pick) -> Callable[[Session, Params], Waiting]:
    def query(session: Session, params: Params) -> Waiting:
        yield from session.until_seen()
        return str(pick(session).condition)
    return query


def _masked(pick: Pick, name: str) -> tuple[Callable[[Session, Params], None], Callable[[Session, Params], str]]:
    """Command and query form of one mask of a register."""
    def act(session: Session, params: Params) -> None:
        setattr(pick(session), name, mask_of(params[0], MASK_16_MAX) & ~(1 << 15))

    def query(session: Session, params: Params) -> str:
        return str(getattr(pick(session), name))
    return act, query


def _registers(name: str, pick: Pick) -> tuple[Command, ...]:
    root = f"STATus:{name}"
    enable, ptr, ntr = (_masked(pick, mask) for mask in ("enable", "ptr", "ntr"))
    return (
        Command(pattern=f"{root}[:EVENt]", query=lambda s, p: str(pick(s).take_event()),
                does="the events, which reading clears"),
        Command(pattern=f"{root}:CONDition", query=_condition(pick), does="what is true now"),
        Command(pattern=f"{root}:ENABle", act=enable[0], query=enable[1], takes="<mask>", least=1, most=1,
                does="which events make the summary bit of the status byte"),
        Command(pattern=f"{root}:PTRansition", act=ptr[0], query=ptr[1], takes="<mask>", least=1, most=1,
                does="which rises of the condition become events"),
        Command(pattern=f"{root}:NTRansition", act=ntr[0], query=ntr[1], takes="<mask>", least=1, most=1,
                does="which falls of the condition become events"),
    )


STATUS: tuple[Command, ...] = (
    *_registers("OPERation", lambda session: session.status.operation),
    *_registers("QUEStionable", lambda session: session.status.questionable),
    Command(pattern="STATus:PRESet", act=lambda s, p: s.status.preset(),
            does="enables nothing, passes every rise and no fall"),
)

# ---------------------------------------------------------------- SYSTem


def _all_errors(session: Session, params: Params) -> str:
    return ",".join(entry.text for entry in _taken(session))


def _all_codes(session: Session, params: Params) -> str:
    return ",".join(str(entry.number.value) for entry in _taken(session))


def _taken(session: Session) -> list[Entry]:
    """Every queued error, taken; 'no error' where there is none."""
    errors = session.status.errors
    return [errors.next() for _ in range(max(1, len(errors)))]


def _request(session: Session, params: Params) -> str:
    """Ask for the seat: 1 where it is ours now, 0 where somebody has it; asked again it acknowledges a stop."""
    device, caller = session.device, session.caller
    try:
        device.ask("seat.take", {"ticket": caller.ticket}, caller)
    except ScpiError as error:
        if error.number is Err.PROTECTED:
            return "0"
        raise
    session.seated = True
    if device.stopped_by(caller):
        device.ask("seat.acknowledge", {"ticket": caller.ticket}, caller)
    return "1"


def _release(session: Session, params: Params) -> None:
    caller = session.caller
    if not session.seated or not session.device.ask("seat.release", {"ticket": caller.ticket}, caller)["released"]:
        raise ScpiError(Err.PROTECTED, "control is not with this connection")
    session.seated = False


def _owner(session: Session, params: Params) -> Waiting:
    yield from session.until_seen(session.now_s)
    shot = session.device.shot
    return quoted(shot.seat if shot is not None and shot.seat else "NONE")


SYSTEM: tuple[Command, ...] = (
    Command(pattern="SYSTem:ERRor[:NEXT]", query=lambda s, p: s.status.errors.next().text,
            does='the oldest error, which is taken from the queue; 0,"No error" where there is none'),
    Command(pattern="SYSTem:ERRor:ALL", query=_all_errors, does="every error, taken"),
    Command(pattern="SYSTem:ERRor:CODE[:NEXT]", query=lambda s, p: str(s.status.errors.next().number.value),
            does="the number of the oldest error, taken"),
    Command(pattern="SYSTem:ERRor:CODE:ALL", query=_all_codes, does="the numbers of every error, taken"),
    Command(pattern="SYSTem:ERRor:COUNt", query=lambda s, p: str(len(s.status.errors)), does="how many errors wait"),
    Command(pattern="SYSTem:VERSion", query=lambda s, p: SCPI_VERSION, does="the standard's version"),
    Command(pattern="SYSTem:LOCK:REQuest", query=_request,
            does="asks for control: 1 it is with this connection, 0 somebody has it; asked again by its holder it "
                 "acknowledges a stop by somebody else"),
    Command(pattern="SYSTem:LOCK:RELease", act=_release, does="gives control back; the end of the connection does too"),
    Command(pattern="SYSTem:LOCK:OWNer", query=_owner, does='who has control, "NONE" where nobody'),
)

