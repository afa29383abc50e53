"""What follows a judged block and is not protective: figures, inputs, the runner, the discharge, the second table.

Blocks of one read that tell the same of an energised output are followed as one: the runner's window and the screens
lose nothing by it, and at a high rate most of the work is spared.  Everything else is followed block by block, above
all a discharge, where a mean over several blocks would blur a jump (S6).
"""

from collections.abc import Iterator
from dataclasses import replace
from typing import TYPE_CHECKING

from hvhost.samples.blocks import SampleBlock
from hvhost.supervisor import arming, driving, hearing
from hvhost.supervisor.notes import Measured
from hvhost.supervisor.runs import ActiveRun, Stage
from hvhost.supervisor.states import LIVE, STANDING, LinkState
from hvhost.wire.vocabulary import Inputs, McuState

if TYPE_CHECKING:
    from hvhost.supervisor.core import Core

TOGETHER_MAX = 8  # blocks of one read that are followed as one: a hold's clock looks at least this often
WRAP, HALF = 1 << 32, 1 << 31
# members by names of this module: reading one through its class costs as much as a call, and here it is every block
LOST, ENERGISED, PAUSING = LinkState.LOST, int(McuState.ENERGISED), int(McuState.PAUSING)
ARMED, RUN_LIVE, DISCHARGING = Stage.ARMED, Stage.LIVE, Stage.DISCHARGING
GROUND_OPEN = int(Inputs.GROUND_OPEN)  # plain: IntFlag arithmetic costs a microsecond, here for every block


def catch_up(core: "Core", now_s: float) -> Iterator[bytes]:
    """Follow the blocks that were judged and not followed yet; yield what that puts on the wire."""
    judged = core.judged
    if not judged:
        return
    core.judged = []
    first = judged[0]
    if len(judged) > 1 and all(alike(first, sample) for sample in judged):
        follow(core, judged, now_s)
    else:
        for sample in judged:
            follow(core, [sample], now_s)
    data = core.take_output(now_s)
    if data:
        yield data


def alike(first: SampleBlock, sample: SampleBlock) -> bool:
    """Whether both tell the same of an energised output, with nothing missing and nothing odd."""
    a, b = first.raw, sample.raw
    return (a.state == b.state == ENERGISED and a.event == b.event and a.inputs == b.inputs and a.arc == b.arc
            and a.latched == b.latched and not sample.flags and not first.flags)


def follow(core: "Core", judged: list[SampleBlock], now_s: float) -> None:
    """Everything about judged blocks that is not protective; several are alike and in a row."""
    if core.state.link is LOST:
        return  # the tail of a session that is over; nothing of it is shown or believed
    sample = judged[-1]
    measured = measure(core, judged, now_s)
    hearing.inputs_changed(core, sample.inputs, sample.tick, now_s)
    core.events.told(sample.event)
    if sample.event >= core.events.last and (sample.state, core.state.permission) not in STANDING:
        core.mcu_in(McuState(sample.state), sample.tick, now_s)
    if core.events.waiting:
        hearing.ask_events(core, now_s)
    if sample.latched and not core.state.latched:
        hearing.ask_causes(core)
    core.aftermath.block()
    run = core.run
    if run is not None:
        _follow_run(core, run, sample, measured, now_s)
    _voltage(core, measured, now_s)
    core.settle(now_s)


def measure(core: "Core", judged: list[SampleBlock], now_s: float) -> Measured:
    """Take the blocks' figures and their time; time goes by the wire's ticks, through wraps."""
    sample, first = judged[-1], judged[0]
    tick = sample.raw.tick
    if core.last_tick is not None:
        core.t_s += ((tick - core.last_tick + HALF) % WRAP - HALF) / core.tick_hz
    core.last_tick = tick
    core.sample, core.block_s, core.sampled, core.silent = sample, now_s, True, False
    core.fresh.extend(judged)
    pairs, v, i, top = 0, 0, 0, sample.extremes[1]
    for block in judged:
        pairs += len(block.v)
        v_sum, i_sum = block.sums
        v += v_sum
        i += i_sum
        high = block.extremes[1]
        top = high if high > top else top
    core.measured = measured = Measured(
        index=first.index, tick=first.tick, ticks=pairs * sample.sample_ticks, pairs=pairs,
        volts=core.v_zero + core.v_gain * v / pairs, amps=core.i_zero + core.i_gain * i / pairs,
        volts_max=core.v_zero + core.v_gain * top)
    return measured


def _follow_run(core: "Core", run: ActiveRun, sample: SampleBlock, measured: Measured, now_s: float) -> None:
    stage = run.stage
    if stage is ARMED:
        arming.ask_again(core, run, now_s)
    elif stage is RUN_LIVE and run.outcome is None:
        if sample.state == PAUSING:
            run.arcs = max(run.arcs, sample.arc)  # one that the host saw before the pause makes no event
        run.runner.block(measured)
        driving.drive(core, run, now_s)
    elif stage is DISCHARGING:
        arming.close_when_discharged(core, run, now_s)


def _voltage(core: "Core", measured: Measured, now_s: float) -> None:
    grounded = core.tells_ground and not core.inputs & GROUND_OPEN
    live = core.state.permission in LIVE
    # energised, nothing is claimed that an uncertainty would bound
    u_volts = 0.0 if live else core.bench.voltage.monitor.u(max(0.0, measured.volts))
    voltage = core.discharge.take(core.t_s, measured.volts, u_volts, live=live, grounded=grounded)
    if voltage is not core.state.voltage:
        core.state = replace(core.state, voltage=voltage)
        core.note(now_s, "discharge", voltage=str(voltage), text=core.discharge.text)
