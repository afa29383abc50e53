"""The table of rules."""

from hvhost.guard.rules import ENERGISED, EVERY, LIVE, POWERED, RULES, SLOT, WORDS_OUT
from hvhost.wire.vocabulary import HostRule, McuState


def test_every_host_rule_of_the_guard_has_one_line() -> None:
    """Each rule number that a guard may send stands once; the others belong to the supervisor and the recorder."""
    numbers = [rule.number for rule in RULES]
    assert len(numbers) == len(set(numbers)) == len(SLOT)
    assert set(HostRule) - set(numbers) == {HostRule.OPERATOR, HostRule.UNCONFIRMED, HostRule.RECORDER,
                                            HostRule.ASSERTION, HostRule.DISAGREEMENT}


def test_rules_live_where_they_make_sense() -> None:
    """Off and requested know only the stream; energised knows every rule."""
    live = {state: {RULES[at].number for at, _ in LIVE[state]} for state in McuState}
    assert live[McuState.OFF] == live[McuState.REQUESTED] == {HostRule.GAP, HostRule.STALE}
    assert live[McuState.ENERGISED] == {rule.number for rule in RULES}
    assert HostRule.BREAKDOWN not in live[McuState.PAUSING] | live[McuState.WARNING]
    assert {HostRule.BREAKDOWN, HostRule.OVERCURRENT, HostRule.OVERVOLTAGE, HostRule.INTERLOCK} <= live[
        McuState.LOWERING]
    assert HostRule.DEVIATION not in live[McuState.LOWERING]
    assert len(EVERY) == len(RULES)
    assert ENERGISED < WORDS_OUT < POWERED
