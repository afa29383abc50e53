"""Acts at the bench as one-line commands: what a person, or a fault, does to a stand-in that runs.

Pure: a line in, an answer line out (``ok ...`` or ``error ...``).  The control socket and tests use it.
"""

import json
from collections.abc import Callable
from typing import Protocol

from hvhost.standin.faults import FAULTS, FaultSpec, parse_fault
from hvhost.standin.plant import Plant
from hvhost.words.errors import HvhostError, UsageFault
from hvhost.words.quantities import Dimension, parse_quantity

PRESS_S = 0.5


class Mcu(Protocol):
    """What the status line tells of the MCU."""

    @property
    def tick(self) -> int: ...
    @property
    def state(self) -> int: ...
    @property
    def latched(self) -> int: ...
    @property
    def v_word(self) -> int: ...
    @property
    def i_word(self) -> int: ...


class Bench(Protocol):
    """A stand-in as the acts see it: its plant and its MCU."""

    @property
    def plant(self) -> Plant: ...
    @property
    def mcu(self) -> Mcu: ...


class Quit(Exception):
    """The stand-in shall end."""


def act(bench: Bench, line: str) -> str:
    """Carry out one command and return its answer; `Quit` for ``quit``."""
    words = line.split()
    try:
        if not words or words[0] not in ACTS:
            raise UsageFault(f"one of {', '.join(ACTS)}", repr(words[0] if words else ""), "command")
        return f"ok {ACTS[words[0]](bench, words[1:])}".rstrip()
    except HvhostError as refused:
        return f"error {refused}"


def _one(words: list[str], choices: tuple[str, ...], default: str | None = None) -> str:
    word = words[0] if words else default
    if word not in choices or len(words) > 1:
        raise UsageFault(" or ".join(choices), repr(" ".join(words)), "command")
    return word


def _press(bench: Bench, words: list[str]) -> str:
    """press [seconds]: press the arm input for so long (0.5 s)"""
    text = " ".join(words)
    seconds = PRESS_S
    if text:
        seconds = parse_quantity(text if text.endswith("s") else f"{text} s", Dimension.SECOND)
    if not 0.0 < seconds <= 3600.0:
        raise UsageFault("a press of at most an hour", text, "press")
    bench.plant.press(seconds)
    return f"pressed for {seconds:g} s"


def _fault(bench: Bench, words: list[str]) -> str:
    """fault on NAME[=VALUE][@WHEN][+SPAN] | fault off NAME: a fault of the list, now or when its time comes"""
    book = bench.plant.faults
    _one(words[:1], ("on", "off"))
    text = "".join(words[1:])
    if words[0] == "off":
        if text not in FAULTS:
            parse_fault(text)  # says what is nearest
        book.off(text)
        return f"{text} off"
    spec = parse_fault(text)
    now_s = bench.plant.t_s
    if spec.at_s or spec.at_v or spec.for_s < float("inf"):
        # a time counts from now here: whoever types it does not know the plant's own
        book.plan(FaultSpec(name=spec.name, value=spec.value, at_s=now_s + spec.at_s, at_v=spec.at_v,
                            for_s=spec.for_s))
        return f"{spec.name} planned"
    book.on(spec.name, spec.value)
    return f"{spec.name} on"


def _interlock(bench: Bench, words: list[str]) -> str:
    """interlock open | close: the loop of the enclosure"""
    word = _one(words, ("open", "close"))
    bench.plant.interlock(word == "close")
    return f"interlock {word}"


def _emergency(bench: Bench, words: list[str]) -> str:
    """emergency [operate | release]: the emergency contact"""
    word = _one(words, ("operate", "release"), "operate")
    bench.plant.emergency(word == "release")
    return f"emergency {word}"


def _ground(bench: Bench, words: list[str]) -> str:
    """ground [on | off]: the grounding device on the output"""
    word = _one(words, ("on", "off"), "on")
    bench.plant.ground(word == "on")
    return f"ground {word}"


def _reset_outside(bench: Bench, words: list[str]) -> str:
    """reset-outside: the manual reset of the hard-wired circuit"""
    _one(words or ["-"], ("-",))
    if not bench.plant.outside_reset():
        raise UsageFault("a closed interlock loop and a released emergency contact", "an open one", "reset-outside")
    return "contactor held"


def _specimen(bench: Bench, words: list[str]) -> str:
    """specimen: put in a new one of the same make"""
    _one(words or ["-"], ("-",))
    bench.plant.new_specimen()
    return "new specimen"


def _mcu_reset(bench: Bench, words: list[str]) -> str:
    """mcu-reset: reset the MCU"""
    _one(words or ["-"], ("-",))
    bench.plant.faults.on("mcu-reset")
    return "reset"


def _status(bench: Bench, words: list[str]) -> str:
    """status: one line of JSON, true values"""
    _one(words or ["-"], ("-",))
    plant, mcu = bench.plant, bench.mcu
    return json.dumps({
        "t_s": round(plant.t_s, 4), "tick": mcu.tick, "v": round(plant.v_true, 1), "i": round(plant.i_true, 9),
        "power": plant.power, "mcu": int(mcu.state), "latched": int(mcu.latched), "v_word": mcu.v_word,
        "i_word": mcu.i_word, "inputs": plant.inputs(), "arcs": plant.specimen.arcs,
        "faults": sorted(plant.faults.active)}, separators=(",", ":"))


def _quit(bench: Bench, words: list[str]) -> str:
    """quit: end the stand-in"""
    _one(words or ["-"], ("-",))
    raise Quit


ACTS: dict[str, Callable[[Bench, list[str]], str]] = {
    "press": _press, "fault": _fault, "interlock": _interlock, "emergency": _emergency, "ground": _ground,
    "reset-outside": _reset_outside, "specimen": _specimen, "mcu-reset": _mcu_reset, "status": _status,
    "quit": _quit,
}


def act_lines() -> tuple[str, ...]:
    """Return one line per command for a help page."""
    return tuple(f"  {made.__doc__}" for made in ACTS.values())
