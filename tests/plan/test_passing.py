"""What a preflight hands on."""

from dataclasses import replace

from hvhost.plan.passing import Preflight, text_hash
from hvhost.plan.program import Program
from hvhost.words.findings import Finding, Grade

PROGRAM = Program(kind="direct", title="t", steps=(), v_highest=1.0, i_highest=1.0, duration_s=1.0)


def finding(grade: Grade) -> Finding:
    """A finding of some grade."""
    return Finding(grade=grade, file="f", line=1, what="w")


def test_hash_is_the_published_one() -> None:
    """SHA-256 of 'abc' (FIPS 180-2, appendix B.1)."""
    assert text_hash("abc") == "ba7816bf8f01cfea414140de5dae2223b00361a396177a9cb410ff61f20015ad"


def test_only_a_refusal_stops() -> None:
    """Reasons and notes pass; a refusal does not, and neither does a missing program."""
    passing = Preflight(findings=(finding(Grade.REASON), finding(Grade.NOTE)), program=PROGRAM)
    assert passing.passed
    assert passing.reasons == (finding(Grade.REASON),)
    assert not replace(passing, findings=(finding(Grade.REFUSE),)).passed
    assert not replace(passing, program=None).passed


def test_digest_depends_on_each_hash_and_not_on_their_order() -> None:
    """One number stands for the four."""
    first = Preflight(findings=(), program=PROGRAM, hashes={"plan": "1", "sheet": "2"})
    assert first.digest == replace(first, hashes={"sheet": "2", "plan": "1"}).digest
    assert first.digest != replace(first, hashes={"plan": "2", "sheet": "1"}).digest
