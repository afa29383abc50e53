"""How a CSV is written for its readers: decimal mark, separator, time zone; light, so that a page may use it too."""

from dataclasses import dataclass
from datetime import UTC, datetime, timedelta, tzinfo
from zoneinfo import ZoneInfo, ZoneInfoNotFoundError

from hvhost.words.errors import CommandRefused

SEPARATORS = (",", ";", "\t", "|")
DECIMALS = (".", ",")


@dataclass(frozen=True, slots=True, kw_only=True)
class CsvForm:
    """How a CSV is written; raises `CommandRefused` where it could not be read again."""

    decimal: str = "."
    separator: str = ","
    zone: str = "UTC"

    def __post_init__(self) -> None:
        if self.decimal not in DECIMALS:
            raise CommandRefused("'.' or ',' as decimal mark", repr(self.decimal)[:20], "--decimal")
        if self.separator not in SEPARATORS:
            raise CommandRefused("',', ';', '|' or a tab as separator", repr(self.separator)[:20], "--separator")
        if self.decimal == self.separator:
            raise CommandRefused("a separator that is not the decimal mark", repr(self.separator), "--separator",
                                 "a decimal comma goes with ';'")
        zone_of(self.zone)


def zone_of(name: str) -> tzinfo:
    """Return a time zone by its name; raises `CommandRefused`."""
    if name == "UTC":
        return UTC
    try:
        return ZoneInfo(name)
    except (ZoneInfoNotFoundError, ValueError, OSError):
        raise CommandRefused("a time zone such as 'Europe/Berlin' or 'UTC'", repr(name)[:60], "time zone",
                             "the machine's list of zones is /usr/share/zoneinfo (Debian: package tzdata)") from None


def offset_text(offset: timedelta) -> str:
    """An offset from UTC as ISO 8601 writes it, '+01:00'."""
    minutes = round(offset.total_seconds() / 60)
    return f"{'-' if minutes < 0 else '+'}{abs(minutes) // 60:02d}:{abs(minutes) % 60:02d}"


def time_text(utc_ns: int, zone: tzinfo) -> str:
    """A time in a zone as ISO 8601, to the second, with its offset."""
    moment = datetime.fromtimestamp(utc_ns // 1_000_000_000, zone)
    return moment.strftime("%Y-%m-%dT%H:%M:%S") + offset_text(moment.utcoffset() or timedelta(0))
