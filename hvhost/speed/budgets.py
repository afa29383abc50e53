"""Which budget is measured by what, in the order in which they are shown."""

from collections.abc import Callable
from functools import partial
from importlib import import_module

from hvhost.speed.figures import Line, Say
from hvhost.speed.setting import Setting
from hvhost.words.errors import CommandRefused

Measure = Callable[[Setting], list[Line]]

# budget -> the measurements that give its lines, as module:function; one may give lines of two budgets
MEASURES: dict[str, tuple[str, ...]] = {
    "B1": ("path:measure",),
    "B2": ("trip:measure",),
    "B3": ("stops:measure",),
    "B4": ("lasting:measure",),
    "B5": ("lasting:measure",),
    "B6": ("standing:measure_memory",),
    "B7": ("guarding:measure",),
    "B8": ("recording:measure", "rehearsing:measure"),
    "B9": ("rehearsing:measure",),
    "B11": ("starting:measure", "standing:measure_cut"),
    "B14": ("standing:measure_restart",),
}
BUDGETS = tuple(MEASURES)


def chosen(text: str) -> tuple[str, ...]:
    """Return the budgets named in a list such as 'B1,B2'; all for ''; raises `CommandRefused` for an unknown one."""
    if not text:
        return BUDGETS
    names = [name.strip().upper() for name in text.split(",") if name.strip()]
    for name in names:
        if name not in MEASURES:
            raise CommandRefused(f"any of {', '.join(BUDGETS)}", repr(name), "--only")
    return tuple(name for name in BUDGETS if name in names)


def measure(setting: Setting, budgets: tuple[str, ...]) -> list[Line]:
    """Take every measurement that these budgets need, once each; return their lines."""
    lines: list[Line] = []
    say = setting.say
    for place in dict.fromkeys(place for name in budgets for place in MEASURES[name]):
        names = "+".join(name for name in budgets if place in MEASURES[name])
        setting.say = partial(_prefixed, say, names)
        setting.say("begun")
        lines += [line for line in _of(place)(setting) if line.budget in budgets or not line.judged]
    setting.say = say
    return sorted(lines, key=lambda line: int(line.budget[1:]))


def _prefixed(say: Say, names: str, text: str) -> None:
    say(f"{names}: {text}")


def _of(place: str) -> Measure:
    module, _, function = place.partition(":")
    found: Measure = getattr(import_module(f"hvhost.speed.{module}"), function)
    return found
