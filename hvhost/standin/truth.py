"""What really happened in the plant, as JSON lines: the judge's file, written by the stand-in, never read by the host.

One object per line, compact, ASCII.  Every line has ``kind``; all but the first have ``tick`` (the MCU's count, not
wrapped) and ``t_s`` (true time since the plant began, seconds; with ``clock-drift`` the two part).

``{"kind":"start","seed":7,"profile":"demo","tick_hz":10000,"faults":["lead-off@3s"]}``
    the first line; ``faults`` as asked for on the command line.

``{"kind":"state","tick":..,"t_s":..,"v":..,"i":..,"v_word":..,"i_word":..,"inhibit":..,"clear":..,"relay":..,
"power":..,"danger":..,"mcu":..,"causes":..}``
    ``v`` volts at the specimen and ``i`` amps in the return, both oriented (positive in the bench's polarity);
    ``v_word``, ``i_word`` applied set-point words; ``inhibit``, ``clear``, ``relay`` as the MCU drives them (0 or 1);
    ``power`` the supply's power contacts closed, ``danger`` the danger signal as the MCU reads it; ``mcu`` its state
    (`vocabulary.McuState`); ``causes`` the latched set.  Written when one of the last seven changes, and at least
    every 10 ms while there is power or more than 30 V.

An event may stand up to one sample behind a line of a later tick: its own ``tick`` and ``t_s`` are exact.

``{"kind":"event","tick":..,"t_s":..,"what":"arc","value":..,"detail":".."}``
    ``what``: ``arc`` and ``restrike`` (value: volts just before), ``quench`` (joules in the arc), ``cut``
    (value: a `vocabulary.CutWhy`), ``power on``, ``power off`` (volts then), ``press`` (seconds), ``interlock open``,
    ``interlock closed``, ``emergency operated``, ``emergency released``, ``ground on``, ``ground off``,
    ``reset outside`` (1 if the contactor held), ``specimen`` (its strength in volts), ``fault on``, ``fault off``
    (detail: name; value), ``mcu reset`` (a `vocabulary.ResetCause`), ``dropped`` (bytes lost as nobody read).
"""

import json
from collections.abc import Callable, Sequence

LIVE_V = 30.0
EVERY_S = 0.010

Levels = tuple[int, int, int, int, int, int, int]  # inhibit, clear, relay, power, danger, mcu, causes


class TruthLog:
    """Writes the lines through ``write``; one call per sample is cheap when nothing is due."""

    __slots__ = ("_every", "_last_tick", "_levels", "_write", "lines")

    def __init__(self, write: Callable[[str], object], *, tick_hz: int) -> None:
        self._write = write
        self._every = max(1, round(EVERY_S * tick_hz))
        self._levels: Levels | None = None
        self._last_tick = 0
        self.lines = 0

    def start(self, *, seed: int, profile: str, tick_hz: int, faults: Sequence[str] = ()) -> None:
        """Write the first line."""
        self._line({"kind": "start", "seed": seed, "profile": profile, "tick_hz": tick_hz, "faults": list(faults)})

    def state(self, tick: int, t_s: float, levels: Levels, v: float, i: float, v_word: int, i_word: int) -> None:
        """Write a state line if a level changed, or if 10 ms passed under power or voltage."""
        if levels == self._levels and (tick - self._last_tick < self._every
                                       or not (levels[3] or v > LIVE_V or v < -LIVE_V)):
            return
        self._levels, self._last_tick = levels, tick
        inhibit, clear, relay, power, danger, mcu, causes = map(int, levels)
        self._line({"kind": "state", "tick": tick, "t_s": round(t_s, 7), "v": round(v, 3), "i": round(i, 10),
                    "v_word": v_word, "i_word": i_word, "inhibit": inhibit, "clear": clear, "relay": relay,
                    "power": power, "danger": danger, "mcu": mcu, "causes": causes})

    def event(self, tick: int, t_s: float, what: str, value: float = 0.0, detail: str = "") -> None:
        """Write an event line."""
        line: dict[str, object] = {"kind": "event", "tick": tick, "t_s": round(t_s, 7), "what": what,
                                   "value": round(value, 6)}
        if detail:
            line["detail"] = detail
        self._line(line)

    def _line(self, line: dict[str, object]) -> None:
        self._write(json.dumps(line, separators=(",", ":")) + "\n")
        self.lines += 1
