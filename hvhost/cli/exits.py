"""Exit codes: what a script may branch on.  The same table is printed by the help of every command."""

PASSED = 0  # done; for a run: every criterion met
FAILED = 1  # a criterion was not met
USAGE = 2  # the command line itself is wrong
NOT_DECIDED = 3  # the run ended but the verdict is open: no specimen seen, uncertainty straddles the limit
TRIPPED = 4  # a latched cut ended the run
REFUSED = 5  # asked for what cannot be done, or a file is refused; nothing was done
CANNOT_CONNECT = 6  # no daemon or no port, busy, forbidden, gone; for a stop: not confirmed
INTERRUPTED = 7  # ended by the operator, by a lost host or board, or by a record that could not be written
FAULT = 70  # a fault of this program; HVHOST_TRACEBACK=1 shows where

MEANINGS: dict[int, str] = {
    PASSED: "done, passed",
    FAILED: "failed",
    USAGE: "usage",
    NOT_DECIDED: "not decided",
    TRIPPED: "tripped",
    REFUSED: "refused, nothing was done",
    CANNOT_CONNECT: "cannot connect, or a stop was not confirmed",
    INTERRUPTED: "interrupted",
    FAULT: "a fault of this program",
}

EPILOG = "exit codes: " + "; ".join(f"{code} {meaning}" for code, meaning in MEANINGS.items())
