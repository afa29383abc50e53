"""Exit codes."""

from hvhost.cli import exits
from hvhost.words import errors


def test_every_code_has_a_meaning_and_no_two_are_equal() -> None:
    """The help lists each code once."""
    codes = [value for name, value in vars(exits).items() if name.isupper() and isinstance(value, int)]
    assert len(set(codes)) == len(codes)
    assert sorted(codes) == sorted(exits.MEANINGS)
    assert all(f"{code} {meaning}" in exits.EPILOG for code, meaning in exits.MEANINGS.items())


def test_the_errors_agree_with_the_table() -> None:
    """An error that reaches a command's end has the code that the table names."""
    assert errors.UsageFault.exit_code == exits.USAGE
    assert errors.CommandRefused.exit_code == errors.FileFault.exit_code == exits.REFUSED
    assert errors.CannotConnect.exit_code == exits.CANNOT_CONNECT
    assert errors.RecordFault.exit_code == exits.INTERRUPTED
