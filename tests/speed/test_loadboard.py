"""The board of the loaded scenes: a terminal on which ten thousand pairs a second come once it was greeted."""

import os
import stat

from hvhost.speed.loadboard import LoadBoard
from hvhost.speed.setting import Setting


def test_it_names_its_terminal_and_ends_with_its_context(setting: Setting) -> None:
    """A character device while it lives; a press is taken without an answer."""
    with LoadBoard(setting.bench) as board:
        assert stat.S_ISCHR(os.stat(board.device).st_mode)
        board.press()
    assert board._child.returncode == 0
