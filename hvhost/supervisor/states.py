"""The states of a bench, and the two tables that move them.

Theory.  Four things are true of a bench at once, each with its own life, so the state is their product:

*Link* - what we know of the MCU.  ``none`` before the first greeting; ``greeted`` when version and settings agree, the
only state from which anything may be armed; ``observe only`` when they do not (lower, cut, evidence and commissioning
still work); ``lost`` when blocks stopped coming.  Lost is not none: a lost MCU may still be energised, which is why a
lost link makes the voltage *unknown* and never zero.

*Permission* - what the MCU may be doing on our word.  It moves only on what the MCU reports (an event, or a block at
least as new as the last event) and on our own accepted arm; the host never believes itself further than the MCU says.
The running phases (ramp, hold, retreat, rest) are one permission with four names, because screens, limits and clocks
differ between them.  ``pausing`` is apart: nothing is applied, yet the bench will re-energise by itself.

*Latched* - the set of causes.  Beside the permission, not in it: a latch stands while the bench is idle, through
reconnection and restart, until a reset names the whole set.

*Voltage* - what may be said about the specimen (S6).  Only a measurement that may be believed moves it to
``below threshold``; ``grounded`` is the position of a contact and no proof; everything doubtful is ``unknown``.

Two tables follow.  ``PERMISSION`` moves on events; a missing entry means that the MCU reported a move which nobody
permitted, and the answer to that is a cut.  ``HOLDS`` says what must be true however one arrived and is run to a fixed
point after each step.  The diagram in DEVELOPERS.md is printed from them.
"""

from collections.abc import Callable
from dataclasses import dataclass
from enum import StrEnum

from hvhost.wire.vocabulary import McuState


class LinkState(StrEnum):
    """What is known of the MCU."""

    NONE = "none"
    GREETED = "greeted"
    OBSERVE = "observe only"
    LOST = "lost"


class Permission(StrEnum):
    """What the MCU may be doing on our word."""

    IDLE = "idle"
    REQUESTED = "requested"
    WARNING = "warning"
    RAMP = "ramp"
    HOLD = "hold"
    RETREAT = "retreat"
    REST = "rest"
    PAUSING = "pausing"
    LOWERING = "lowering"


RUNNING = frozenset({Permission.RAMP, Permission.HOLD, Permission.RETREAT, Permission.REST})
LIVE = RUNNING | {Permission.PAUSING, Permission.LOWERING}


class Voltage(StrEnum):
    """What may be said about the voltage at the specimen (S6)."""

    PRESENT = "present"
    FALLING = "falling"
    BELOW = "below threshold"
    GROUNDED = "grounded"
    UNKNOWN = "unknown"


class Move(StrEnum):
    """The events that move the permission."""

    ARMED = "arm accepted"
    MCU_OFF = "MCU off"
    MCU_REQUESTED = "MCU requested"
    MCU_WARNING = "MCU warning"
    MCU_ENERGISED = "MCU energised"
    MCU_PAUSING = "MCU pausing"
    MCU_LOWERING = "MCU lowering"
    RAMP_BEGUN = "ramp begun"
    HOLD_BEGUN = "hold begun"
    RETREAT_BEGUN = "retreat begun"
    REST_BEGUN = "rest begun"


MOVE_OF: dict[McuState, Move] = {
    McuState.OFF: Move.MCU_OFF,
    McuState.REQUESTED: Move.MCU_REQUESTED,
    McuState.PROVING: Move.MCU_REQUESTED,
    McuState.WARNING: Move.MCU_WARNING,
    McuState.ENERGISED: Move.MCU_ENERGISED,
    McuState.PAUSING: Move.MCU_PAUSING,
    McuState.LOWERING: Move.MCU_LOWERING,
}

_RUNNING_MOVES: dict[Move, Permission] = {
    Move.RAMP_BEGUN: Permission.RAMP,
    Move.HOLD_BEGUN: Permission.HOLD,
    Move.RETREAT_BEGUN: Permission.RETREAT,
    Move.REST_BEGUN: Permission.REST,
    Move.MCU_PAUSING: Permission.PAUSING,
    Move.MCU_LOWERING: Permission.LOWERING,
    Move.MCU_OFF: Permission.IDLE,
}

PERMISSION: dict[Permission, dict[Move, Permission]] = {
    Permission.IDLE: {
        Move.ARMED: Permission.REQUESTED,
        Move.MCU_OFF: Permission.IDLE,
        # a new session makes a still energised MCU lower by itself: nobody armed, nothing to forbid
        Move.MCU_LOWERING: Permission.LOWERING,
    },
    Permission.REQUESTED: {
        Move.MCU_REQUESTED: Permission.REQUESTED,
        Move.MCU_WARNING: Permission.WARNING,
        Move.MCU_OFF: Permission.IDLE,
    },
    Permission.WARNING: {
        Move.MCU_WARNING: Permission.WARNING,
        Move.MCU_ENERGISED: Permission.RAMP,
        Move.MCU_OFF: Permission.IDLE,
    },
    Permission.RAMP: {**_RUNNING_MOVES, Move.MCU_ENERGISED: Permission.RAMP},
    Permission.HOLD: {**_RUNNING_MOVES, Move.MCU_ENERGISED: Permission.HOLD},
    Permission.RETREAT: {**_RUNNING_MOVES, Move.MCU_ENERGISED: Permission.RETREAT},
    Permission.REST: {**_RUNNING_MOVES, Move.MCU_ENERGISED: Permission.REST},
    Permission.PAUSING: {
        Move.MCU_PAUSING: Permission.PAUSING,
        Move.MCU_ENERGISED: Permission.RETREAT,
        Move.MCU_OFF: Permission.IDLE,
    },
    Permission.LOWERING: {
        Move.MCU_LOWERING: Permission.LOWERING,
        Move.MCU_OFF: Permission.IDLE,
    },
}


@dataclass(frozen=True, slots=True, kw_only=True)
class State:
    """The product; ``latched`` is the set of causes as a mask, 0 when nothing is latched."""

    link: LinkState = LinkState.NONE
    permission: Permission = Permission.IDLE
    latched: int = 0
    voltage: Voltage = Voltage.UNKNOWN


@dataclass(frozen=True, slots=True, kw_only=True)
class Facts:
    """What the second table looks at besides the state itself."""

    run_open: bool = False  # a run is armed or live
    direct: bool = False
    seat_empty_s: float = 0.0
    recorder_ready: bool = True
    block_age_s: float = 0.0  # since the last block, or since the host woke from a stall of its own
    lease_s: float = 0.5
    stopping: bool = False  # a stop was decided and is not confirmed yet


class Consequence(StrEnum):
    """What a row of `HOLDS` asks for."""

    CUT_DISAGREEMENT = "cut: the MCU does what nobody permitted"
    CUT_STALE = "cut: no block within the lease"
    LOWER_RECORDER = "lower: the recorder failed"
    LOWER_SEAT = "lower: nobody has control of a direct run"
    END_INTERRUPTED = "end the run as interrupted"
    VOLTAGE_UNKNOWN = "voltage unknown"
    PERMISSION_IDLE = "permission idle"


SEAT_EMPTY_MAX_S = 10.0  # a direct run without a holder lowers after this

Condition = Callable[[State, Facts], bool]

HOLDS: tuple[tuple[str, Condition, tuple[Consequence, ...]], ...] = (
    ("link lost while anything is permitted",
     lambda s, f: s.link is LinkState.LOST and s.permission is not Permission.IDLE,
     (Consequence.END_INTERRUPTED, Consequence.PERMISSION_IDLE)),
    ("voltage claimed without a link or a block within the lease",
     lambda s, f: s.voltage is not Voltage.UNKNOWN and (s.link in (LinkState.NONE, LinkState.LOST)
                                                        or f.block_age_s > f.lease_s),
     (Consequence.VOLTAGE_UNKNOWN,)),
    ("anything permitted but the way down, without a run",
     lambda s, f: s.permission not in (Permission.IDLE, Permission.LOWERING) and not f.run_open and not f.stopping,
     (Consequence.CUT_DISAGREEMENT,)),
    ("no block within the lease while anything is permitted",
     lambda s, f: s.permission is not Permission.IDLE and f.block_age_s > f.lease_s and not f.stopping,
     (Consequence.CUT_STALE,)),
    ("recorder failed while anything is permitted",
     lambda s, f: s.permission not in (Permission.IDLE, Permission.LOWERING) and not f.recorder_ready
     and not f.stopping,
     (Consequence.LOWER_RECORDER,)),
    ("direct run without anyone in control",
     lambda s, f: s.permission in RUNNING and f.direct and f.seat_empty_s >= SEAT_EMPTY_MAX_S and not f.stopping,
     (Consequence.LOWER_SEAT,)),
)


STANDING = frozenset((int(mcu), permission) for mcu, move in MOVE_OF.items() for permission, moves in PERMISSION.items()
                     if moves.get(move) is permission)  # what a block may report without moving anything
UNMOVED = frozenset((permission, move) for permission, moves in PERMISSION.items()
                    for move, after in moves.items() if after is permission)


def moved(permission: Permission, move: Move) -> Permission | None:
    """Return where ``move`` leads, or None when nobody permitted it."""
    return PERMISSION[permission].get(move)


def owed(state: State, facts: Facts) -> tuple[Consequence, ...]:
    """Return what the second table asks for in this state."""
    return tuple(c for _, condition, consequences in HOLDS if condition(state, facts) for c in consequences)


def diagram() -> str:
    """Return both tables as text, one line a transition; DEVELOPERS.md holds exactly this."""
    lines = ["permission, moved by events (no line: nobody permitted it, cut)"]
    for permission, moves in PERMISSION.items():
        targets: dict[Permission, list[str]] = {}
        for move, target in moves.items():
            targets.setdefault(target, []).append(move.value)
        lines += [f"  {permission.value:<10} --{', '.join(names)}--> {target.value}"
                  for target, names in targets.items()]
    lines.append("")
    lines.append("what must hold however one arrived")
    lines += [f"  {name}: {'; '.join(c.value for c in consequences)}" for name, _, consequences in HOLDS]
    return "\n".join(lines) + "\n"


if __name__ == "__main__":
    print(diagram(), end="")
