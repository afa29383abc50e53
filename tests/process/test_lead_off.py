"""A run without a specimen proves nothing, whatever its plan says."""

import pytest

from tests.process.scene import QUICK, Scene, plan_text

SHEET = """\
sheet: Scenario
specimen: S-1
operator: scenario
connected:
  capacitance: {from: 100 pF, to: 2 nF}
confirmed: {polarity: positive, grounded_while_connecting: yes, ground_removed: yes, area_clear: yes}
"""


@pytest.mark.parametrize("lead", ["on", "off"])
def test_lead(lead: str) -> None:
    """With the lead on the plan passes; with it off it is not decided, since no specimen was seen."""
    with Scene() as scene:
        scene.start_standin(*(("--fault", "lead-off") if lead == "off" else ()))
        scene.start_daemon()
        scene.ready()
        scene.energise(plan_text(QUICK), sheet=SHEET)
        status = scene.wait_closed()
        assert status["outcome"] == "finished", status
        verdict = scene.result()["verdict"]
        assert verdict == ("not decided" if lead == "off" else "pass"), scene.result()
