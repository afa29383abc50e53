"""The standard's tree of a supply: SOURce, OUTPut, MEASure, ABORt; and the causes of a trip, which it has no node for.

Voltages and currents are magnitudes in the direction of the bench's polarity, programmed and measured alike;
``OUTPut:POLarity?`` tells INV where that direction is negative.
"""

from collections.abc import Callable

from hvhost.publish.instrument.basics import Params, always
from hvhost.publish.instrument.conditions import CURRENT_TRIPS, ENERGISED, VOLTAGE_TRIPS
from hvhost.publish.instrument.device import Device
from hvhost.publish.instrument.errors import Err, ScpiError, quoted
from hvhost.publish.instrument.session import Session, Stop, Waiting
from hvhost.publish.instrument.tree import Command
from hvhost.publish.instrument.values import (
    NOT_A_NUMBER,
    Bound,
    Units,
    boolean_of,
    number_or_bound,
    real,
    string_of,
)
from hvhost.publish.snapshot import LinkState, Reading, Snapshot

CAUSES_MAX = 16
MEASURE_S = 1.0  # pictures come every 0.1 s; a reading that is not there by then is not coming
RESET_S = 3.0  # the MCU's answer to a reset, with its repeats
NUMBER = "<number>[unit]|MIN|MAX|DEF"

Range = Callable[[Device], tuple[float, float, float]]  # lowest, highest, what *RST programs


def _volts(device: Device) -> tuple[float, float, float]:
    return 0.0, device.settings.limit_v, 0.0


def _amps(device: Device) -> tuple[float, float, float]:
    return 0.0, device.settings.limit_a, 0.0


def _slew(device: Device) -> tuple[float, float, float]:
    highest = device.bench.slew_v_per_s
    return min(device.slowest, highest), highest, highest


def _limit_v(device: Device) -> tuple[float, float, float]:
    return 0.0, device.bench.v_max, device.bench.v_max


def _limit_a(device: Device) -> tuple[float, float, float]:
    return 0.0, device.bench.i_max, device.bench.i_max


def _numeric(pattern: str, name: str, units: Units, span: Range, does: str) -> Command:
    """A setting by the name of its field: number or MIN, MAX, DEF; the query takes MIN, MAX or DEF too."""
    def act(session: Session, params: Params) -> None:
        low, high, default = span(session.device)
        value = number_or_bound(params[0], units)
        if isinstance(value, Bound):
            value = {Bound.MINIMUM: low, Bound.MAXIMUM: high, Bound.DEFAULT: default}[value]
        if not low <= value <= high:
            raise ScpiError(Err.OUT_OF_RANGE, f"{low:g} to {high:g}")
        session.device.program(session.caller, session.now_s, **{name: value})

    def query(session: Session, params: Params) -> str:
        if not params:
            return real(float(getattr(session.device.settings, name)))
        bound = number_or_bound(params[0], units)
        if not isinstance(bound, Bound):
            raise ScpiError(Err.ILLEGAL_VALUE, "MIN, MAX or DEF")
        low, high, default = span(session.device)
        return real({Bound.MINIMUM: low, Bound.MAXIMUM: high, Bound.DEFAULT: default}[bound])

    return Command(pattern=pattern, act=act, query=query, takes=NUMBER, asks="[MIN|MAX|DEF]", least=1, most=1,
                   most_asked=1, seat=True, does=does)


# ---------------------------------------------------------------- OUTPut


def _output(session: Session, params: Params) -> Waiting | None:
    if boolean_of(params[0]):
        return _switch_on(session)
    if not session.stopped_already(Stop.LOWER):
        session.stop(Stop.LOWER)
    return None


def _switch_on(session: Session) -> Waiting:
    """Judged by a picture younger than the command: a run that was energised a moment ago is no conflict."""
    session.device.need_seat(session.caller)
    yield from session.until_seen(session.now_s)
    session.need_not_overtaken()
    session.device.switch_on(session.caller, session.now_s)
    return None


def _off(params: Params) -> bool:
    """Whether these parameters switch the output off."""
    try:
        return bool(params) and not boolean_of(params[0])
    except ScpiError:
        return False


def _abort(session: Session, params: Params) -> None:
    if not session.stopped_already(Stop.CUT):
        session.stop(Stop.CUT)


def _known(session: Session) -> Snapshot | None:
    """The picture, None where it says nothing about the output; -230 is queued then: 'off' would be a guess."""
    shot = session.device.shot
    if shot is None or shot.link in (LinkState.NONE, LinkState.LOST):
        session.status.error(Err.STALE, "output unknown: use the emergency switching off")
        return None
    return shot


def _output_query(session: Session, params: Params) -> Waiting:
    yield from session.until_seen()
    shot = _known(session)
    return NOT_A_NUMBER if shot is None else "1" if shot.permission in ENERGISED else "0"


def _polarity(session: Session, params: Params) -> str:
    return "NORM" if session.device.bench.polarity > 0 else "INV"


def _tripped(causes: frozenset[str] | None) -> Callable[[Session, Params], Waiting]:
    """Whether one of these causes is latched; None: any."""
    def query(session: Session, params: Params) -> Waiting:
        yield from session.until_seen()
        shot = session.device.shot
        latched = shot.latched if shot is not None else ()
        return "1" if any(causes is None or word in causes for word in latched) else "0"
    return query


def _causes(session: Session, params: Params) -> Waiting:
    yield from session.until_seen()
    shot = session.device.shot
    return ",".join(quoted(word) for word in shot.latched) if shot is not None and shot.latched else quoted("")


def _clear_protection(session: Session, params: Params) -> Waiting:
    """Reset the latch by naming its causes; waits for the MCU's answer, and tells a refusal."""
    causes = [string_of(param) for param in params]
    device, caller = session.device, session.caller
    asked = device.ask("reset", {"causes": causes, "ticket": caller.ticket}, caller)
    until_s, reply = session.now_s + RESET_S, ""
    while not reply:
        if session.now_s > until_s:
            raise ScpiError(Err.HARDWARE, "the MCU did not answer")
        yield
        reply = str(device.ask("reply", {"ticket_number": asked["ticket_number"]}, caller).get("reply", ""))
    if reply != "ok":
        raise ScpiError(Err.CONFLICT, f"the MCU {reply}")
    yield from session.until_seen(session.now_s)
    return None


OUTPUT: tuple[Command, ...] = (
    Command(pattern="OUTPut[1][:STATe]", act=_output, query=_output_query, takes="ON|OFF|1|0", least=1, most=1,
            seat=True, stop=_off, overtakable=True,
            does="ON sends what is programmed to a direct run that was armed at the bench (else -221); OFF lowers and "
                 "needs no seat; the query tells whether the output is energised, 9.91E+37 where that is unknown"),
    Command(pattern="OUTPut[1]:POLarity", query=_polarity,
            does="NORM or INV: the direction of all voltages and currents"),
    Command(pattern="OUTPut[1]:PROTection:TRIPped", query=_tripped(None), does="1 where any cause is latched"),
    Command(pattern="OUTPut[1]:PROTection:CAUSe", query=_causes,
            does='the latched causes, each as a string; "" where there are none (a node of ours)'),
    Command(pattern="OUTPut[1]:PROTection:CLEar", act=_clear_protection, takes='"cause"[,"cause"...]', least=1,
            most=CAUSES_MAX, seat=True, overtakable=True, does="clears the latch; every latched cause must be named"),
    Command(pattern="ABORt", act=_abort, stop=always, cuts=True, does="cuts at once; needs no seat"),
)

# ---------------------------------------------------------------- MEASure


def _measured(pick: Callable[[Reading], float | None]) -> Callable[[Session, Params], Waiting]:
    """A mean over a sample block that began after the question came; the standard's not-a-number where none comes."""
    def query(session: Session, params: Params) -> Waiting:
        asked_s, until_s = session.asked_since(), session.now_s + MEASURE_S
        while session.now_s <= until_s:
            shot = session.device.shot
            reading = shot.reading if shot is not None else None
            if shot is not None and reading is not None and shot.now_s - reading.age_s - shot.block_s > asked_s:
                return real(pick(reading))
            yield
        session.status.error(Err.STALE, "no reading younger than the question")
        return NOT_A_NUMBER
    return query


MEASURE: tuple[Command, ...] = (
    Command(pattern="MEASure[:SCALar]:VOLTage[:DC]", query=_measured(lambda reading: reading.volts),
            does="the mean of a sample block younger than the question, in V; VOLTage? and CURRent? that follow each "
                 "other in a line are of the same block"),
    Command(pattern="MEASure[:SCALar]:CURRent[:DC]", query=_measured(lambda reading: reading.amps),
            does="the same of the current, in A"),
)

# ---------------------------------------------------------------- SOURce


def _trip_amps(session: Session, params: Params) -> str:
    shot, bench = session.device.shot, session.device.bench
    trip_a = shot.trip_amps if shot is not None and shot.trip_amps is not None else bench.limits.overcurrent_a
    return real(min(trip_a, bench.limits.overcurrent_a))


SOURCE: tuple[Command, ...] = (
    _numeric("[SOURce[1]]:VOLTage[:LEVel][:IMMediate][:AMPLitude]", "volts", Units.VOLT, _volts,
             "the voltage, in V; kept while the output is off, acts at once while it is on"),
    _numeric("[SOURce[1]]:VOLTage:SLEW", "slew", Units.VOLT_PER_SECOND, _slew, "the slew of the voltage, in V/S"),
    _numeric("[SOURce[1]]:VOLTage:LIMit[:AMPLitude]", "limit_v", Units.VOLT, _limit_v,
             "the highest voltage that may be programmed"),
    Command(pattern="[SOURce[1]]:VOLTage:PROTection[:LEVel]",
            query=lambda s, p: real(s.device.bench.limits.overvoltage_v), does="where the bench trips on overvoltage"),
    Command(pattern="[SOURce[1]]:VOLTage:PROTection:STATe", query=lambda s, p: "1", does="1: it is always on"),
    Command(pattern="[SOURce[1]]:VOLTage:PROTection:TRIPped", query=_tripped(VOLTAGE_TRIPS),
            does="1 where an overvoltage is latched"),
    _numeric("[SOURce[1]]:CURRent[:LEVel][:IMMediate][:AMPLitude]", "amps", Units.AMP, _amps,
             "the current limit, in A; as the voltage"),
    _numeric("[SOURce[1]]:CURRent:LIMit[:AMPLitude]", "limit_a", Units.AMP, _limit_a,
             "the highest current that may be programmed"),
    Command(pattern="[SOURce[1]]:CURRent:PROTection[:LEVel]", query=_trip_amps, does="where an overcurrent trips now"),
    Command(pattern="[SOURce[1]]:CURRent:PROTection:STATe", query=lambda s, p: "1", does="1: it is always on"),
    Command(pattern="[SOURce[1]]:CURRent:PROTection:TRIPped", query=_tripped(CURRENT_TRIPS),
            does="1 where an overcurrent is latched"),
)
