"""What every measurement is handed: the example bench, a private folder, how long it may take, whom to tell."""

from dataclasses import dataclass, field
from pathlib import Path

from hvhost.record.recorder import InlineRecorder
from hvhost.speed.figures import BLOCKS, PER_BLOCK, Say
from hvhost.speed.scene import Scene, catch


@dataclass(slots=True, kw_only=True)
class Setting:
    """``blocks`` blocks of ``per_block`` calls a side; ``minutes`` for the figures that need patience."""

    bench: Path
    folder: Path
    minutes: float
    say: Say = lambda text: None
    blocks: int = BLOCKS
    per_block: int = PER_BLOCK
    _scene: Scene | None = field(default=None)
    _made: int = 0

    @property
    def scene(self) -> Scene:
        """The energised run in memory, caught on first use: long enough for a ramp of all blocks."""
        if self._scene is None:
            self.say("an energised run in memory")
            ramp_s = max(2.0, self.blocks * self.per_block * 0.032 + 2.0)
            self._scene = catch(self.bench, self.place(), InlineRecorder.open, ramp_s=ramp_s)
        return self._scene

    def place(self) -> Path:
        """A new empty folder."""
        self._made += 1
        path = self.folder / f"{self._made:03d}"
        path.mkdir(parents=True)
        return path
