"""The service unit: what it promises fits the program, and the service manager's own tools find nothing wrong."""

import os
import re
import shutil
import subprocess
import sys
from pathlib import Path

import pytest
from pydantic import ValidationError

from hvhost.bench.document import LowerBlock
from hvhost.cli import exits
from hvhost.daemon import LAST_LOWER_S
from hvhost.ports.scheduling import LOOP_PRIORITY
from hvhost.publish.life import SLACK_S

CONFIGS = Path(__file__).parent.parent / "configs"
UNIT = CONFIGS / "hvhost-bench@.service"
DROP_IN = CONFIGS / "hvhost-bench@.service.d" / "hardening.conf"
LONGEST_LOWER_S = 60.0  # PROTOCOL.md: lower_max is at most 60 s
EXPOSED_AT_MOST = 2.5  # of 10: what systemd calls OK


def settings(path: Path) -> dict[str, list[str]]:
    """Every key of a unit file with its values in order."""
    found: dict[str, list[str]] = {}
    for line in path.read_text(encoding="utf-8").splitlines():
        key, equals, value = line.partition("=")
        if equals and not line.startswith("#"):
            found.setdefault(key, []).append(value)
    return found


UNIT_SAYS = settings(UNIT)


def one(key: str) -> str:
    """The only value of a key."""
    (value,) = UNIT_SAYS[key]
    return value


def test_it_is_ready_when_it_says_so_and_watched_from_then_on() -> None:
    """Type=notify, keep-alives from the main process only, a time that a loaded machine's loop keeps."""
    assert one("Type") == "notify"
    assert one("NotifyAccess") == "main"
    assert 5.0 <= float(one("WatchdogSec")) <= 30.0
    assert one("WatchdogSignal") == "SIGABRT"  # faulthandler tells where the loop stood


def test_a_stop_may_take_longer_than_the_longest_lower() -> None:
    """TimeoutStopSec is longer than `lower_max` may be plus what the daemon adds, and it is asked for more later."""
    LowerBlock.model_validate({"slew": "1 kV/s", "longest": f"{LONGEST_LOWER_S:g} s"})
    with pytest.raises(ValidationError):
        LowerBlock.model_validate({"slew": "1 kV/s", "longest": f"{LONGEST_LOWER_S + 1:g} s"})
    assert float(one("TimeoutStopSec")) > LONGEST_LOWER_S + LAST_LOWER_S
    assert SLACK_S > LAST_LOWER_S
    assert one("KillMode") == "mixed"  # the process that closes the record works on
    assert one("KillSignal") == "SIGTERM"


def test_it_is_started_again_but_not_where_that_mends_nothing() -> None:
    """A refused file and a wrong command line stay as they are; a daemon that went away is passive when it is back."""
    assert one("Restart") == "on-failure"
    assert {int(code) for code in one("RestartPreventExitStatus").split()} == {exits.USAGE, exits.REFUSED}
    assert one("StartLimitIntervalSec") == "0"


def test_what_it_runs_exists() -> None:
    """Every option of the command is one that `serve` knows, and the priority that it asks for is permitted."""
    program, command, *words = one("ExecStart").split()
    assert (program, command) == ("/usr/local/bin/hvhost", "serve")
    text = subprocess.run([sys.executable, "-m", "hvhost", "serve", "--help"],
                          capture_output=True, text=True, check=True).stdout
    for word in words:
        if word.startswith("--"):
            assert re.search(rf"{word}\b", text), word
    assert int(one("LimitRTPRIO")) == LOOP_PRIORITY


def tool() -> str:
    """systemd-analyze; a reason to skip where there is none, and a failure where there must be one."""
    found = shutil.which("systemd-analyze")
    if found is None:
        if os.environ.get("HVHOST_CI") == "1":
            pytest.fail("systemd-analyze is missing: install systemd")
        pytest.skip("systemd-analyze is not on this machine")
    return found


@pytest.fixture
def installed(tmp_path: Path) -> Path:
    """The unit as an instance would be read, its program one that exists."""
    text = UNIT.read_text(encoding="utf-8").replace("/usr/local/bin/hvhost", "/bin/true")
    (tmp_path / UNIT.name).write_text(text, encoding="utf-8")
    shutil.copytree(DROP_IN.parent, tmp_path / DROP_IN.parent.name)
    return tmp_path / "hvhost-bench@demo.service"


def test_the_service_manager_reads_it_without_a_word(installed: Path) -> None:
    """`systemd-analyze verify`: no unknown key, no value out of form, in the unit and in its drop-in."""
    told = subprocess.run([tool(), "verify", "--man=no", str(installed)], capture_output=True, text=True, check=False)
    mine = [line for line in (told.stdout + told.stderr).splitlines() if "hvhost" in line or "hardening" in line]
    assert (mine, told.returncode) == ([], 0)


def test_a_key_that_it_does_not_know_would_be_told(installed: Path) -> None:
    """The check above bites."""
    drop_in = installed.parent / DROP_IN.parent.name / DROP_IN.name
    drop_in.write_text(DROP_IN.read_text(encoding="utf-8") + "\nProtectEverything=yes\n", encoding="utf-8")
    told = subprocess.run([tool(), "verify", "--man=no", str(installed)], capture_output=True, text=True, check=False)
    assert "ProtectEverything" in told.stdout + told.stderr


def test_it_exposes_little(installed: Path) -> None:
    """`systemd-analyze security`: unit and drop-in together."""
    told = subprocess.run([tool(), "security", "--offline=true", "--no-pager", str(installed)], capture_output=True,
                          text=True, check=False)
    if "unrecognized option" in told.stderr:
        pytest.skip("this systemd-analyze judges no unit that is not loaded")
    found = re.search(r"exposure level for .*: ([0-9.]+)", told.stdout)
    assert found is not None, told.stderr
    assert float(found.group(1)) <= EXPOSED_AT_MOST
