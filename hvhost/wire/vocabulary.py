"""The protocol's closed vocabularies: states, inputs, causes, events, error codes.

Numbers and words here are what passes on the wire; PROTOCOL.md prints these tables and a test compares them.
"""

from enum import IntEnum, IntFlag, StrEnum

PROTOCOL_VERSION = 1


class McuState(IntEnum):
    """The MCU is in one of these; *latched* is a flag beside it."""

    OFF = 0
    REQUESTED = 1
    PROVING = 2
    WARNING = 3
    ENERGISED = 4
    PAUSING = 5
    LOWERING = 6


class Inputs(IntFlag):
    """What the MCU reads, in every block: contacts, read-backs, and the lease's status."""

    INTERLOCK = 1 << 0  # loop closed
    EMERGENCY = 1 << 1  # emergency contact closed (not operated)
    GROUND_OPEN = 1 << 2  # grounding device in its open position, stick on its hook
    DANGER = 1 << 3  # red danger signal lit, fed from the supply's power contact
    AUXILIARY = 1 << 4  # auxiliary supplies good
    ARM_INPUT = 1 << 5  # pressed now
    INHIBIT_BACK = 1 << 6  # read-back: inhibit asserted
    RELAY_BACK = 1 << 7  # read-back: power relay closed
    POLARITY = 1 << 8  # polarity contact agrees with the settings
    LEASE = 1 << 9  # lease running
    PROVEN = 1 << 10  # at least one means of the cut path was proven for this arm


class Fitted(IntFlag):
    """Which outputs, read-backs and inputs exist, and what stays powered after the cut (a setting)."""

    INHIBIT = 1 << 0
    CLEAR = 1 << 1
    RELAY = 1 << 2
    INHIBIT_BACK = 1 << 3
    RELAY_BACK = 1 << 4
    DANGER = 1 << 5
    EMERGENCY = 1 << 6
    GROUND_SWITCH = 1 << 7
    GROUND_STICK = 1 << 8
    ARM_INPUT = 1 << 9
    AUXILIARY = 1 << 10
    POLARITY = 1 << 11
    MONITOR_POWERED = 1 << 12  # the voltage monitor stays powered after the cut
    MONITOR_AT_SPECIMEN = 1 << 13
    DANGER_FROM_RELAY = 1 << 14  # the relay feeds the danger signal: dark while the relay is open


class Cause(IntFlag):
    """What latches; a reset names the whole set."""

    OVERCURRENT = 1 << 0
    OVERCURRENT_LEVEL = 1 << 1
    BREAKDOWN = 1 << 2
    OVERVOLTAGE = 1 << 3
    ABOVE_ENVELOPE = 1 << 4
    INTERLOCK = 1 << 5
    EMERGENCY = 1 << 6
    GROUNDING = 1 << 7
    AUXILIARY = 1 << 8
    READBACK_MISSING = 1 << 9
    LONGEST_ON = 1 << 10
    DANGER_DARK = 1 << 11
    POWER_STILL_ON = 1 << 12
    INTERLOCK_DID_NOT_CUT = 1 << 13
    CUT_PATH = 1 << 14
    HOST_SILENT = 1 << 15
    HOST_RULE = 1 << 16
    ARC_COUNT = 1 << 17
    ARC_IN_REST = 1 << 18
    PAUSE_EXPIRED = 1 << 19
    RESTARTED = 1 << 20
    RESTARTED_ENERGISED = 1 << 21


CAUSE_WORDS: dict[Cause, str] = {
    Cause.OVERCURRENT: "overcurrent",
    Cause.OVERCURRENT_LEVEL: "overcurrent level",
    Cause.BREAKDOWN: "breakdown",
    Cause.OVERVOLTAGE: "overvoltage",
    Cause.ABOVE_ENVELOPE: "above envelope",
    Cause.INTERLOCK: "interlock",
    Cause.EMERGENCY: "emergency contact",
    Cause.GROUNDING: "grounding device",
    Cause.AUXILIARY: "auxiliary supplies",
    Cause.READBACK_MISSING: "readback missing",
    Cause.LONGEST_ON: "longest time on",
    Cause.DANGER_DARK: "danger signal dark",
    Cause.POWER_STILL_ON: "power still on",
    Cause.INTERLOCK_DID_NOT_CUT: "interlock did not cut",
    Cause.CUT_PATH: "cut path",
    Cause.HOST_SILENT: "host silent",
    Cause.HOST_RULE: "host",
    Cause.ARC_COUNT: "arc count",
    Cause.ARC_IN_REST: "arc in the rest",
    Cause.PAUSE_EXPIRED: "pause expired",
    Cause.RESTARTED: "restarted",
    Cause.RESTARTED_ENERGISED: "restarted while energised, causes may be missing",
}


class HostRule(IntEnum):
    """The rule number that a host's cut carries; 0 is an operator's cut and latches nothing."""

    OPERATOR = 0
    OVERCURRENT = 1
    OVERCURRENT_LEVEL = 2
    OVERVOLTAGE = 3
    BREAKDOWN = 4
    DEVIATION = 5
    NOT_FOLLOWING = 6
    SATURATED = 7
    STUCK = 8
    REVERSED = 9
    MISSING = 10
    GAP = 11
    STALE = 12
    INTERLOCK = 13
    AUXILIARY = 14
    ARC_ENERGY = 15
    UNCONFIRMED = 16  # a lower or arc went unanswered
    RECORDER = 17
    ASSERTION = 18  # a run-time assertion in a safety function failed
    GROUNDING = 19
    DISAGREEMENT = 20  # the MCU reports what it cannot be doing


HOST_RULE_WORDS: dict[HostRule, str] = {rule: rule.name.lower().replace("_", " ") for rule in HostRule}


class EventKind(StrEnum):
    """Numbered MCU events: ``ev number tick kind a b``; the meaning of a and b stands in PROTOCOL.md section 8."""

    BOOT = "boot"  # a reset cause, b boot counter
    SESSION = "session"  # a session number, b 0
    REFUSED = "refused"  # a arm number, b error number: an arm was refused
    REQUESTED = "requested"  # a arm number, b 0
    PRESSED = "pressed"  # a arm number, b ticks held
    PROVEN = "proven"  # a mask of Fitted means proven, b mask of means fitted
    WARNING = "warning"  # a arm number, b warn_before in ticks
    ENERGISED = "energised"  # a arm number, b 0
    SEGMENT = "segment"  # a segment serial, b segments still queued
    HOLD = "hold"  # a last segment serial, b 0: the queue ran dry, the words stand
    LOWERING = "lowering"  # a LowerWhy, b stop number
    PAUSING = "pausing"  # a arc number, b sample index (low 31 bits)
    RESTRIKE = "restrike"  # a arc number, b re-strikes so far
    MERGED = "merged"  # a arc number, b sample index: a host's arc that was this one
    RESUMED = "resumed"  # a arc number, b 0
    CUT = "cut"  # a CutWhy, b stop number or 0
    CAUSE = "cause"  # a the Cause bit that latched, b sample index or host rule
    VOID = "void"  # a arm number, b CutWhy/LowerWhy-like reason (VoidWhy)
    LAPSE = "lapse"  # a state at the lapse, b 0
    SLOW_TO_FALL = "slow"  # a code, b sample index
    INTERFERED = "interfered"  # a Cause bit of the rule, b count so far: fewer than n consecutive samples
    OFF_SEEN = "offseen"  # a Cause bit seen with the output off (event, no trip), b sample index
    INPUTS = "inputs"  # a inputs now, b which changed
    RESET = "reset"  # a causes cleared, b 1 where grounded by hand was declared
    SAVED = "saved"  # a CRC of the new settings (as signed 32 bits), b 0
    SNAPSHOT = "snapshot"  # a snapshot id, b samples in it: complete and waiting
    LOST = "lost"  # a snapshot id, b 1 overwritten, 2 not taken, 3 lost by a reset


class CutWhy(IntEnum):
    """Why a cut happened."""

    HOST = 1  # a cut request
    RULE = 2  # a fast rule
    LOWERED = 3  # end of a lower at zero
    LOWER_MAX = 4  # a lower ran out of time
    LAPSE = 5  # lease lapsed while pausing
    SESSION = 6  # a new session while pausing
    BOOT = 7
    ARC = 8  # an arc where no pause applies
    EXPIRED = 9  # request, pause or proving ran out of time
    PREPARING = 10  # a lower, lapse or new session before energised (requested, proving, warning)


class LowerWhy(IntEnum):
    """Why a lowering began."""

    HOST = 1
    LAPSE = 2
    SESSION = 3


class VoidWhy(IntEnum):
    """Why an arm was voided."""

    CUT = 1
    LOWER = 2
    SESSION = 3
    LAPSE = 4
    NEW_ARM = 5
    EXPIRED = 6
    BOOT = 7


class Err(StrEnum):
    """Error answers: ``err n verb code``."""

    UNKNOWN = "unknown"  # no such request
    MALFORMED = "malformed"  # a field is missing, extra or not of its kind
    RANGE = "range"  # a field is outside its range
    VERSION = "version"  # protocol version not spoken here
    SESSION = "session"  # no session, or another one
    NUMBER = "number"  # request number neither the last one nor the next
    STATE = "state"  # not in this state
    LATCHED = "latched"
    LEASE = "lease"  # no valid lease
    BLANK = "blank"  # settings blank or damaged
    SETTINGS = "settings"  # checksum is not that of the settings in force
    EVENT = "event"  # last event seen is not the last event
    ARM = "arm"  # arm number is not the next one
    WORDS = "words"  # set-point words not zero
    QUEUE = "queue"  # queue not empty (arm) or full (segment)
    INTERLOCK = "interlock"  # open, or not stable long enough
    EMERGENCY = "emergency"
    GROUNDING = "grounding"
    DANGER = "danger"  # danger signal lit where it must be dark
    AUXILIARY = "auxiliary"
    POLARITY = "polarity"
    ZERO = "zero"  # readback outside the zero band
    INPUT = "input"  # arm input stuck
    LOOSER = "looser"  # would loosen a limit
    CEILING = "ceiling"  # target above a ceiling
    SLEW = "slew"  # steeper than the slew ceiling
    ARC = "arc"  # arc number missing or not current
    REST = "rest"  # rest not over
    REACTION = "reaction"  # arc reaction outside the settings' bounds or without a proven inhibit
    CAUSES = "causes"  # the named set is not the latched set
    POSITION = "position"  # a read-back is not in its cut position
    GROUNDED = "grounded"  # 'grounded by hand' must be declared
    BLEED = "bleed"  # the bleed times are not over
    CLOSED = "closed"  # settings are written with the interlock open only
    CHECKSUM = "checksum"  # staged settings do not have the announced checksum
    NOTHING = "nothing"  # no snapshot, or not this one
    GONE = "gone"  # events older than the last 16


class ResetCause(IntEnum):
    """What reset the MCU."""

    POWER = 1
    EXTERNAL = 2
    BROWN_OUT = 3
    WATCHDOG = 4


ERR_NUMBERS: dict[Err, int] = {code: number for number, code in enumerate(Err, start=1)}


def cause_words(causes: int) -> tuple[str, ...]:
    """Return the words of a set of causes, lowest bit first."""
    return tuple(word for cause, word in CAUSE_WORDS.items() if causes & cause)
