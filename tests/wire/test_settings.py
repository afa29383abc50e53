"""Settings: ranges, checksum, differences."""

from zlib import crc32

import pytest

from hvhost.wire.settings import KEYS, PAGE, PAGES, SETTINGS, TIGHTENABLE, Settings, differences
from hvhost.words.errors import WireFault
from tests.wire.device import SETTLED


def test_the_checksum_is_the_crc_of_the_printed_values() -> None:
    """The checksum is the CRC-32 over 'key=value' and LF in table order."""
    text = "".join(f"{s.key}={SETTLED[s.key]}\n" for s in SETTINGS)
    assert SETTLED.checksum == crc32(text.encode("ascii"))


@pytest.mark.parametrize("setting", SETTINGS, ids=KEYS)
def test_each_setting_keeps_its_range(setting: object) -> None:
    """A value outside its range names the setting, the range and what was found."""
    key, low, high = setting.key, setting.low, setting.high  # type: ignore[attr-defined]
    for value in (low - 1, high + 1):
        with pytest.raises(WireFault, match=f"setting {key}: expected {low} to {high}.*found {value}"):
            SETTLED.with_(**{key: value})


def test_impossible_combinations_are_refused() -> None:
    """No polarity, and a shortest lease above the longest, are refused."""
    with pytest.raises(WireFault, match="polarity"):
        SETTLED.with_(polarity=0)
    with pytest.raises(WireFault, match="leasemin"):
        SETTLED.with_(leasemin=500, leasemax=400)


def test_a_set_is_complete() -> None:
    """A missing or an unknown key is named."""
    values = dict(zip(KEYS, SETTLED.values, strict=True))
    assert Settings.of(values) == SETTLED
    with pytest.raises(WireFault, match="extra"):
        Settings.of({**values, "extra": 1})
    with pytest.raises(WireFault, match="vmax"):
        Settings.of({key: value for key, value in values.items() if key != "vmax"})
    with pytest.raises(WireFault, match="36 settings"):
        Settings(SETTLED.values[:-1])


def test_differences_name_both_values() -> None:
    """What differs is told with both values, in table order."""
    assert differences(SETTLED, SETTLED.with_(oc=9, vmax=7)) == (("vmax", 1, 7), ("oc", 1, 9))


def test_keys_are_wire_words_and_pages_cover_them() -> None:
    """Keys can stand on the wire, are told apart by their first 16 letters, and pages of eight hold all of them."""
    assert len(set(KEYS)) == len(KEYS)
    assert all(key.isalnum() and key.islower() and len(key) <= 16 for key in KEYS)
    assert (PAGES - 1) * PAGE < len(KEYS) <= PAGES * PAGE
    assert all(s.arm in ("", "lower", "higher") for s in SETTINGS)
    assert set(TIGHTENABLE) == {s.key for s in SETTINGS if s.arm}
