"""``hvhost cut`` as a module: light, documented, and what the command table needs."""

from hvhost.cli import cut


def test_the_command_says_in_a_line_what_it_does() -> None:
    """The overview of commands has one line for it."""
    assert "cut" in cut.HELP
    assert "\n" not in cut.HELP
