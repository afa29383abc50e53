"""Records made for tests: a scripted bench (RC charging, leakage, one breakdown) written by the real recorder."""

import random
from dataclasses import dataclass, field
from pathlib import Path
from typing import Any

from hvhost.record.entries import AnchorEntry, Content, LineEntry, Outcome, SentEntry
from hvhost.record.folder import RunFolder
from hvhost.record.meta import RecordedScale, RunMeta, note, step_note
from hvhost.record.recorder import InlineRecorder
from hvhost.wire.frames import Block, McuEvent, Renew, encode_answer, encode_request
from hvhost.wire.lines import seal
from hvhost.wire.vocabulary import Cause, CutWhy, EventKind, McuState

OPENED_NS = 1_800_000_000_000_000_000  # 2027-01-15T08:00:00Z
OPENED_S = 100.0
V_GAIN, I_GAIN = 27_500.0 / 32_768, 4.4e-3 / 32_768
V_SCALE = RecordedScale(gain=V_GAIN, zero=12.0, u_gain=0.003, u_zero=5.0, code_low=-32_768, code_high=32_767)
I_SCALE = RecordedScale(gain=I_GAIN, zero=-7.0, u_gain=0.003, u_zero=0.2e-6, code_low=-32_768, code_high=32_767)
V_WORD = RecordedScale(gain=25_000.0 / 65_536, zero=0.0, u_gain=0.003, u_zero=5.0, code_low=0, code_high=65_535)
I_WORD = RecordedScale(gain=4e-3 / 65_536, zero=0.0, u_gain=0.003, u_zero=1e-6, code_low=0, code_high=65_535)
TAG = 0xC0FFEE42
OWN_F = 500e-12


def made_meta(**changes: Any) -> RunMeta:
    """Return a META with plausible values."""
    values: dict[str, Any] = {
        "run": "0007", "tag": TAG, "kind": "plan", "opened_utc_ns": OPENED_NS, "opened_mono_s": OPENED_S,
        "operator": "operator A", "polarity": -1, "tick_hz": 10_000.0, "sample_ticks": 10, "signs": "ss",
        "voltage": V_SCALE, "current": I_SCALE, "v_program": V_WORD, "i_program": I_WORD,
        "bench": {"file": "bench.yaml", "text": "bench: x\n" * 200, "title": "test bench", "own_f": OWN_F, "own_s": 0.0,
                  "bandwidth_hz": 160.0},
        "plan": {"file": "plan.yaml", "title": "withstand"}, "sheet": {"specimen": "S-1"},
        "hashes": {"plan": "a" * 64, "bench": "b" * 64}, "settings": (1, 2, 3), "greeting": {"fw": "standin"},
        "program": None, **changes}
    return RunMeta(**values)


@dataclass(slots=True)
class Scripted:
    """Writes a run as a bench would have given it: oriented volts and amps in, blocks out."""

    recorder: Any
    pairs: int = 32
    noise: float = 2.5  # codes, standard deviation
    seed: int = 1
    index: int = 0
    event: int = 10
    arc: int = 0
    state: int = McuState.ENERGISED
    contents: list[Content] = field(default_factory=list)
    _random: random.Random = field(default_factory=random.Random)
    _codes: list[int] = field(default_factory=list)
    _renewed: int = 0

    def __post_init__(self) -> None:
        self._random.seed(self.seed)

    @property
    def tick(self) -> int:
        """Tick of the next pair."""
        return self.index * 10

    @property
    def t_s(self) -> float:
        """Host time of the next pair."""
        return OPENED_S + self.index / 1000.0

    @property
    def utc_ns(self) -> int:
        """UTC of the next pair."""
        return OPENED_NS + self.index * 1_000_000

    def put(self, content: Content) -> None:
        """Write any entry."""
        self.recorder.put(content)

    def pair(self, volts: float, amps: float, set_v: float = 0.0) -> None:
        """Take one pair; a full block is written."""
        gauss = self._random.gauss
        v = round(volts / V_GAIN + 12.0 + gauss(0.0, self.noise))
        i = round(amps / I_GAIN - 7.0 + gauss(0.0, self.noise))
        self._codes += [max(-32_768, min(32_767, v)), max(-32_768, min(32_767, i))]
        self.index += 1
        if len(self._codes) == 2 * self.pairs:
            self.flush(set_v)

    def flush(self, set_v: float = 0.0) -> None:
        """Write the block begun so far."""
        count = len(self._codes) // 2
        if not count:
            return
        first = self.index - count
        block = Block(first, first * 10, round(set_v / V_WORD.gain), 60_000, self.state, 0, 0x6FF, 0, self.event,
                      self.arc, tuple(self._codes))
        self._codes.clear()
        arrival_s = self.t_s + 0.0012 + abs(self._random.gauss(0.0, 2e-4))
        self.recorder.put_block(arrival_s, block)
        if self.index - self._renewed >= 62:
            self._renewed = self.index
            self.put(SentEntry(arrival_s + 5e-4, seal(encode_request(Renew(session=0x1234ABCD, index=self.index - 1)))))

    def skip(self, pairs: int) -> None:
        """Lose pairs, between blocks."""
        self.flush()
        self.index += pairs

    def mcu(self, kind: EventKind, a: int = 0, b: int = 0, tick: int | None = None) -> None:
        """Write an MCU event."""
        self.event += 1
        event = McuEvent(number=self.event, tick=(self.tick if tick is None else tick) & 0xFFFFFFFF, kind=kind.value,
                         a=a, b=b)
        self.put(LineEntry(self.t_s, encode_answer(event)))

    def anchor(self) -> None:
        """Write a point of the time base."""
        self.put(AnchorEntry(self.tick, self.t_s, self.utc_ns))

    def step(self, number: int, name: str, phase: str, kind: str, result: str = "") -> None:
        """Note a step's begin or end here."""
        self.put(step_note(self.t_s, self.utc_ns, number=number, name=name, phase=phase, index=self.index,
                           tick=self.tick, step_kind=kind, result=result))

    def note(self, what: str, **more: Any) -> None:
        """Write any note."""
        self.put(note(what, self.t_s, self.utc_ns, **more))


LEVEL_V, RATE = 10_000.0, 2_000.0
RAMP: dict[str, Any] = {"type": "RampStep", "number": 1, "name": "ramp", "place": "plan.yaml:3", "to_v": LEVEL_V,
                        "slew_v_per_s": RATE, "limit_a": 1e-3, "until_breakdown": False}
HOLD: dict[str, Any] = {"type": "HoldStep", "number": 2, "name": "withstand", "place": "plan.yaml:5", "v": LEVEL_V,
                        "limit_a": 1e-3, "hold_s": 4.0, "clock": "continuous", "at_most_s": 8.0, "tolerance": 0.01,
                        "window_s": 0.5, "readings_s": [2.0, 4.0], "origin": "start of hold", "guard_band": False}
NO_BREAKDOWN = {"type": "Criterion", "kind": "no breakdown", "limit": 0.0, "hold": "", "reading_s": None,
                "tolerance": 0.0, "guard_band": False, "place": "plan.yaml:9"}


def program(acceptance: list[dict[str, Any]] | None = None, **changes: Any) -> dict[str, Any]:
    """Return the program of a ramp and a hold."""
    return {"type": "Program", "kind": "plan", "steps": [RAMP, HOLD],
            "acceptance": [NO_BREAKDOWN] if acceptance is None else acceptance,
            "specimen_proof": {"type": "SpecimenProof", "capacitance_f": [0.8e-9, 1.2e-9], "current_a": None},
            **changes}


@dataclass(slots=True, kw_only=True)
class Case:
    """What a made run does."""

    farads: float = 1e-9
    ohms: float = 1e9
    break_at_s: float | None = None  # into the hold
    hold_s: float = 4.8
    lose: int = 0  # pairs lost in the hold
    level_v: float = LEVEL_V
    outcome: Outcome = Outcome.FINISHED
    end: bool = True
    noise: float = 2.5
    meta: dict[str, Any] = field(default_factory=dict)


def made_run(root: Path, case: Case | None = None) -> RunFolder:
    """Write a run: ramp, hold (perhaps a breakdown in it), lower or trip, END; returns its folder, not closed."""
    case = case or Case()
    meta = made_meta(**{"program": program(), **case.meta})
    folder = RunFolder.create(root, meta.run, meta.opened_utc_ns, meta.to_json(), {"bench.yaml": "bench: x\n" * 200})
    recorder = InlineRecorder.open(folder, meta.to_json(), tag=meta.tag, signs=meta.signs)
    script = Scripted(recorder, noise=case.noise, state=McuState.WARNING)
    for _ in range(320):
        script.pair(0.0, 0.0)
    script.anchor()
    script.mcu(EventKind.ENERGISED, 1)
    script.state = McuState.ENERGISED
    broke = _ramp_and_hold(script, case)
    _down(script, case, broke)
    script.anchor()
    script.flush()
    if case.end:
        why = "breakdown" if broke else "the plan ran to its end"
        recorder.close(Outcome.TRIPPED if broke else case.outcome, why=why)
    else:
        recorder._file.close()
    return folder


def _ramp_and_hold(script: Scripted, case: Case) -> bool:
    total_f = case.farads + OWN_F
    script.step(1, "ramp", "begin", "ramp")
    rows = round(case.level_v / RATE * 1000)
    for k in range(rows):
        v = k * RATE / 1000.0
        script.pair(v, total_f * RATE + v / case.ohms, v)
    script.step(1, "ramp", "end", "ramp")
    script.step(2, "withstand", "begin", "hold")
    for k in range(round(case.hold_s * 1000)):
        if k == 512:
            script.step(2, "withstand", "clock start", "hold")
        if case.lose and k == 2048:
            script.skip(case.lose)
        if case.break_at_s is not None and k == round(case.break_at_s * 1000):
            return True
        script.pair(case.level_v, case.level_v / case.ohms, case.level_v)
    script.step(2, "withstand", "end", "hold", "held")
    return False


def _down(script: Scripted, case: Case, broke: bool) -> None:
    if broke:
        at = script.index
        script.pair(0.6 * LEVEL_V, 4e-3, LEVEL_V)
        script.pair(300.0, 4e-3, LEVEL_V)
        script.mcu(EventKind.CAUSE, int(Cause.BREAKDOWN), at + 1)
        script.mcu(EventKind.CUT, int(CutWhy.ARC), 0, tick=script.tick + 2)
        script.note("verdict", rule="breakdown", severity="arc", limit=100, measured=9000, index=at + 1,
                    tick=10 * (at + 1), text="fell by 9.7 kV")
    else:
        script.state = McuState.LOWERING
        for k in range(960):
            script.pair(case.level_v * (1 - k / 960), 0.0)
        script.mcu(EventKind.CUT, int(CutWhy.LOWERED))
    script.flush()
    script.state = McuState.OFF
    for _ in range(320):
        script.pair(0.0, 0.0)
