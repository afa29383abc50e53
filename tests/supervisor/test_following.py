"""What follows a judged block: together where blocks tell the same, and never at the price of what came before."""

from dataclasses import replace
from typing import Any

import pytest

from hvhost.supervisor import following
from hvhost.supervisor.runs import Outcome
from hvhost.wire.blocks import Block
from hvhost.wire.vocabulary import Cause
from tests.supervisor.lab import Lab, shown


def gathered(lab: Lab, blocks: int) -> bytes:
    """The lines of so many blocks, kept back as a stalled reader finds them."""
    kept: list[bytes] = []
    feed = lab.station.feed
    lab.station.feed = kept.append  # type: ignore[method-assign]
    lab.pass_s(blocks * 0.032)
    lab.station.feed = feed  # type: ignore[method-assign]
    return b"".join(kept)


def over(block: Block) -> Block:
    """The block with every current readback above the trip level."""
    return replace(block, codes=tuple(20_000 if at % 2 else code for at, code in enumerate(block.codes)))


def test_blocks_before_a_verdict_are_followed_before_the_run_is_ended(lab: Lab,
                                                                      monkeypatch: pytest.MonkeyPatch) -> None:
    """The stop leaves first; then the earlier blocks reach the runner, and only then the run has tripped."""
    core = lab.energise().held().core
    order: list[str] = []
    run = lab.run
    block, end = type(run.runner).block, type(run).end
    monkeypatch.setattr(type(run.runner), "block", lambda self, m: (order.append("block"), block(self, m))[1])
    monkeypatch.setattr(type(run), "end", lambda self, *a: (order.append("end"), end(self, *a))[1])
    data = gathered(lab, 4)
    lines = [line + b"\n" for line in data.split(b"\n") if line.startswith(b"b ")]
    assert len(lines) >= 3
    lines[-1] = shown(over)(lines[-1])
    pieces = core.receive(b"".join(lines), lab.now_s)
    first = next(piece for piece in pieces if b"cut" in piece)
    assert first
    assert order == [], "the stop is out before anything else is looked at"
    list(pieces)
    assert order.index("block") < order.index("end")
    assert run.outcome is Outcome.TRIPPED


def test_only_an_energised_output_is_followed_in_one(lab: Lab) -> None:
    """S6 looks at every block of a discharge by itself: a mean over several would blur a jump."""
    lab.energise().held()
    alike = following.alike
    live = lab.core.sample
    assert live is not None
    assert alike(live, live)
    lab.ask("cut")
    lab.until(lambda: lab.cut() and lab.core.sample is not None and lab.core.sample.state == 0)
    off = lab.core.sample
    assert off is not None
    assert not alike(off, off)


@pytest.mark.parametrize("where", ["follow", "settle"])
def test_a_fault_of_ours_behind_the_judgement_cuts(lab: Lab, monkeypatch: pytest.MonkeyPatch, where: str) -> None:
    """A core that cannot follow must not keep a bench energised by renewing its lease."""
    lab.energise().held()

    def broken(*_: Any) -> None:
        raise ArithmeticError("planted")

    if where == "follow":
        monkeypatch.setattr(following, "follow", broken)
    else:
        monkeypatch.setattr(type(lab.core), "settle", broken)
    lab.pass_s(0.2)
    assert lab.cut()
    assert lab.board.mcu.latched & Cause.HOST_RULE
    assert any("ArithmeticError" in line.text for line in lab.core.log)
