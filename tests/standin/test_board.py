"""The firmware's configuration refuses what no board could be, and rounds times the safe way."""

import pytest

from hvhost.standin.board import McuConfig
from hvhost.words.errors import CommandRefused


@pytest.mark.parametrize("wrong", [{"signs": "xy"}, {"block_pairs": 4}, {"block_pairs": 65}, {"v_bits": 17},
                                   {"sample_ticks": 0}, {"tick_hz": 10_000, "sample_ticks": 101}])
def test_an_impossible_configuration_is_refused(wrong):
    """Each impossible value is refused at birth with its name."""
    with pytest.raises(CommandRefused) as refused:
        McuConfig(**wrong)
    assert "McuConfig" in str(refused.value)


def test_times_are_rounded_up_and_never_to_nothing():
    """Milliseconds become the next whole tick and at least one sample (PROTOCOL 1.6)."""
    config = McuConfig(tick_hz=1_500, sample_ticks=2)
    assert config.ticks(1) == 2
    assert config.ticks(2) == 3
    assert config.samples(1) == 1
    assert config.samples(4) == 3
