"""How checks put numbers into messages."""

import pytest

from hvhost.bench.saying import amps, delay_samples, joules, seconds, volts


def test_quantities_in_messages() -> None:
    """Prefix and few digits."""
    assert (volts(24e3), amps(4e-3), seconds(0.5), joules(0.43234)) == ("24 kV", "4 mA", "500 ms", "432 mJ")


@pytest.mark.parametrize(("delay", "rate", "samples"), [(0.0, 1000.0, 1), (0.010, 1000.0, 11), (0.0101, 1000.0, 12),
                                                        (0.063, 1000.0, 64), (0.001, 100.0, 2)])
def test_delay_in_samples(delay: float, rate: float, samples: int) -> None:
    """The delay rounded up to samples, and one more since sampling has its own phase."""
    assert delay_samples(delay, rate) == samples
