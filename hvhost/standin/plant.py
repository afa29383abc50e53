"""The plant in one object: supply, cable, specimen, measuring chain, contacts, faults.

Interface towards the MCU (time in seconds, forward only):

``advance(dt_s, v_cmd, i_cmd)``  let ``dt_s`` pass with these volts at the programming inputs
                                 (``word * params.v_dac.volts_per_code``); any dt_s > 0, 0.1 ms to 10 ms sensible
``drive(inhibit=, clear=, relay=)``  the MCU's outputs; True, True, False is what the wiring does without an MCU
``inputs() -> int``              physical bits of ``vocabulary.Inputs`` (not LEASE, not PROVEN)
``sample() -> (v_raw, i_raw)``   one conversion of both monitors, raw integer codes
``events``                       list of ``PlantEvent`` since last cleared by the owner: check truth, then ``clear()``
``v_true, i_true``               volts at the specimen and amps in the return now (oriented), ``power``: supply powered
``faults``                       the ``FaultBook``; ``faults.active`` maps name to value, ``faults.version`` counts changes
``press(seconds)``, ``interlock(closed)``, ``emergency(closed)``, ``ground(on)``, ``outside_reset()``: acts at the bench
"""

from dataclasses import dataclass


@dataclass(frozen=True, slots=True, kw_only=True)
class PlantEvent:
    """Something that happened in the plant: true time, kind ('arc', 'quench', 'fault on', ...), detail."""

    t_s: float
    kind: str
    detail: str = ""
    value: float = 0.0
