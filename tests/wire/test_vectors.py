"""The vectors of firmware_protocol/vectors, run against the codec and the stand-in's MCU."""

import dataclasses
import json
from typing import Any

import pytest

from hvhost.wire.frames import REQUESTS, Arm, decode_received, decode_request, encode_request
from hvhost.wire.interpolate import word_at
from hvhost.wire.lines import Garbled, LineReader, seal
from hvhost.wire.settings import Settings
from hvhost.words.errors import WireFault
from tests.wire.scenario import Runner, fits
from tests.wire.write_vectors import FOLDER, files

FILES = {path.name: json.loads(path.read_text(encoding="utf-8")) for path in sorted(FOLDER.glob("*.json"))}
SCENARIOS = [case for name, file in FILES.items() if name.startswith("scenarios-") for case in file["cases"]]


def cases(name: str) -> list[dict[str, Any]]:
    """Return the cases of one file."""
    found: list[dict[str, Any]] = FILES[name]["cases"]
    return found


def test_the_files_are_what_their_writer_makes() -> None:
    """No vector was changed by hand, and none is missing."""
    made = files()
    assert sorted(made) == sorted(FILES)
    for name, text in made.items():
        assert (FOLDER / name).read_text(encoding="utf-8") == text, f"{name}: run python -m tests.wire.write_vectors"


def test_crc() -> None:
    """Each body has its CRC."""
    for case in cases("crc.json"):
        assert seal(case["text"].encode())[-9:-1].decode() == case["crc"]


@pytest.mark.parametrize("case", cases("lines.json"), ids=lambda case: case["name"])
def test_lines(case: dict[str, Any]) -> None:
    """Good bodies come through, bad lines are dropped and counted."""
    out = LineReader().feed(case["bytes"].encode("latin-1"))
    assert [body.decode() for body in out if isinstance(body, bytes)] == case["bodies"]
    assert sum(isinstance(item, Garbled) for item in out) == case["dropped"]


@pytest.mark.parametrize("case", cases("requests.json"), ids=lambda case: case["body"])
def test_requests(case: dict[str, Any]) -> None:
    """Request bodies are read to their fields, and written again; bad ones are refused."""
    body = case["body"].encode()
    if case.get("refused"):
        with pytest.raises(WireFault):
            decode_request(body)
        return
    frame = decode_request(body)
    wanted = dict(case["request"])
    assert type(frame) is REQUESTS[wanted.pop("verb")].frame
    found = dataclasses.asdict(frame)
    if isinstance(frame, Arm) and frame.pause is not None:
        found["pause"] = list(frame.pause)
    assert found == wanted
    assert decode_request(encode_request(frame)) == frame


@pytest.mark.parametrize("case", cases("received.json"), ids=lambda case: case["body"])
def test_received(case: dict[str, Any]) -> None:
    """Bodies from the MCU are read to their fields; bad ones are refused."""
    if case.get("refused"):
        with pytest.raises(WireFault):
            decode_received(case["body"].encode(), case["signs"])
        return
    frame = decode_received(case["body"].encode(), case["signs"])
    found = {f.name: getattr(frame, f.name) for f in dataclasses.fields(frame) if f.init}
    assert {k: list(v) if isinstance(v, tuple) else v for k, v in found.items()} == case["frame"]


def test_interpolation() -> None:
    """Every listed word is the formula's."""
    for case in cases("interpolation.json"):
        for k, word in case["words"]:
            assert word_at(case["start"], case["target"], case["ticks"], k) == word, (case, k)


def test_settings() -> None:
    """Each set has its checksum."""
    for case in cases("settings.json"):
        assert f"{Settings.of(case['values']).checksum:08X}" == case["checksum"]


@pytest.mark.parametrize("case", SCENARIOS, ids=lambda case: case["name"])
def test_scenarios(case: dict[str, Any]) -> None:
    """The stand-in's MCU does what the clauses say, step by step."""
    Runner(case).run()


def test_a_wrong_expectation_is_noticed() -> None:
    """The runner is not deaf: each kind of expectation, turned wrong, fails."""
    case = next(c for c in SCENARIOS if c["name"] == "cut while energised")
    end = case["steps"][-1]["t"]
    for wrong in ({"has": ["ev * * energised 1 0"]}, {"lines": ["ok 5 cut"]}, {"at": {"relay": True}},
                  {"block": {"state": 4}}):
        with pytest.raises(AssertionError):
            Runner({**case, "steps": [*case["steps"], {"t": end + 10, **wrong}]}).run()
    with pytest.raises(AssertionError):
        Runner({**case, "steps": [*case["steps"][:-1], {"t": end, "send": "cut 6 0", "none": ["ok 6 cut"]}]}).run()


@pytest.mark.parametrize(("pattern", "body", "good"), [
    ("ev * * cut 1 5", "ev 9 41000 cut 1 5", True), ("ev * * cut 1 5", "ev 9 41000 cut 1 6", False),
    ("ok 1 snap ...", "ok 1 snap 3 Zm8=", True), ("ok 1 snap", "ok 1 snap 3", False),
    ("ok 1 info 3 boot=2", "ok 1 info 3 a=1 boot=2", True), ("ok 1 info 3 boot=2", "ok 1 info 3 boot=22", False)])
def test_patterns(pattern: str, body: str, good: bool) -> None:
    """Stars, trailing dots and options fit as section 17 says."""
    assert fits(pattern, body) is good


def test_every_named_sequence_is_there() -> None:
    """The sequences on which a stale or doubled command would energise or miscount each have a scenario."""
    names = {case["name"] for case in SCENARIOS}
    assert names >= {
        "an arm repeated behind a cut energises nothing", "a segment repeated behind a cut moves nothing",
        "a segment after a lower is refused", "a lapse while energised lowers and latches",
        "an arc while lowering is a cut", "a segment queued in the warning waits for energised",
        "power lost and back while energised", "the last run's pause and limits do not reach the next run",
        "one arc seen by MCU and host at different samples counts once"}
    assert len(names) == len(SCENARIOS)
