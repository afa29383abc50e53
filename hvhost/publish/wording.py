"""The words and numbers of the screens: how a value, a time, a state is written, once for every view.

The sign of the bench's polarity is put on here and nowhere before.  A number is shown with the decimals that its
full scale asks for, so that its point stands still while it changes.
"""

import math
from dataclasses import dataclass, replace
from datetime import datetime, tzinfo
from enum import StrEnum

from hvhost.bench import cautions
from hvhost.publish.snapshot import (
    InputJudgement,
    LinkState,
    Permission,
    Phase,
    Snapshot,
    StopState,
    VoltageState,
)

MOST_DECIMALS = 9  # beyond this an uncertainty is a mistake, not a measurement
DIGITS = 4  # of the full scale: a bench chain is good for a tenth of a percent
ENERGISED = frozenset((Permission.RUNNING, Permission.PAUSING, Permission.LOWERING))
_UNITS = ((1e3, "k"), (1.0, ""), (1e-3, "m"), (1e-6, "µ"), (1e-9, "n"))


OVERDUE = 2.5  # a snapshot that is late by this many periods no longer shows the present


class Plotted(StrEnum):
    """What the plot shows; 'by state' leaves the choice to the screen."""

    BY_STATE = "by state"
    MINUTE = "last minute"
    RUN = "whole run"
    EVIDENCE = "last arc or trip"


@dataclass(frozen=True, slots=True, kw_only=True)
class View:
    """How a client sees a snapshot: seconds since it came, the period it asked for, what it can do itself.

    ``can_stop`` is False for a view without keys; ``note`` is what its last key led to; ``zone`` None is the
    machine's time zone; ``plotted`` and ``bell`` are what its keys chose; ``ascii_only`` is for a terminal that
    cannot draw anything else.
    """

    since_s: float = 0.0
    period_s: float = 0.1
    connected: bool = True
    can_stop: bool = True
    note: str = ""
    zone: tzinfo | None = None
    plotted: Plotted = Plotted.BY_STATE
    bell: bool = True
    ascii_only: bool = False


class Scale:
    """Unit and decimals of one quantity, from its full scale: 25 kV -> 'kV' with two decimals."""

    def __init__(self, full: float, unit: str, polarity: int) -> None:
        usable = full if math.isfinite(full) and full > 0.0 else 1.0
        self.factor, prefix = next(((f, p) for f, p in _UNITS if usable >= f * 0.9999), _UNITS[-1])
        self.unit = prefix + unit
        self.decimals = max(0, DIGITS - 1 - math.floor(math.log10(usable / self.factor) + 1e-9))
        self.polarity = polarity

    def number(self, value: float, extra: int = 0) -> str:
        """Return the signed number without its unit; 'extra' decimals more."""
        text = f"{value * self.polarity / self.factor:.{self.decimals + extra}f}"
        return text.lstrip("-") if not text.strip("-0.") else text

    def text(self, value: float | None, extra: int = 0) -> str:
        """Return the signed number with its unit, '--' for nothing."""
        return "--" if value is None or not math.isfinite(value) else f"{self.number(value, extra)} {self.unit}"

    def size(self, value: float | None) -> str:
        """Return the magnitude with its unit: for margins and uncertainties, which have no polarity."""
        return "--" if value is None or not math.isfinite(value) else \
            f"{abs(value) / self.factor:.{self.decimals}f} {self.unit}"


def volts_scale(snapshot: Snapshot) -> Scale:
    """Return how this bench's volts are written."""
    return Scale(snapshot.volts_full, "V", snapshot.polarity)


def amps_scale(snapshot: Snapshot) -> Scale:
    """Return how this bench's amps are written."""
    return Scale(snapshot.amps_full, "A", snapshot.polarity)


def fine(value: float | None, unit: str, polarity: int = 1, digits: int = 4) -> str:
    """Return so many significant digits with the prefix that suits the value itself: 12.34 µA."""
    if value is None or not math.isfinite(value):
        return "--"
    size = abs(value)
    if size == 0.0:
        return f"0 {unit}"
    factor, prefix = next(((f, p) for f, p in _UNITS if size >= f * (1.0 - 0.5 * 10.0**-digits)), _UNITS[-1])
    decimals = max(0, digits - 1 - max(0, math.floor(math.log10(max(size / factor, 1e-3)) + 1e-9)))
    text = f"{value * polarity / factor:.{decimals}f}"
    return f"{text.lstrip('-') if not text.strip('-0.') else text} {prefix}{unit}"


def known(value: float | None) -> float | None:
    """Return the value, None where it is no finite number."""
    return value if value is not None and math.isfinite(value) else None


def measured(value: float, u: float | None, unit: str, polarity: int = 1) -> str:
    """Return the value with its expanded uncertainty (k = 2), both to the second digit of it: (17.996 ± 0.052) kV."""
    expanded = known(2.0 * u) if u is not None else None
    if expanded is None or expanded <= 0.0 or not math.isfinite(value):
        return f"{fine(value, unit, polarity)}, U not known"
    factor, prefix = next(((f, p) for f, p in _UNITS if max(abs(value), expanded) >= f), _UNITS[-1])
    decimals = min(MOST_DECIMALS, max(0, 1 - math.floor(math.log10(max(expanded / factor, 1e-15)))))
    shown = f"{value * polarity / factor:.{decimals}f}"
    shown = shown.lstrip("-") if not shown.strip("-0.") else shown
    return f"({shown} ± {expanded / factor:.{decimals}f}) {prefix}{unit}"


def span(seconds: float | None) -> str:
    """Return a span as m:ss or h:mm:ss, '--' for none; whole seconds, rounded down."""
    if seconds is None or not math.isfinite(seconds):
        return "--"
    whole = max(0, int(seconds))
    hours, rest = divmod(whole, 3600)
    return f"{hours}:{rest // 60:02d}:{rest % 60:02d}" if hours else f"{rest // 60}:{rest % 60:02d}"


def left(seconds: float | None) -> str:
    """Return a countdown in whole seconds, rounded up: it never says 0 while something is still to come."""
    return "--" if seconds is None or not math.isfinite(seconds) else f"{max(0, math.ceil(seconds - 1e-6))} s"


def local_time(utc_ns: int, zone: tzinfo | None, pattern: str = "%Y-%m-%d %H:%M:%S") -> str:
    """Return a local time; ``zone`` None is the machine's."""
    moment = datetime.fromtimestamp(utc_ns / 1e9, tz=zone)
    return (moment if zone is not None else moment.astimezone()).strftime(pattern)


def clock_text(utc_ns: int, zone: tzinfo | None) -> str:
    """Return local date and time with offset and zone."""
    moment = datetime.fromtimestamp(utc_ns / 1e9, tz=zone).astimezone(zone)
    offset = moment.strftime("%z")
    name = moment.strftime("%Z")
    return moment.strftime("%Y-%m-%d %H:%M:%S ") + f"{offset[:3]}:{offset[3:5]} {name}"


def printable(text: str) -> str:
    """Return the text with everything that could move a cursor or hide made visible."""
    return text if text.isprintable() else "".join(c if c.isprintable() else "?" for c in text)


def state_words(snapshot: Snapshot, view: View) -> str:
    """Return the state in capitals, latch first: 'TRIPPED', 'RUNNING: HOLD', 'IDLE'; 'LAST: ...' where unknown."""
    if not view.connected or snapshot.link is LinkState.LOST:
        return f"LAST KNOWN: {state_words(replace(snapshot, link=LinkState.GREETED), View())}"
    permission = snapshot.permission
    words = str(permission).upper()
    if permission is Permission.RUNNING and snapshot.phase is not Phase.NONE:
        words = f"{words}: {str(snapshot.phase).upper()}"
    if snapshot.latched:
        words = "TRIPPED" if permission is Permission.IDLE else f"TRIPPED, {words}"
    return words


def link_words(snapshot: Snapshot) -> str:
    """Return the link in words; anything but a greeted one in capitals."""
    link = str(snapshot.link)
    return f"link {link}" if snapshot.link is LinkState.GREETED else f"LINK {link.upper()}"


def as_last_known(snapshot: Snapshot, view: View) -> Snapshot:
    """Return the snapshot as it may be shown: where the output is unknown nothing else is vouched for either."""
    if not output_unknown(snapshot, view):
        return snapshot
    inputs = tuple(replace(one, state=f"last {one.state}" if one.state != "unknown" else one.state,
                           judgement=InputJudgement.UNKNOWN) for one in snapshot.inputs)
    acts = snapshot.next_acts if view.connected else ("use the emergency switching off", "see to the daemon")
    return replace(snapshot, voltage=VoltageState.UNKNOWN, voltage_text="", power_words="", inputs=inputs,
                   set_volts=None, set_amps=None, course=(), next_acts=acts)


def voltage_words(snapshot: Snapshot) -> str:
    """Return what is known of the voltage."""
    return f"VOLTAGE {str(snapshot.voltage).upper()}"


def voltage_reason(snapshot: Snapshot) -> str:
    """Return the daemon's explanation of the voltage's state without the state itself, '' where there is no more."""
    text = printable(snapshot.voltage_text)
    return text[len(snapshot.voltage):].lstrip(" :,.") if text.lower().startswith(str(snapshot.voltage)) else text


def alerts(snapshot: Snapshot, view: View) -> list[str]:
    """Return what must be seen first, most urgent first."""
    found, age_s = [], view.since_s
    if not view.connected:
        found.append(f"DAEMON GONE: {cautions.OUTPUT_UNKNOWN.upper()}")
    elif output_unknown(snapshot, view):
        found.append(cautions.OUTPUT_UNKNOWN.upper())
    if snapshot.stop is StopState.CUT_NOT_CONFIRMED:
        found.append(str(snapshot.stop).upper())
    if snapshot.pause_s is not None:
        found.append(cautions.WILL_RE_ENERGISE.format(seconds=max(0, math.ceil(snapshot.pause_s - age_s))))
    if snapshot.warning_s is not None:
        found.append(f"WARNING: energises in {left(snapshot.warning_s - age_s)}")
    if snapshot.arm is not None:
        found.append(_request_words(snapshot, age_s))
    if snapshot.latched:
        found.append(f"TRIPPED: {', '.join(map(printable, snapshot.latched))}")
    if not snapshot.record.ok:
        found.append(f"RECORD FAILED: {printable(snapshot.record.text)}")
    if not snapshot.disk.ok:
        found.append(f"DISK NEARLY FULL: {bytes_text(snapshot.disk.free_b)} free, a run needs "
                     f"{bytes_text(snapshot.disk.floor_b)}")
    if snapshot.power_words == cautions.PROGRAMMED_TO_ZERO:
        found.append(cautions.PROGRAMMED_TO_ZERO.upper())
    if not snapshot.inhibits_without_mcu:
        found.append(cautions.NOT_INHIBITED_WITHOUT_MCU)
    return found


def seat_words(snapshot: Snapshot) -> str:
    """Return who has control, and a stop by someone else that they have not acknowledged."""
    words = f"control {printable(snapshot.seat) or 'free'}"
    return f"{words}, stopped by {printable(snapshot.stopped_by)}, not acknowledged" if snapshot.stopped_by else words


def polarity_words(snapshot: Snapshot) -> str:
    """Return the bench's polarity with its sign."""
    return "negative (-)" if snapshot.polarity < 0 else "positive (+)"


def minutes(seconds: float) -> str:
    """Return a short span for people: '40 ms', '7 s', '1:17', '2:05:00'."""
    size = abs(seconds)
    if size < 1.0:
        return f"{size * 1e3:.3g} ms"
    return f"{size:.0f} s" if size < 59.5 else span(size + 0.5)


def bytes_text(size: float | None) -> str:
    """Return a size for people, in units of ten: 84 GB, 512 MB."""
    if size is None or not math.isfinite(size):
        return "--"
    factor, unit = next(((f, u) for f, u in ((1e12, "TB"), (1e9, "GB"), (1e6, "MB")) if size >= f), (1e3, "kB"))
    return f"{size / factor:.3g} {unit}"


def _request_words(snapshot: Snapshot, age_s: float) -> str:
    arm = snapshot.arm
    assert arm is not None
    within = f"within {left(arm.expires_s - age_s)}"
    if not arm.press_needed:
        typed = f": type '{printable(arm.typed_name)}' to arm" if arm.typed_name else ""
        return f"REQUESTED {within}{typed} ({cautions.NO_ARM_INPUT})"
    return f"REQUESTED: PRESS THE ARM INPUT AT THE BENCH {within}"


def output_unknown(snapshot: Snapshot, view: View) -> bool:
    """Whether the readback is older than the lease, or there is none: then it is not shown (S13).

    The time since the snapshot came counts too, where it is more than the screen's own period explains.
    """
    reading = snapshot.reading
    if reading is None or known(reading.volts) is None or snapshot.link in (LinkState.NONE, LinkState.LOST):
        return True
    longest_s = max(snapshot.lease_s, OVERDUE * view.period_s)
    return not view.connected or reading.age_s > snapshot.lease_s or reading.age_s + view.since_s > longest_s


def reading_old(snapshot: Snapshot, view: View) -> bool:
    """Whether the readback is older than two blocks, or its snapshot overdue: then it is shown as old (S13)."""
    two_blocks_s = 2.0 * snapshot.block_s
    return snapshot.reading is not None and (
        snapshot.reading.age_s > two_blocks_s or view.since_s > max(two_blocks_s, OVERDUE * view.period_s))


def caution(snapshot: Snapshot) -> str:
    """Return what must be read before anyone goes in; '' only while something is energised or about to be."""
    if snapshot.permission not in (Permission.IDLE, Permission.LOWERING):
        return ""
    parts = []
    if voltage_reason(snapshot):
        parts.append(f"Voltage {snapshot.voltage}: {voltage_reason(snapshot).rstrip('.')}.")
    if snapshot.bleeds_passed is not None:
        parts.append(f"{snapshot.bleeds_passed:.1f} bleed times since the cut.")
    if snapshot.discharge_text:
        parts.append(printable(snapshot.discharge_text))
    if snapshot.voltage is VoltageState.GROUNDED and "proof" not in snapshot.voltage_text:
        parts.append(cautions.GROUNDED_IS_A_CONTACT)
    if cautions.BEFORE_TOUCHING not in snapshot.discharge_text:
        parts.append(cautions.BEFORE_TOUCHING)
    return " ".join(parts)
