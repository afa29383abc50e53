"""The MCU's inputs and read-backs by name, in words, and which of them hinder arming."""

from typing import NamedTuple

from hvhost.publish.snapshot import InputJudgement, InputView
from hvhost.supervisor import states as st
from hvhost.supervisor.core import Core
from hvhost.wire.vocabulary import Fitted, Inputs


class Named(NamedTuple):
    """One input: its bit, what must be fitted (None: always), name, words for set and clear, what arming needs.

    ``wanted`` is the bit's value without which nothing can be armed; None: arming does not ask.
    """

    bit: Inputs
    fitted: Fitted | None
    name: str
    on: str
    off: str
    wanted: bool | None


INPUTS: tuple[Named, ...] = (
    Named(Inputs.INTERLOCK, None, "interlock", "closed", "open", True),
    Named(Inputs.EMERGENCY, Fitted.EMERGENCY, "emergency contact", "closed", "open", True),
    Named(Inputs.GROUND_OPEN, Fitted.GROUND_STICK, "grounding stick", "on its hook", "not on its hook", True),
    Named(Inputs.GROUND_OPEN, Fitted.GROUND_SWITCH, "grounding switch", "open position", "not in its open position",
          True),
    Named(Inputs.DANGER, Fitted.DANGER, "danger signal", "lit", "dark", False),
    Named(Inputs.AUXILIARY, Fitted.AUXILIARY, "auxiliary supplies", "good", "low", True),
    Named(Inputs.POLARITY, Fitted.POLARITY, "polarity contact", "agrees", "disagrees", True),
    Named(Inputs.ARM_INPUT, Fitted.ARM_INPUT, "arm input", "pressed", "not pressed", None),
    Named(Inputs.RELAY_BACK, Fitted.RELAY_BACK, "power relay", "closed", "open", None),
    Named(Inputs.INHIBIT_BACK, Fitted.INHIBIT_BACK, "inhibit", "asserted", "released", None),
)
LIT = frozenset({st.Permission.WARNING, *st.LIVE})


def input_views(core: Core) -> tuple[InputView, ...]:
    """Return what is fitted on this bench, in the table's order; all unknown without a link and a block.

    The danger signal must be dark before an arm (a power contact that is closed then is a fault) and lit from the
    warning to the cut; between the press and the warning it changes and is judged by the MCU's proving alone.
    """
    known = core.sample is not None and core.state.link in (st.LinkState.GREETED, st.LinkState.OBSERVE)
    return tuple(_view(core, one, known) for one in INPUTS
                 if one.fitted is None or core.bench.fitted & one.fitted)


def _view(core: Core, one: Named, known: bool) -> InputView:
    on = bool(core.inputs & one.bit)
    if not known:
        return InputView(name=one.name, state="unknown", judgement=InputJudgement.UNKNOWN)
    wanted = one.wanted
    if one.bit is Inputs.DANGER and core.state.permission is not st.Permission.IDLE:
        wanted = True if core.state.permission in LIT else None
    judgement = InputJudgement.OK if wanted is None or on is wanted else InputJudgement.NOT_OK
    return InputView(name=one.name, state=one.on if on else one.off, judgement=judgement)
