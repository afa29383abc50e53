"""PROTOCOL.md says what the code does: tables, grammar, clauses, example session."""

import re

from hvhost.wire import fields
from hvhost.wire.frames import REQUESTS
from hvhost.wire.lines import LINE_MAX, LineReader
from hvhost.wire.vocabulary import (
    ERR_NUMBERS,
    CutWhy,
    Err,
    EventKind,
    LowerWhy,
    McuState,
    ResetCause,
    VoidWhy,
)
from tests.wire.document import FITTED_MEANINGS, INPUT_MEANINGS, PAGE, filled, parts
from tests.wire.scenario import Runner
from tests.wire.test_vectors import SCENARIOS

TEXT = PAGE.read_text(encoding="utf-8")
KINDS = {id(fields.NUMBER): "0..4294967295", id(fields.CODE): "0..65535", id(fields.FLAG): "0..1",
         id(fields.HEX8): "hex8", id(fields.WORD): "word"}


def rows(head: str) -> list[list[str]]:
    """Return the cells of the table that begins with this header line."""
    block = TEXT.split(head, 1)[1].split("\n\n", 1)[0].splitlines()[2:]
    return [[cell.strip() for cell in re.split(r"(?<!\\)\|", line)[1:-1]] for line in block]


def test_generated_parts_are_current() -> None:
    """Tables of the code and the example session are those that the code makes now."""
    assert filled(TEXT, parts()) == TEXT, "run python -m tests.wire.document"


def test_requests_table() -> None:
    """Each request stands there with its fields in order and their ranges."""
    table = {row[0].strip("`"): row[1] for row in rows("| request | fields")}
    assert list(table) == list(REQUESTS)
    for verb, spec in REQUESTS.items():
        fields = spec.fields if verb in ("cut", "renew") else spec.fields[2:]
        wanted = ", ".join(f"`{name}` {KINDS.get(id(kind), '-4294967295..4294967295')}" for name, kind in fields)
        assert table[verb].split(" [")[0] == wanted, verb


def test_errors_table() -> None:
    """Each error code stands there with its number and a meaning."""
    table = rows("| code | number | meaning |")
    assert {row[0].strip("`"): int(row[1]) for row in table} == {str(err): ERR_NUMBERS[err] for err in Err}
    assert all(row[2] for row in table)


def test_events_states_and_whys() -> None:
    """Events, states, reset causes and the reasons of cut, lowering and void have their words and numbers."""
    assert [row[0].strip("`") for row in rows("| kind | a | b | when |")] == [str(kind) for kind in EventKind]
    states = rows("| number | state | power relay")
    assert {int(row[0]): row[1] for row in states} == {int(s): s.name.lower() for s in McuState}
    assert [int(row[0]) for row in rows("| number | cause |")] == list(ResetCause)
    whys = rows("| why of `cut`")
    for column, kind in ((1, CutWhy), (3, LowerWhy), (5, VoidWhy)):
        assert [int(row[column]) for row in whys if row[column]] == list(kind)


def test_masks_have_meanings() -> None:
    """Every bit of inputs and fitted has its meaning."""
    assert all(INPUT_MEANINGS.values())
    assert all(FITTED_MEANINGS.values())


def test_clauses_are_single_sentences_with_shall_and_run_through() -> None:
    """Each clause is one sentence, says *shall*, and the numbers of each section run from 1 upward."""
    clauses = re.findall(r"^- (\d+)\.(\d+) (.+)$", TEXT, re.M)
    assert len(clauses) > 150
    seen: dict[str, int] = {}
    for section, number, text in clauses:
        assert int(number) == seen.get(section, 0) + 1, f"{section}.{number}"
        seen[section] = int(number)
        assert "shall" in text, f"{section}.{number}"
        assert text.endswith("."), f"{section}.{number}"
        assert ". " not in text, f"{section}.{number}: more than one sentence"


def test_references_to_clauses_exist() -> None:
    """Every clause that the page or a scenario cites is there."""
    have = {f"{a}.{b}" for a, b in re.findall(r"^- (\d+)\.(\d+) ", TEXT, re.M)}
    prose = re.sub(r"<!-- session -->.*", "", TEXT, flags=re.S)
    cited = set(re.findall(r"(?:by|of|for|from|to) (\d+\.\d+)(?=[ ;,.])", prose))
    for case in SCENARIOS:
        cited |= set(case["clauses"].split())
    assert cited <= have, sorted(cited - have)


def test_every_scenario_cites_its_clauses() -> None:
    """A scenario says which clauses it tests, and more than half of the MCU's clauses have one."""
    assert all(case["clauses"] for case in SCENARIOS)
    cited = {clause for case in SCENARIOS for clause in case["clauses"].split()}
    have = {f"{a}.{b}" for a, b in re.findall(r"^- (\d+)\.(\d+) ", TEXT, re.M) if int(a) in range(3, 14)}
    assert len(cited & have) > len(have) / 2, sorted(have - cited)


def test_line_lengths() -> None:
    """The page's maximum is the reader's."""
    assert f"no line is longer than {LINE_MAX} bytes" in TEXT
    assert f"1 to {LINE_MAX - 13} bytes" in TEXT


def test_the_example_session_is_made_of_good_lines() -> None:
    """Every line of the example but the shortened blocks can be pasted and is good."""
    shown = [line[10:] for line in TEXT.split("<!-- session -->")[1].splitlines() if line[8:9] in ("<", ">")]
    assert len(shown) > 40
    whole = [line for line in shown if not line.endswith("...")]
    assert all(isinstance(item, bytes) for item in LineReader().feed("\n".join([*whole, ""]).encode()))


def test_scenario_keys_are_described() -> None:
    """Each key of a step stands in section 17, and the runner carries it out."""
    described = {row[0].strip("`") for row in rows("| key | value | what happens |")}
    used = {key for case in SCENARIOS for step in case["steps"] for key in step} - {"t"}
    assert used <= described
    assert all(hasattr(Runner, f"do_{key}") for key in described)
