"""What the two condition registers show of a picture: bits of SCPI-99 where it has them, ours in its free bits."""

from datetime import UTC, date, datetime
from enum import IntFlag

from hvhost.publish.snapshot import LinkState, Permission, Phase, Snapshot, VoltageState
from hvhost.supervisor.runs import rule_word
from hvhost.wire.vocabulary import Cause, HostRule, cause_words

OLD_BLOCKS = 2.0  # a readback older than this many blocks is old (S13)
DIRECT = "direct"


class Operation(IntFlag):
    """OPERation status: bits 0 to 7 are the standard's (SCPI-99 volume 1, 9.3), 8 to 12 ours."""

    SETTLING = 1 << 1  # a direct run is on its way to a set-point
    SWEEPING = 1 << 3  # a plan's ramp or retreat
    MEASURING = 1 << 4  # a plan's hold
    WAITING_FOR_ARM = 1 << 6  # an arm request waits for the press at the bench
    ENERGISED = 1 << 8
    LOWERING = 1 << 9
    PAUSING = 1 << 10  # will re-energise by itself
    WARNING = 1 << 11  # pressed: proving, or the warning before the output is on


class Questionable(IntFlag):
    """QUEStionable status: bits 0 to 8 are the standard's (SCPI-99 volume 1, 9.4), 9 to 12 ours."""

    VOLTAGE = 1 << 0  # the voltage reading is missing, old, at a limit or reversed
    CURRENT = 1 << 1
    CALIBRATION = 1 << 8  # none, or expired
    TRIPPED = 1 << 9  # latched causes stand
    LINK = 1 << 10  # not greeted: observing only, or nothing known
    RECORD = 1 << 11  # the recorder failed
    VOLTAGE_STATE = 1 << 12  # unknown, lost or not measured here


_PHASES = {Phase.HOLD: Operation.MEASURING, Phase.RAMP: Operation.SWEEPING, Phase.RETREAT: Operation.SWEEPING}
_PERMISSIONS = {Permission.REQUESTED: Operation.WAITING_FOR_ARM, Permission.PROVING: Operation.WARNING,
                Permission.WARNING: Operation.WARNING, Permission.LOWERING: Operation.LOWERING,
                Permission.PAUSING: Operation.PAUSING}
ENERGISED = frozenset({Permission.RUNNING, Permission.PAUSING, Permission.LOWERING})
_DOUBTED = frozenset({VoltageState.UNKNOWN, VoltageState.LOST, VoltageState.NOT_MEASURED})
_CHANNELS = ("voltage", "current")  # a flag of a reading begins with the channel that it doubts, or doubts both

# latched causes that are a protection of the voltage, and of the current; the others are of the whole output
VOLTAGE_TRIPS = frozenset((*cause_words(Cause.OVERVOLTAGE | Cause.ABOVE_ENVELOPE),
                           f"host: {rule_word(HostRule.OVERVOLTAGE)}"))
CURRENT_TRIPS = frozenset((*cause_words(Cause.OVERCURRENT | Cause.OVERCURRENT_LEVEL),
                           f"host: {rule_word(HostRule.OVERCURRENT)}",
                           f"host: {rule_word(HostRule.OVERCURRENT_LEVEL)}"))


def direct_run(shot: Snapshot) -> bool:
    """Whether the run that stands is a direct one that has not ended."""
    return shot.run is not None and shot.run.kind == DIRECT and not shot.run.ended


def operation_of(shot: Snapshot) -> int:
    """The OPERation condition."""
    bits = _PERMISSIONS.get(shot.permission, Operation(0))
    if shot.permission in ENERGISED:
        bits |= Operation.ENERGISED
    if shot.permission is Permission.RUNNING:
        if direct_run(shot):
            bits |= Operation.SETTLING if shot.phase is Phase.RAMP else Operation(0)
        else:
            bits |= _PHASES.get(shot.phase, Operation(0))
    return int(bits)


def questionable_of(shot: Snapshot, valid_until: date | None) -> int:
    """The QUEStionable condition; ``valid_until`` is the last day of the calibration, None: there is none."""
    reading = shot.reading
    old = reading is None or reading.age_s > OLD_BLOCKS * shot.block_s
    flags = reading.flags if reading is not None else ()
    bits = Questionable(0)
    for bit, value, word in ((Questionable.VOLTAGE, reading and reading.volts, _CHANNELS[0]),
                             (Questionable.CURRENT, reading and reading.amps, _CHANNELS[1])):
        if old or value is None or any(flag.startswith(word) or not flag.startswith(_CHANNELS) for flag in flags):
            bits |= bit
    today = datetime.fromtimestamp(shot.utc_ns // 1_000_000_000, UTC).date()
    for bit, stands in ((Questionable.CALIBRATION, valid_until is None or valid_until < today),
                        (Questionable.TRIPPED, bool(shot.latched)),
                        (Questionable.LINK, shot.link is not LinkState.GREETED),
                        (Questionable.RECORD, not shot.record.ok),
                        (Questionable.VOLTAGE_STATE, shot.voltage in _DOUBTED)):
        bits |= bit if stands else Questionable(0)
    return int(bits)
