"""Real-time scheduling of the thread that runs the event loop, where the system permits it.

Only this thread is raised: children of the daemon and threads that begin later are reset to the ordinary scheduler
(SCHED_RESET_ON_FORK), so that an export never competes with the loop at its own rank.  The recorder's thread is
raised too, one rank lower: it holds the interpreter while it packs, and an ordinary thread that is not run while it
holds the interpreter would keep the loop waiting however high the loop stands.
"""

import os
import threading

LOOP_PRIORITY = 20  # above ordinary work, below the kernel's own threads (50)
HELPER_PRIORITY = LOOP_PRIORITY - 1


def take_realtime() -> str:
    """Raise the calling thread; returns '' or why the system refused, with the remedy."""
    return _raised(0, LOOP_PRIORITY)


def raise_thread(thread: threading.Thread | None) -> str:
    """Raise a thread that works for the loop; returns '' or why the system refused."""
    if thread is None or thread.native_id is None:
        return ""
    return _raised(thread.native_id, HELPER_PRIORITY)


def give_back() -> None:
    """Return the calling thread to the ordinary scheduler."""
    os.sched_setscheduler(0, os.SCHED_OTHER, os.sched_param(0))


def _raised(task: int, priority: int) -> str:
    try:
        os.sched_setscheduler(task, os.SCHED_FIFO | os.SCHED_RESET_ON_FORK, os.sched_param(priority))
    except (OSError, AttributeError) as error:
        reason = getattr(error, "strerror", None) or "this system has none"
        return f"{reason}; permit it with LimitRTPRIO={LOOP_PRIORITY} in the unit, or 'ulimit -r {LOOP_PRIORITY}'"
    return ""
