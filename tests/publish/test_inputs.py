"""Inputs by name, and which of them hinder arming."""

from dataclasses import replace
from pathlib import Path
from types import SimpleNamespace
from typing import cast

import pytest

from hvhost.bench.file import load_bench
from hvhost.publish.inputs import INPUTS, input_views
from hvhost.samples.blocks import SampleBlock
from hvhost.supervisor import arming
from hvhost.supervisor.core import Core
from hvhost.supervisor.states import LinkState, Permission, State
from hvhost.wire.vocabulary import Inputs

BENCH = load_bench(Path(__file__).resolve().parents[2] / "configs" / "demo.bench.yaml")
READY = Inputs.INTERLOCK | Inputs.EMERGENCY | Inputs.GROUND_OPEN | Inputs.AUXILIARY | Inputs.POLARITY


def core_with(inputs: Inputs, permission: Permission = Permission.IDLE,
              link: LinkState = LinkState.GREETED) -> Core:
    """A core that has seen a block with these inputs."""
    core = Core(BENCH, 0.0, lambda: 1)
    core.state = State(link=link, permission=permission)
    core.inputs = int(inputs)
    core.sample = cast(SampleBlock, SimpleNamespace(latched=False, event=0))
    return core


def judged(core: Core) -> dict[str, str]:
    """Name -> judgement."""
    return {one.name: str(one.judgement) for one in input_views(core)}


def test_every_input_is_named_once_for_the_mcu_s_bits() -> None:
    """No two rows of one bit are fitted together, and each has words for both states."""
    for bit in {one.bit for one in INPUTS}:
        fitted = [one.fitted for one in INPUTS if one.bit is bit]
        assert len(set(fitted)) == len(fitted)
    assert all(one.on and one.off for one in INPUTS)


@pytest.mark.parametrize("one", [one for one in INPUTS if one.wanted], ids=lambda one: one.name)
def test_what_is_marked_as_hindering_is_what_forbids_arming(one) -> None:
    """The screen's judgement and the supervisor's obstacles agree, input by input."""
    if one.fitted is not None and not BENCH.fitted & one.fitted:
        return
    core = core_with(READY & ~one.bit)
    assert judged(core)[one.name] == "not ok"
    known = len(arming.obstacles(core_with(READY)))
    assert len(arming.obstacles(core)) > known
    assert judged(core_with(READY))[one.name] == "ok"


def test_the_danger_signal_is_dark_before_and_lit_after() -> None:
    """Lit while idle is a power contact that is closed; dark while energised is power lost."""
    lit = READY | Inputs.DANGER
    assert judged(core_with(lit))["danger signal"] == "not ok"
    assert judged(core_with(lit, Permission.HOLD))["danger signal"] == "ok"
    assert judged(core_with(READY, Permission.HOLD))["danger signal"] == "not ok"
    assert judged(core_with(READY, Permission.REQUESTED))["danger signal"] == "ok"


def test_without_a_link_nothing_is_known() -> None:
    """What was last seen is not shown as present."""
    views = input_views(core_with(READY, link=LinkState.LOST))
    assert {one.state for one in views} == {"unknown"}
    bare = Core(replace(BENCH), 0.0, lambda: 1)
    assert {str(one.judgement) for one in input_views(bare)} == {"unknown"}
