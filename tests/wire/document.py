"""Writes the tables and the example session of PROTOCOL.md from the code (``python -m tests.wire.document``).

Between ``<!-- table: name -->`` (or ``<!-- session -->``) and ``<!-- end -->`` everything is made here; the tests
compare the page with what this makes, and read the tables written by hand.
"""

import re
from pathlib import Path

from hvhost.wire import link, requests, stops
from hvhost.wire.greeting import FIELDS
from hvhost.wire.settings import SETTINGS
from hvhost.wire.vocabulary import CAUSE_WORDS, HOST_RULE_WORDS, Fitted, Inputs

PAGE = Path(__file__).parents[2] / "firmware_protocol" / "PROTOCOL.md"

INPUT_MEANINGS = {
    Inputs.INTERLOCK: "interlock loop closed",
    Inputs.EMERGENCY: "emergency contact closed: not operated",
    Inputs.GROUND_OPEN: "grounding device in its open position, stick on its hook",
    Inputs.DANGER: "red danger signal lit",
    Inputs.AUXILIARY: "auxiliary supplies good",
    Inputs.ARM_INPUT: "arm input pressed now",
    Inputs.INHIBIT_BACK: "read-back: inhibit asserted",
    Inputs.RELAY_BACK: "read-back: power relay closed",
    Inputs.POLARITY: "polarity contact agrees with the settings",
    Inputs.LEASE: "lease running",
    Inputs.PROVEN: "at least one means of the cut path proven for this arm",
}
FITTED_MEANINGS = {
    Fitted.INHIBIT: "output: inhibit",
    Fitted.CLEAR: "output: clear of the programming converters",
    Fitted.RELAY: "output: power relay",
    Fitted.INHIBIT_BACK: "read-back of the inhibit",
    Fitted.RELAY_BACK: "read-back of the power relay",
    Fitted.DANGER: "input: danger signal",
    Fitted.EMERGENCY: "input: second contact of the emergency switching off",
    Fitted.GROUND_SWITCH: "input: position contact of a grounding switch",
    Fitted.GROUND_STICK: "input: hook contact of a grounding stick",
    Fitted.ARM_INPUT: "input: arm",
    Fitted.AUXILIARY: "input: auxiliary supplies good",
    Fitted.POLARITY: "input: polarity contact",
    Fitted.MONITOR_POWERED: "the voltage monitor stays powered after the cut",
    Fitted.MONITOR_AT_SPECIMEN: "the voltage monitor is at the specimen",
    Fitted.DANGER_FROM_RELAY: "the relay feeds the danger signal: dark while the relay is open",
}
TIMING = (
    ("repeat of an unanswered request", f"{requests.ANSWER_S * 1000:.0f} ms"),
    ("tries of a request", str(requests.TRIES)),
    ("tries of a hello", str(link.HELLO_TRIES)),
    ("repeat of an unanswered stop", f"{stops.REPEAT_S * 1000:.0f} ms"),
    ("unanswered lower or arc becomes a cut after", f"{stops.ESCALATE_S * 1000:.0f} ms"),
    ("least distance of renewals", f"lease / {link.RENEWALS_PER_LEASE}"),
    ("default of the lease", "500 ms"),
    ("bounds of the lease", "100 ms to 2000 ms, and `leasemin` to `leasemax`"),
    ("block closed at the latest", "lease / 5 after its first pair"),
    ("press of the arm input", "0.2 s to 3 s"),
    ("wait for the press", "30 s"),
    ("read-back follows in proving within", "1 s"),
    ("danger signal dark trips after", "50 ms"),
    ("power still on trips after", "200 ms"),
    ("interlock did not cut trips after", "200 ms"),
    ("interlock closed before a reset for", "100 ms"),
    ("pause expires after the rest by", "30 s"),
    ("cut after a boot within", "10 ms"),
)


def _table(head: tuple[str, ...], rows: list[tuple[str, ...]]) -> list[str]:
    lines = ["| " + " | ".join(head) + " |", "|" + "---|" * len(head)]
    return lines + ["| " + " | ".join(row) + " |" for row in rows]


def tables() -> dict[str, list[str]]:
    """Return the lines of each generated table by name."""
    kinds = {"decimal": "number", "hex": "hex8", "word": "word"}
    info = [(str(f.page), f"`{f.key}`", kinds[f.kind], "" if f.kind == "hex" else f"{f.low}..{f.high}", f.unit,
             f.meaning) for f in FIELDS]
    settings = [(f"`{s.key}`", f"{s.low}..{s.high}", s.unit, s.meaning, s.arm) for s in SETTINGS]
    return {
        "info": _table(("page", "key", "kind", "range", "unit", "meaning"), info),
        "rules": _table(("rule", "meaning"), [(str(int(r)), w) for r, w in HOST_RULE_WORDS.items()]),
        "inputs": _table(("bit", "meaning when set"), [(f"{b:X}", INPUT_MEANINGS[b]) for b in Inputs]),
        "causes": _table(("bit", "cause"), [(f"{c:08X}", w) for c, w in CAUSE_WORDS.items()]),
        "settings": _table(("key", "range", "unit", "meaning", "an arm may give a"), settings),
        "fitted": _table(("bit", "meaning when set"), [(f"{b:X}", FITTED_MEANINGS[b]) for b in Fitted]),
        "timing": _table(("what", "value"), list(TIMING)),
    }


def filled(text: str, parts: dict[str, list[str]]) -> str:
    """Return the page with every marked part replaced; ``parts`` by the marker's text."""
    def part(found: re.Match[str]) -> str:
        return f"<!-- {found[1]} -->\n" + "\n".join(parts[found[1]]) + "\n<!-- end -->"

    return re.sub(r"<!-- (table: \w+|session) -->\n.*?<!-- end -->", part, text, flags=re.S)


def parts() -> dict[str, list[str]]:
    """Return all generated parts by their markers."""
    from tests.wire.session import dialogue

    made = {f"table: {name}": lines for name, lines in tables().items()}
    return made | {"session": ["```", *dialogue(), "```"]}


if __name__ == "__main__":
    PAGE.write_text(filled(PAGE.read_text(encoding="utf-8"), parts()), encoding="utf-8")
