"""The whole tree: the standard's spellings lead to it, and the printed table is the table."""

import json
import subprocess
import sys

import pytest

from hvhost.publish.instrument.commands import TREE, command_table
from hvhost.publish.instrument.errors import ScpiError
from hvhost.publish.instrument.tree import nodes_of, short_form

# Keyword paths of SCPI-99 volume 2 (from memory; the protection and output nodes also seen in many public drivers).
PATHS = [
    "VOLT", "SOUR:VOLT", "SOURce:VOLTage:LEVel:IMMediate:AMPLitude", "VOLTage:LEVel", "VOLT:IMM", "VOLT:AMPL",
    "VOLTage:LIMit", "VOLT:LIM:AMPL", "VOLTage:SLEW", "CURR", "SOURce:CURRent:LEVel:IMMediate:AMPLitude", "CURR:LIM",
    "OUTP", "OUTPut:STATe", "OUTP1", "OUTPut:PROTection:CLEar", "STATus:PRESet", "STAT:OPER:ENAB",
    "STATus:QUEStionable:PTRansition", "SYSTem:LOCK:RELease"]
QUERIES = [
    "VOLT", "VOLTage:PROTection:LEVel", "VOLT:PROT", "VOLTage:PROTection:TRIPped", "VOLT:PROT:STAT", "OUTP",
    "CURRent:PROTection:TRIPped", "OUTPut:PROTection:TRIPped", "MEAS:VOLT", "MEASure:SCALar:VOLTage:DC", "MEAS:CURR",
    "MEASure:CURRent:DC", "SYST:ERR", "SYSTem:ERRor:NEXT", "SYST:VERS", "STAT:OPER", "STATus:OPERation:EVENt",
    "STAT:QUES:COND", "SYSTem:LOCK:OWNer", "SYSTem:LOCK:REQuest", "OUTPut:POLarity"]


def _header(path: str) -> tuple[str, ...]:
    return tuple(path.upper().split(":"))


@pytest.mark.parametrize("path", PATHS)
def test_the_standards_paths_lead_to_commands(path: str) -> None:
    """In long and short form."""
    assert TREE.find(_header(path), query=False).act is not None


@pytest.mark.parametrize("path", QUERIES)
def test_the_standards_paths_lead_to_queries(path: str) -> None:
    """In long and short form."""
    assert TREE.find(_header(path), query=True).query is not None


@pytest.mark.parametrize("path", ["VOLTA", "VOL", "VOLT:RANG", "OUTPU", "MEAS", "SYST", "STAT:OPER:EVENTS", "SOUR",
                                  "OUTP:STATUS", "STATE:OPER", "OUTP:PROT:STAT", "OUTP:CLE"])
def test_everything_else_is_undefined(path: str) -> None:
    """Nothing between the two forms, nothing that is not in the table."""
    for query in (False, True):
        with pytest.raises(ScpiError):
            TREE.find(_header(path), query=query)


def test_every_mnemonic_obeys_the_standards_rule() -> None:
    """Capitals are the short form; long forms have at most twelve letters."""
    for command in TREE.commands:
        if not command.pattern.startswith("*"):
            for node in nodes_of(command.pattern):
                assert node.forms[0] == short_form(node.long), node.long
                assert len(node.long) <= 12


def test_the_printed_table_has_every_command() -> None:
    """``hvhost schema instrument`` prints the code's own table, and the other kinds stay JSON."""
    printed = subprocess.run([sys.executable, "-m", "hvhost", "schema", "instrument"], capture_output=True, text=True,
                             timeout=60, check=True)
    assert printed.stdout.strip() == command_table().strip()
    assert all(f"| `{command.pattern}` |" in printed.stdout for command in TREE.commands)
    sheet = subprocess.run([sys.executable, "-m", "hvhost", "schema", "sheet"], capture_output=True, text=True,
                           timeout=60, check=True)
    assert json.loads(sheet.stdout)["title"]
