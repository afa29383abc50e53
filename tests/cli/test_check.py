"""``hvhost check``: every fault in one go, silent on what is right."""

import json
from pathlib import Path

import pytest

from hvhost.cli import check, exits

CONFIGS = Path(__file__).parents[2] / "configs"
SETS = {"demo": "demo", "withstand": "demo", "leakage": "demo", "stepvoltage": "demo", "breakdown": "demo"}


@pytest.mark.parametrize("path", sorted(CONFIGS.glob("*.yaml")), ids=lambda path: path.name)
def test_examples_are_silent(path: Path, capsys: pytest.CaptureFixture[str]) -> None:
    """Each example file alone: nothing to say, 0."""
    assert check.run([str(path)]) == exits.PASSED
    told = capsys.readouterr()
    assert told.out + told.err == ""


@pytest.mark.parametrize("name", sorted(SETS))
def test_example_sets_are_silent(name: str, capsys: pytest.CaptureFixture[str]) -> None:
    """Bench, plan and sheet of an example fit together, silently."""
    files = [CONFIGS / f"{SETS[name]}.bench.yaml", CONFIGS / f"{name}.plan.yaml", CONFIGS / f"{name}.sheet.yaml"]
    assert check.run([str(path) for path in files]) == exits.PASSED
    told = capsys.readouterr()
    assert told.out + told.err == ""


def test_every_fault_of_every_file(tmp_path: Path, capsys: pytest.CaptureFixture[str]) -> None:
    """Faults of several files are told together, each with file and line, and as JSON."""
    bench = tmp_path / "b.yaml"
    text = (CONFIGS / "demo.bench.yaml").read_text(encoding="utf-8")
    bench.write_text(text.replace("voltage: 25 kV", "voltage: 25,0 kV", 1)
                     .replace("polarity: positive", "polarity: up", 1), encoding="utf-8")
    plan = tmp_path / "p.yaml"
    plan.write_text((CONFIGS / "demo.plan.yaml").read_text(encoding="utf-8").replace("rate: 4 kV/s", "rate: 4 kV"),
                    encoding="utf-8")
    missing, other = tmp_path / "none.yaml", tmp_path / "o.yaml"
    other.write_text("what: ever\n", encoding="utf-8")
    words = [str(bench), str(plan), str(missing), str(other)]
    assert check.run([*words, "--json"]) == exits.REFUSED
    found = [json.loads(line) for line in capsys.readouterr().out.splitlines()]
    names = ("b.yaml", "p.yaml", "none.yaml", "o.yaml")
    by_file = {name: [f for f in found if f["file"].endswith(name)] for name in names}
    assert len(by_file["b.yaml"]) >= 2
    assert all(f["line"] for f in by_file["b.yaml"] + by_file["p.yaml"])
    assert by_file["p.yaml"]
    assert by_file["none.yaml"]
    assert by_file["o.yaml"]
    assert check.run(words) == exits.REFUSED
    assert "Traceback" not in capsys.readouterr().err


def test_a_calibration_that_has_run_out_is_told(tmp_path: Path, capsys: pytest.CaptureFixture[str]) -> None:
    """The bench file alone and the three together: a reason will be needed, nothing is refused."""
    bench = tmp_path / "b.yaml"
    bench.write_text((CONFIGS / "demo.bench.yaml").read_text(encoding="utf-8").replace("2099-12-31", "2020-01-01"),
                     encoding="utf-8")
    for more in ([], [str(CONFIGS / "demo.plan.yaml"), str(CONFIGS / "demo.sheet.yaml")]):
        assert check.run([str(bench), *more]) == exits.PASSED
        told = capsys.readouterr().out.splitlines()
        assert len(told) == 1
        assert "reason needed: calibration.valid_until" in told[0]
        assert "2020-01-01" in told[0]


def test_a_file_in_another_encoding_says_so(tmp_path: Path, capsys: pytest.CaptureFixture[str]) -> None:
    """UTF-16 is no file of an unknown kind: save it as UTF-8."""
    bench = tmp_path / "b.yaml"
    bench.write_bytes((CONFIGS / "demo.bench.yaml").read_text(encoding="utf-8").encode("utf-16"))
    assert check.run([str(bench)]) == exits.REFUSED
    assert "expected text in UTF-8, found byte 0xFF; save the file as UTF-8" in capsys.readouterr().err


def test_an_endless_file_is_refused_after_its_first_piece(capsys: pytest.CaptureFixture[str]) -> None:
    """Reading is bounded, whatever the path leads to."""
    assert check.run(["/dev/zero"]) == exits.REFUSED
    assert "expected at most 256 KiB, found more than 1024 KiB" in capsys.readouterr().err
