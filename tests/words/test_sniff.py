"""Which kind of file a text is."""

import pytest

from hvhost.words.sniff import other_kind, sniff_kind
from tests.plan.conftest import CONFIGS


@pytest.mark.parametrize("kind", ["bench", "plan", "sheet"])
def test_examples_are_known_by_their_first_key(kind: str) -> None:
    """Every example is what its name says."""
    paths = list(CONFIGS.glob(f"*.{kind}.yaml"))
    assert paths
    assert {sniff_kind(path.read_text(encoding="utf-8")) for path in paths} == {kind}


@pytest.mark.parametrize("text", ["", "- plan: x", "  plan: x", "plans: x", "plan", "# plan: x", "plan:x"])
def test_anything_else_is_unknown(text: str) -> None:
    """Only a key at the left margin counts."""
    assert sniff_kind(text) == "unknown"


def test_a_byte_order_mark_hides_nothing() -> None:
    """Some editors put one before the first key."""
    assert sniff_kind("\ufeffplan: x\n") == "plan"


@pytest.mark.parametrize("wanted", ["bench", "plan", "sheet"])
def test_a_file_of_another_kind_is_one_finding(wanted: str) -> None:
    """Not forty missing keys: which kind was expected, which was found."""
    for kind in ("bench", "plan", "sheet"):
        told = other_kind("f.yaml", f"# a comment\n{kind}: x\n", wanted)
        assert [(f.what, f.line) for f in told] == ([] if kind == wanted else [("file", 1)])
    assert other_kind("f.yaml", "x: y\n", wanted) == ()
