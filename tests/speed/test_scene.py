"""The scene: a run that is caught once brings every fresh station to the same place."""

from hvhost.record.recorder import InlineRecorder
from hvhost.speed.setting import Setting
from hvhost.supervisor.states import Permission


def test_a_fresh_station_comes_to_the_same_ramp_and_hold(setting: Setting) -> None:
    """The core decides by bytes and time alone: the same things handed over lead to the same state."""
    scene = setting.scene
    for entry, permission in ((scene.ramp, Permission.RAMP), (scene.hold, Permission.HOLD)):
        player = scene.player(entry, setting.place(), InlineRecorder.open)
        assert player.station.core.state.permission is permission
        player.close()


def test_the_hold_goes_on_as_long_as_asked_without_a_verdict(setting: Setting) -> None:
    """Made blocks count on where the caught ones ended, and no rule has anything to say about them."""
    scene = setting.scene
    player = scene.player(scene.hold, setting.place(), InlineRecorder.open)
    before = player.station.core.assembler.counters.pairs if player.station.core.assembler else 0
    player.go(list(scene.further(400)))
    core = player.station.core
    assert core.state.permission is Permission.HOLD
    assert core.assembler is not None
    assert core.assembler.counters.pairs == before + 400 * 32
    assert (core.assembler.counters.gaps, core.assembler.counters.off_beat, core.assembler.counters.stale) == (0, 0, 0)
    player.close()
