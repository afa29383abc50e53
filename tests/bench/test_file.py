"""The bench file: whole or not at all, every fault in one go, examples in silence."""

import json
from datetime import date
from pathlib import Path

import jsonschema
import pytest
import yaml
from hypothesis import given, settings
from hypothesis import strategies as st

from hvhost.bench.file import bench_from, bench_schema, check_bench, check_text, load_bench
from hvhost.bench.model import Bench
from hvhost.words.errors import FileFault
from hvhost.words.findings import Finding, Grade, refused
from tests.bench.faulty_table import TABLE

ROOT = Path(__file__).parents[2]
FAULTY = ROOT / "tests" / "faulty" / "bench"
EXAMPLES = [ROOT / "configs" / "demo.bench.yaml", ROOT / "configs" / "small.bench.yaml"]
DEMO = EXAMPLES[0].read_text(encoding="utf-8")


def _matches(finding: Finding, row: tuple[object, ...]) -> bool:
    line, grade, what, expected, found, *nearest = row
    return (finding.line == line and finding.grade is grade and finding.what == what
            and str(expected) in finding.expected and str(found) in finding.found
            and all(f"'{near}'" in finding.remedy for near in nearest))


@pytest.mark.parametrize("name", sorted(TABLE))
def test_faulty_file(name: str) -> None:
    """Each faulty file gives exactly its rows, in one go, sorted by line."""
    findings = check_bench(FAULTY / name)
    rows = TABLE[name]
    for row in rows:
        assert any(_matches(f, row) for f in findings), (row, [f.text for f in findings])
    extra = [f.text for f in findings if not any(_matches(f, row) for row in rows)]
    assert extra == []
    assert [f.line for f in findings] == sorted(f.line for f in findings)


def test_every_faulty_file_is_in_the_table() -> None:
    """No faulty file lies about untested."""
    assert {p.name for p in FAULTY.glob("*.yaml")} == set(TABLE)


@pytest.mark.parametrize("name", sorted(TABLE))
def test_refused_whole(name: str) -> None:
    """A file with a refusing fault gives no bench, and the error carries every finding; others load."""
    findings = check_bench(FAULTY / name)
    if refused(findings):
        with pytest.raises(FileFault) as caught:
            load_bench(FAULTY / name)
        assert set(caught.value.findings) == set(findings)
        assert "Traceback" not in str(caught.value)
    else:
        assert load_bench(FAULTY / name).findings == findings


@pytest.mark.parametrize("path", EXAMPLES, ids=lambda p: p.name)
def test_examples_are_silent(path: Path) -> None:
    """The examples load without any finding, also with today's date given."""
    assert check_bench(path, today=date(2026, 12, 1)) == ()
    assert load_bench(path).findings == ()


def test_missing_file_is_a_finding(tmp_path: Path) -> None:
    """A file that is not there is a finding with the reason, not a traceback."""
    (finding,) = check_bench(tmp_path / "no.bench.yaml")
    assert finding.grade is Grade.REFUSE
    assert "No such file" in finding.found
    (finding,) = check_bench(tmp_path)
    assert "directory" in finding.found


def test_demo_bench_in_si() -> None:
    """The demo bench holds SI floats as the file states them."""
    bench = load_bench(EXAMPLES[0])
    assert (bench.name, bench.polarity, bench.v_max, bench.i_max) == ("demo", 1, 24e3, 4e-3)
    assert (bench.slew_v_per_s, bench.slew_a_per_s, bench.lower_max_s, bench.warn_s) == (5e3, 40e-3, 10.0, 3.0)
    assert bench.voltage.monitor.gain == pytest.approx(25e3 / 32767, rel=1e-15)
    assert bench.current.program.gain == pytest.approx(4e-3 / 65535, rel=1e-15)
    assert bench.voltage.monitor.u_gain == pytest.approx(0.003, rel=1e-15), "the file's k = 2 is halved"
    assert bench.voltage.monitor.u_zero == 5.0
    assert bench.voltage.monitor.code_high == 32767
    assert bench.voltage.monitor.code_low == -32768
    assert bench.limits.delay_samples == 11, "10 ms at 1 kHz, and one for the phase"
    assert bench.text == DEMO
    assert len(bench.sha256) == 64


def test_small_bench_has_no_arm_input_and_pushes_current_the_other_way() -> None:
    """The small bench: negative, unipolar 12-bit converters, no arm input, no clear line."""
    bench = load_bench(EXAMPLES[1])
    assert (bench.polarity, bench.arm_input, bench.voltage.monitor.code_low) == (-1, False, 0)
    assert bench.cut_path == {"relay", "inhibit", "programming"}
    assert not bench.programming_only


def _with(old: str, new: str) -> Bench:
    assert old in DEMO
    return bench_from("bench.yaml", DEMO.replace(old, new, 1))


def test_negative_monitor_gives_negative_gain() -> None:
    """A monitor that goes negative as the output rises has a negative gain, and oriented values stay positive."""
    bench = _with("    sign: positive\n    zero_code: 0\n    gain_uncertainty: 0.6 %",
                  "    sign: negative\n    zero_code: 12\n    gain_uncertainty: 0.6 %")
    monitor = bench.voltage.monitor
    assert monitor.sign == -1
    assert monitor.value(-1000) == pytest.approx(1012 * 25e3 / 32767)
    assert bench.settings()["vmap"] == -32767
    assert bench.settings()["vzero"] == 12


def test_converter_code_fixes_the_convention() -> None:
    """FS / 2**N and FS / (2**N - 1) differ by one code at full scale: the file says which."""
    by_last = _with("converter: 10 V             # at the last code", "converter: 10 V")
    by_steps = _with("converter: 10 V             # at the last code", "converter: 10 V\n    converter_code: 65536")
    assert by_last.voltage.program.value(65535) == pytest.approx(25e3, rel=1e-15)
    assert by_steps.voltage.program.value(65535) == pytest.approx(25e3 * 65535 / 65536, rel=1e-15)
    assert by_steps.voltage.program.code(25e3) == 65535, "the range's end is one step above the top code"


@pytest.mark.parametrize(("day", "grade", "words"), [
    (date(2027, 1, 31), None, ""), (date(2027, 3, 1), Grade.NOTE, "30 days from now"),
    (date(2027, 3, 31), Grade.NOTE, "0 days from now"), (date(2027, 4, 1), Grade.REASON, "expired 1 days ago")])
def test_calibration_expires(day: date, grade: Grade | None, words: str) -> None:
    """The last day still counts; after it a reason is needed; within a month it is a note."""
    findings = check_text("b.yaml", DEMO.replace("2099-12-31", "2027-03-31"), day)
    if grade is None:
        assert findings == ()
    else:
        assert [f.grade for f in findings] == [grade]
        assert words in findings[0].found
        assert findings[0].line == DEMO[: DEMO.index("valid_until")].count("\n") + 1


def test_value_that_does_not_fit_into_the_settings_is_refused() -> None:
    """What passes every check but leaves the range of an MCU setting is a finding, not an exception."""
    text = DEMO.replace("current_slew: 40 mA/s", "current_slew: 1e6 A/s")
    (finding,) = check_text("b.yaml", text)
    assert finding.grade is Grade.REFUSE
    assert "islew" in finding.what
    with pytest.raises(FileFault):
        bench_from("b.yaml", text)


def test_schema_accepts_the_examples_and_knows_the_keys() -> None:
    """The JSON Schema is valid, accepts both examples as texts and as YAML's own types, refuses unknown keys."""
    schema = bench_schema()
    jsonschema.Draft202012Validator.check_schema(schema)
    check = jsonschema.Draft202012Validator(schema)
    for path in EXAMPLES:
        texts = yaml.load(path.read_text(encoding="utf-8"), Loader=yaml.BaseLoader)
        check.validate(texts)
        typed = json.loads(json.dumps(yaml.safe_load(path.read_text(encoding="utf-8")), default=str))
        check.validate(typed)
        typed["colour"] = "green"
        assert not check.is_valid(typed)
        texts["supply"]["voltage"] = "25 KV"
        assert not check.is_valid(texts)


LINES = DEMO.split("\n")


@settings(max_examples=60, deadline=None)
@given(st.integers(0, len(LINES) - 1), st.text(max_size=30), st.sampled_from(["replace", "delete", "insert", "value"]))
def test_any_edit_gives_findings_or_a_bench(at: int, text: str, how: str) -> None:
    """Whatever is done to one line, checking ends with findings or a bench; nothing else comes out."""
    lines = list(LINES)
    if how == "replace":
        lines[at] = text
    elif how == "delete":
        del lines[at]
    elif how == "insert":
        lines.insert(at, text)
    else:
        lines[at] = lines[at].partition(":")[0] + ": " + text
    edited = "\n".join(lines)
    findings = check_text("b.yaml", edited)
    for finding in findings:
        assert finding.what
        assert finding.expected or finding.found
        assert 0 <= finding.line <= edited.count("\n") + 2
        assert len(finding.text) < 1000
    if not refused(findings):
        assert bench_from("b.yaml", edited).v_max > 0


@settings(max_examples=60, deadline=None)
@given(st.binary(max_size=200))
def test_any_bytes_are_survived(tmp_path_factory: pytest.TempPathFactory, data: bytes) -> None:
    """Any bytes for a file give findings."""
    path = tmp_path_factory.mktemp("any") / "b.yaml"
    path.write_bytes(data)
    assert refused(check_bench(path))
