"""The contributors' guide says what the tables say."""

from pathlib import Path

from hvhost.supervisor.states import diagram

ROOT = Path(__file__).parent.parent


def test_the_diagram_in_the_guide_is_printed_from_the_tables() -> None:
    """A change of the tables without a change of the guide fails here."""
    assert f"```\n{diagram()}```" in (ROOT / "DEVELOPERS.md").read_text(encoding="utf-8")


def test_every_place_that_the_guide_names_exists() -> None:
    """A guide that points nowhere helps nobody."""
    text = (ROOT / "DEVELOPERS.md").read_text(encoding="utf-8")
    places = {word.strip("`,;.()") for word in text.split() if word.startswith("`tests/")}
    assert places
    for place in places:
        assert (ROOT / place).exists(), place
