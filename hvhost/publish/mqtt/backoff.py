"""How long to wait before the next attempt: doubling, bounded, spread by chance so that many benches do not return at
the same moment."""

FIRST_S = 0.5
LONGEST_S = 15.0  # what waited is to be delivered within a minute of the broker's return
STEADY_S = 10.0  # a connection that stood this long was no failure
TAKEN_OVER_S = 60.0  # two clients with one id would throw each other out for ever; each new try is an alarm


class Backoff:
    """Counts failures in a row; ``chance`` is a number from 0 up to 1 for each pause."""

    def __init__(self) -> None:
        self.failures = 0
        self.short = 0  # connections in a row that the broker took and that ended soon

    def stood(self, seconds: float) -> None:
        """A connection that the broker had taken ended after this long."""
        self.short += 1
        if seconds >= STEADY_S:
            self.failures = self.short = 0

    def pause_s(self, chance: float, taken_over: bool = False) -> float:
        """Half to all of the bound, which doubles with each failure."""
        self.failures += 1
        bound_s = TAKEN_OVER_S if taken_over else min(LONGEST_S, FIRST_S * 2.0 ** min(self.failures - 1, 16))
        return bound_s * (0.5 + 0.5 * chance)
