"""What is kept outlives a reset, a file and a damaged cell."""

import pytest
from hypothesis import given
from hypothesis import strategies as st

from hvhost.standin.eeprom import SIZE, STATE_SIZE, Eeprom, FileStore, Kept
from tests.standin.fakes import SETTINGS


def test_a_new_eeprom_is_blank():
    """Erased cells hold no settings, no causes and no mark."""
    eeprom = Eeprom()
    assert eeprom.blank
    assert eeprom.settings is None
    assert eeprom.kept == Kept()


def test_settings_and_state_come_back_from_the_cells(tmp_path):
    """A second EEPROM on the same file reads the settings and everything kept."""
    store = FileStore(tmp_path / "cells")
    first = Eeprom(SETTINGS, store)
    first.keep(causes=5, first=1, rule=4, tag=0xDEADBEEF, mark=1, boots=3, v_code=-123, i_code=7, snapshot=9)
    second = Eeprom(None, FileStore(tmp_path / "cells"))
    assert second.settings == SETTINGS
    assert second.kept == first.kept
    assert second.kept.v_code == -123


def test_given_settings_never_replace_valid_ones(tmp_path):
    """Settings handed over at birth fill a blank EEPROM only."""
    store = FileStore(tmp_path / "cells")
    Eeprom(SETTINGS, store)
    assert Eeprom(SETTINGS.with_(warn=4000), store).settings == SETTINGS


@given(st.integers(STATE_SIZE, SIZE - 1), st.integers(0, 7))
def test_one_flipped_bit_of_the_settings_leaves_none(at, bit):
    """A damaged settings record is never used."""
    eeprom = Eeprom(SETTINGS)
    eeprom.damage(at, bit)
    assert eeprom.settings is None


@given(st.integers(0, STATE_SIZE - 1), st.integers(0, 7))
def test_a_damaged_state_is_read_as_the_worst(at, bit):
    """A damaged state record counts as an 'energised' mark, and the settings stay."""
    eeprom = Eeprom(SETTINGS)
    eeprom.keep(boots=1)
    eeprom.damage(at, bit)
    assert eeprom.kept == Kept(mark=1)
    assert eeprom.settings == SETTINGS


def test_nothing_is_written_when_nothing_changes():
    """Keeping what is kept costs no write."""
    eeprom = Eeprom(SETTINGS)
    eeprom.keep(boots=1)
    writes = eeprom.writes
    eeprom.keep(boots=1)
    assert eeprom.writes == writes


@pytest.mark.parametrize("size", [0, 1, STATE_SIZE, SIZE - 1])
def test_a_short_file_is_damaged_not_a_fault(tmp_path, size):
    """A file cut short is read as far as it goes; what is missing counts as damaged or blank."""
    path = tmp_path / "cells"
    Eeprom(SETTINGS, FileStore(path)).keep(boots=2)
    path.write_bytes(path.read_bytes()[:size])
    assert Eeprom(None, FileStore(path)).settings is None


def test_erasing_blanks_everything():
    """An erased EEPROM is as new."""
    eeprom = Eeprom(SETTINGS)
    eeprom.erase()
    assert eeprom.blank
    assert eeprom.kept == Kept()
