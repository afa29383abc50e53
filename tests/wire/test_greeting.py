"""What the MCU says of itself: every field is checked against its range."""

import pytest

from hvhost.wire.frames import Ok, decode_received
from hvhost.wire.greeting import FIELDS, INFO_PAGES, info_of, read_page, read_settings_page, settings_of_pages
from hvhost.wire.settings import PAGE, PAGES
from hvhost.wire.vocabulary import ResetCause
from hvhost.words.errors import WireFault
from tests.wire.device import SETTLED, Device


def page(number: int, **changes: str) -> Ok:
    """Return the answer to ``info``, with changes."""
    frame = decode_received(f"ok 1 info {number} {Device(fields=changes).page(number)}".encode(), "ss")
    assert isinstance(frame, Ok)
    return frame


def test_the_pages_make_the_information() -> None:
    """Four good pages become typed values."""
    fields = {key: value for number in range(INFO_PAGES) for key, value in read_page(page(number)).items()}
    info = info_of(fields)
    assert info.firmware == "fake-1"
    assert info.signs == "ss"
    assert info.rate_hz == 1000.0
    assert info.reset is ResetCause.POWER
    assert info.cause_words == ("restarted",)
    assert info.settings_checksum == SETTLED.checksum
    assert not info.blank


@pytest.mark.parametrize("field", FIELDS, ids=[f.key for f in FIELDS])
def test_a_field_outside_its_range_is_named(field: object) -> None:
    """Below, above, not a number, missing: each is a fault that names page and key."""
    key, number = field.key, field.page  # type: ignore[attr-defined]
    decimal = field.kind == "decimal"  # type: ignore[attr-defined]
    low, high = field.low, field.high  # type: ignore[attr-defined]
    wrong = [str(low - 1), str(high + 1), "1e3", "+1", "01", "x"] if decimal else ["!", "x" * 33]
    if key == "signs":
        wrong = ["s", "sss", "xx", "SS"]
    for text in wrong:
        with pytest.raises(WireFault, match=f"info page {number}, {key}"):
            read_page(page(number, **{key: text}))
    answer = page(number)
    fewer = Ok(n=1, verb="info", words=answer.words, pairs={k: v for k, v in answer.pairs.items() if k != key})
    with pytest.raises(WireFault, match=f"{key}=... *, found nothing|found nothing"):
        read_page(fewer)


def test_unknown_keys_are_skipped_and_unknown_pages_refused() -> None:
    """A newer MCU may say more; a page that does not exist is a fault."""
    answer = page(0)
    more = Ok(n=1, verb="info", words=answer.words, pairs={**answer.pairs, "colour": "grey"})
    assert read_page(more) == read_page(answer)
    with pytest.raises(WireFault):
        read_page(Ok(n=1, verb="info", words=("4",)))
    with pytest.raises(WireFault):
        read_page(Ok(n=1, verb="info", words=()))


def values(number: int) -> tuple[str, ...]:
    """Return one page of good settings as words."""
    return tuple(map(str, SETTLED.values[number * PAGE : (number + 1) * PAGE]))


def test_settings_pages_join_to_the_settings() -> None:
    """All pages together are the settings, if their checksum is the one told."""
    read = tuple(v for number in range(PAGES)
                 for v in read_settings_page(Ok(n=1, verb="get", words=(str(number), *values(number))), number))
    assert settings_of_pages(read, SETTLED.checksum) == SETTLED
    with pytest.raises(WireFault, match="checksum"):
        settings_of_pages(read, SETTLED.checksum ^ 1)


@pytest.mark.parametrize("words", [(), ("1", *values(0)), ("0", *values(0)[1:]), ("0", *values(0), "7"),
                                   ("0", *values(0)[1:], "x"), ("0", *values(0)[1:], "01")])
def test_a_wrong_settings_page_is_refused(words: tuple[str, ...]) -> None:
    """Another page, too few, too many, or not numbers."""
    with pytest.raises(WireFault):
        read_settings_page(Ok(n=1, verb="get", words=words), 0)
