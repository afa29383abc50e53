"""What the MCU says of itself in the greeting: four pages of information and the settings, each value checked.

The host trusts no MCU: a value outside its range is a `WireFault` that names page and field, and the greeting fails.
See PROTOCOL.md section 4.
"""

from collections.abc import Mapping
from dataclasses import dataclass

from hvhost.wire.frames import Ok, type_of_pack
from hvhost.wire.settings import PAGE, PAGES, SETTINGS, Settings, checksum
from hvhost.wire.vocabulary import Fitted, ResetCause, cause_words
from hvhost.words.errors import WireFault

U32 = 0xFFFFFFFF


@dataclass(frozen=True, slots=True)
class Field:
    """One ``key=value`` of an information page: its range (decimal), or hexadecimal, or a word."""

    key: str
    page: int
    low: int
    high: int
    unit: str
    meaning: str
    kind: str = "decimal"  # "decimal", "hex" (eight digits) or "word"


FIELDS: tuple[Field, ...] = (
    Field("fw", 0, 1, 32, "characters", "firmware identity: letters, digits, '.', '-', '+'", "word"),
    Field("proto", 0, 1, 999, "", "protocol version"),
    Field("signs", 1, 2, 2, "characters", "coding of voltage and current monitor codes: s signed, u unsigned", "word"),
    Field("vbits", 1, 8, 16, "bit", "voltage monitor converter"),
    Field("ibits", 1, 8, 16, "bit", "current monitor converter"),
    Field("dvbits", 1, 8, 16, "bit", "voltage programming converter, unipolar"),
    Field("dibits", 1, 8, 16, "bit", "current programming converter, unipolar"),
    Field("tick", 2, 100, 10_000_000, "Hz", "tick rate"),
    Field("sample", 2, 1, 1_000_000, "ticks", "ticks from one pair to the next"),
    Field("skew", 2, -1_000_000_000, 1_000_000_000, "ns", "current is taken this long after voltage"),
    Field("block", 2, 1, 64, "pairs", "most pairs in a block"),
    Field("queue", 2, 1, 1_000, "segments", "depth of the segment queue"),
    Field("before", 2, 0, 65_535, "pairs", "snapshot: pairs up to and including its trigger"),
    Field("after", 2, 0, 65_535, "pairs", "snapshot: pairs behind its trigger"),
    Field("boot", 3, 0, U32, "", "boot counter"),
    Field("reset", 3, 1, 4, "", "what reset the MCU (ResetCause)"),
    Field("causes", 3, 0, U32, "mask", "latched causes (Cause); 0 where nothing is latched", "hex"),
    Field("rule", 3, 0, 999, "", "the rule of the host's cut that latched, else 0"),
    Field("tag", 3, 0, U32, "", "tag of the run to which the causes belong", "hex"),
    Field("mark", 3, 0, 1, "", "1 while the 'energised' mark stands"),
    Field("settings", 3, 0, U32, "", "checksum of the settings", "hex"),
    Field("blank", 3, 0, 1, "", "1 where the settings are blank or damaged"),
    Field("arm", 3, 0, U32, "", "arms accepted since the boot; the next one carries one more"),
    Field("event", 3, 0, U32, "", "number of the last event"),
    Field("now", 3, 0, U32, "tick", "the tick at the answer"),
    Field("snap", 3, 0, U32, "", "snapshot that waits to be fetched; 0 where none does"),
    Field("first", 3, 0, U32, "mask", "the cause that latched first; 0 where nothing is latched", "hex"),
    Field("at", 3, 0, U32, "tick", "the tick at which it latched"),
    Field("v", 3, -32_768, 65_535, "code", "voltage code at that tick"),
    Field("i", 3, -32_768, 65_535, "code", "current code at that tick"),
)
INFO_PAGES = 4
_TOKEN = frozenset("abcdefghijklmnopqrstuvwxyzABCDEFGHIJKLMNOPQRSTUVWXYZ0123456789.-+")


@dataclass(frozen=True, slots=True, kw_only=True)
class McuInfo:
    """The four information pages, checked; see `FIELDS` for units and ranges."""

    firmware: str
    protocol: int
    signs: str
    v_bits: int
    i_bits: int
    dv_bits: int
    di_bits: int
    tick_hz: int
    sample_ticks: int
    skew_ns: int
    block_pairs: int
    queue: int
    before_pairs: int
    after_pairs: int
    boot: int
    reset: ResetCause
    causes: int
    rule: int
    tag: int
    mark: bool
    settings_checksum: int
    blank: bool
    arm: int
    event: int
    tick: int
    snapshot: int
    first_cause: int = 0
    first_tick: int = 0
    first_v: int = 0
    first_i: int = 0

    @property
    def cause_words(self) -> tuple[str, ...]:
        """The latched causes in words, lowest bit first."""
        return cause_words(self.causes)

    @property
    def rate_hz(self) -> float:
        """Sample pairs per second."""
        return self.tick_hz / self.sample_ticks


@dataclass(frozen=True, slots=True, kw_only=True)
class Greeting:
    """All that the greeting told; ``settings`` is None where the MCU has none that can be trusted (``why_none``)."""

    session: int
    lease_s: float
    info: McuInfo
    settings: Settings | None
    why_none: str = ""

    @property
    def fitted(self) -> Fitted | None:
        """Which outputs, read-backs and inputs exist, or None where the settings are unknown."""
        return None if self.settings is None else Fitted(self.settings["fitted"])


def read_page(answer: Ok) -> dict[str, str | int]:
    """Return the checked fields of one answer to ``info``; keys that this version does not know are skipped."""
    if len(answer.words) != 1 or answer.words[0] not in {str(page) for page in range(INFO_PAGES)}:
        raise WireFault(f"a page from 0 to {INFO_PAGES - 1}", " ".join(answer.words), "info")
    page = int(answer.words[0])
    return {field.key: _read(field, answer.pairs) for field in FIELDS if field.page == page}


def _read(field: Field, pairs: Mapping[str, str]) -> str | int:
    where = f"info page {field.page}, {field.key}"
    if field.key not in pairs:
        raise WireFault(f"{field.key}=...", "nothing", where)
    text = pairs[field.key]
    if field.kind == "word":
        if not field.low <= len(text) <= field.high or not _TOKEN.issuperset(text):
            raise WireFault(f"a word of {field.low} to {field.high} characters", repr(text), where)
        if field.key == "signs" and text not in type_of_pack:
            raise WireFault("two of 's' and 'u'", repr(text), where)
        return text
    value = _hexadecimal(text) if field.kind == "hex" else _decimal(text)
    if value is None or not field.low <= value <= field.high:
        raise WireFault(f"{field.kind} number from {field.low} to {field.high}", repr(text), where)
    return value


def _decimal(text: str) -> int | None:
    digits = text[1:] if text[:1] == "-" else text
    if not (digits.isascii() and digits.isdigit()) or len(digits) > 10 or (digits[0] == "0" and text != "0"):
        return None
    return int(text)


def _hexadecimal(text: str) -> int | None:
    return int(text, 16) if len(text) == 8 and set(text) <= set("0123456789ABCDEF") else None


def info_of(fields: Mapping[str, str | int]) -> McuInfo:
    """Build the information from the fields of all four pages."""
    def number(key: str) -> int:
        return int(fields[key])

    return McuInfo(
        firmware=str(fields["fw"]), protocol=number("proto"), signs=str(fields["signs"]), v_bits=number("vbits"),
        i_bits=number("ibits"), dv_bits=number("dvbits"), di_bits=number("dibits"), tick_hz=number("tick"),
        sample_ticks=number("sample"), skew_ns=number("skew"), block_pairs=number("block"), queue=number("queue"),
        before_pairs=number("before"), after_pairs=number("after"), boot=number("boot"),
        reset=ResetCause(number("reset")), causes=number("causes"), rule=number("rule"), tag=number("tag"),
        mark=bool(fields["mark"]), settings_checksum=number("settings"), blank=bool(fields["blank"]),
        arm=number("arm"), event=number("event"), tick=number("now"), snapshot=number("snap"),
        first_cause=number("first"), first_tick=number("at"), first_v=number("v"), first_i=number("i"))


def read_settings_page(answer: Ok, page: int) -> tuple[int, ...]:
    """Return the values of one answer to ``get``: the page's number, then at most `PAGE` integers in table order."""
    expected = min(PAGE, len(SETTINGS) - page * PAGE) if 0 <= page < PAGES else 0
    if len(answer.words) != expected + 1 or answer.words[0] != str(page):
        raise WireFault(f"page {page} with {expected} values", " ".join(answer.words), "get")
    values = tuple(_decimal(text) for text in answer.words[1:])
    if None in values:
        raise WireFault("decimal integers", " ".join(answer.words[1:]), f"get page {page}")
    return tuple(value for value in values if value is not None)


def settings_of_pages(values: tuple[int, ...], expected_checksum: int) -> Settings:
    """Build the settings from all pages; `WireFault` where a value is out of range or the checksum is another."""
    settings = Settings(values)
    if checksum(values) != expected_checksum:
        raise WireFault(f"settings with checksum {expected_checksum:08X}", f"{checksum(values):08X}", "settings")
    return settings
