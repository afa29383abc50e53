"""The bench supply's reference: programming inputs, front panel, slew; what voltage and current it would like to give.

The output itself belongs to the load as well, so `plant` solves it: at most ``limit_a`` flows, never backwards.
"""

from collections.abc import Mapping
from math import exp

from hvhost.standin.params import PlantParams


class Supply:
    """Reference voltage and current limit from the programming inputs."""

    __slots__ = (
        "_dt_s",
        "_full_limit",
        "_i_per_v",
        "_k_clear",
        "_k_program",
        "_panel_a",
        "_panel_v",
        "_params",
        "_runaway",
        "_slew",
        "_v_offset",
        "_v_open",
        "_v_per_v",
        "i_program",
        "limit_a",
        "reference_v",
        "v_program",
    )

    def __init__(self, params: PlantParams) -> None:
        supply = params.supply
        self._params = params
        self._v_per_v = supply.v_full / supply.program_full_v
        self._i_per_v = supply.i_full / supply.program_full_v
        self._slew = supply.slew_v_per_s
        self._dt_s = self._k_program = self._k_clear = 0.0
        self.v_program = self.i_program = 0.0  # behind the filter of the programming inputs, volts
        self.reference_v = self.limit_a = 0.0
        self.settle({})

    def settle(self, faults: Mapping[str, float]) -> None:
        """Take the faults that are on."""
        self._panel_v = min(self._params.panel_v, faults.get("panel-v", self._params.panel_v))
        self._panel_a = min(self._params.panel_a, faults.get("panel-a", self._params.panel_a))
        self._v_offset = faults.get("program-offset", 0.0)
        self._v_open = "program-open" in faults
        self._runaway = faults.get("runaway", 0.0)
        self._full_limit = "limit-dead" in faults

    def step(self, dt_s: float, v_cmd: float, i_cmd: float, live: bool, clear: bool) -> None:
        """Let ``dt_s`` pass with these volts at the inputs; ``live`` is powered and not inhibited."""
        if dt_s != self._dt_s:
            self._dt_s = dt_s
            self._k_program = -exp(-dt_s / self._params.supply.program_tau_s) + 1.0
            self._k_clear = -exp(-dt_s / self._params.supply.clear_tau_s) + 1.0
        if clear:
            self.v_program -= self.v_program * self._k_clear
            self.i_program -= self.i_program * self._k_clear
        else:
            self.v_program += ((0.0 if self._v_open else v_cmd) - self.v_program) * self._k_program
            self.i_program += (i_cmd - self.i_program) * self._k_program
        if not live:
            self.reference_v = self.limit_a = 0.0
            return
        # the lower of front panel and programming wins, for both channels
        want_v = min(self._runaway or self.v_program * self._v_per_v + self._v_offset, self._panel_v)
        self.limit_a = min(self._params.supply.i_full * 1.05 if self._full_limit else self.i_program * self._i_per_v,
                           self._panel_a)
        rise_v = want_v - self.reference_v
        most_v = self._slew * dt_s
        if rise_v > most_v:
            self.reference_v += most_v
        elif rise_v < -most_v:
            self.reference_v -= most_v
        else:
            self.reference_v = want_v
