"""One snapshot for every state that the screen can show, by name: material for pictures and tests."""

import math
from dataclasses import replace

from hvhost.bench import cautions
from hvhost.publish.snapshot import (
    ArmView,
    CoursePoint,
    EventLine,
    EvidenceView,
    HoldView,
    InputJudgement,
    InputView,
    LinkQuality,
    LinkState,
    OutletView,
    Permission,
    Phase,
    Reading,
    RecordView,
    RunView,
    Severity,
    Snapshot,
    StopState,
    TrendBucket,
    VoltageState,
)
from hvhost.publish.wording import Plotted, View

NOW_NS = 1_764_594_202_350_000_000  # 2025-12-01 13:03:22.350 UTC
OK, NOT_OK, UNKNOWN = InputJudgement.OK, InputJudgement.NOT_OK, InputJudgement.UNKNOWN

INPUTS_OFF = (
    InputView(name="interlock", state="closed", judgement=OK),
    InputView(name="emergency contact", state="closed", judgement=OK),
    InputView(name="grounding stick", state="on its hook", judgement=OK),
    InputView(name="danger signal", state="dark", judgement=OK),
    InputView(name="auxiliary supplies", state="good", judgement=OK),
    InputView(name="polarity contact", state="agrees", judgement=OK),
    InputView(name="inhibit read-back", state="asserted", judgement=OK),
    InputView(name="relay read-back", state="open", judgement=OK),
)
INPUTS_LIT = tuple(
    replace(one, state={"danger signal": "lit", "inhibit read-back": "released", "relay read-back": "closed"}.get(
        one.name, one.state)) for one in INPUTS_OFF)


def _events(*texts: tuple[str, Severity], late_s: float = 40.0) -> tuple[EventLine, ...]:
    first = NOW_NS - int(late_s * 1e9) - len(texts) * 1_730_000_000
    return tuple(EventLine(utc_ns=first + n * 1_730_000_000, text=text, severity=severity, number=n + 1)
                 for n, (text, severity) in enumerate(texts))


EVENTS = _events(
    ("greeted: protocol 1, settings 5A31C0DE agree with the bench file", Severity.NOTE),
    ("preflight passed: withstand.yaml, sheet of S-1042, demo.yaml", Severity.NOTE),
    ("arm 7 requested by bob (pid 4211)", Severity.NOTE),
    ("pressed at the bench for 0.6 s", Severity.NOTE),
    ("cut path proven: inhibit, relay", Severity.NOTE),
    ("energised, first segment starts", Severity.ATTENTION),
    ("ramp to 18.00 kV at 500 V/s", Severity.NOTE),
    ("one interfering sample: overcurrent, 1 of 2", Severity.NOTE),
    ("hold 18.00 kV begun, mean inside ±1 %", Severity.NOTE),
)


def _trend(end_v: float, until_s: float = 78.0, collapse_s: float | None = None) -> tuple[TrendBucket, ...]:
    buckets = []
    for n in range(1, 157):
        t_s = n * 0.5
        if t_s > until_s:
            break
        v = min(end_v, 500.0 * t_s)
        i = 2.4e-5 + 1.2e-5 * math.exp(-max(0.0, t_s - 36.0) / 9.0) + (9e-5 if v < end_v else 0.0)
        if collapse_s is not None and t_s > collapse_s:
            v, i = 18_000.0 * math.exp(-(t_s - collapse_s) / 1.1) * 0.12, 0.0
        ripple = 14.0 + 9.0 * math.sin(n)
        buckets.append(TrendBucket(1000.0 + t_s, v - ripple, v + ripple, i - 1.5e-6, i + 2e-6))
    if collapse_s is not None:
        spike = next(n for n, one in enumerate(buckets) if one.t_s > 1000.0 + collapse_s)
        buckets[spike] = buckets[spike]._replace(v_max=18_020.0, i_max=3.4e-3)
    return tuple(buckets)


def _course(*corners: tuple[float, float]) -> tuple[CoursePoint, ...]:
    """Corners at seconds from the present."""
    return tuple(CoursePoint(1078.0 + t_s, volts) for t_s, volts in corners)


def _evidence(kind: str = "trip", text: str = "breakdown") -> EvidenceView:
    """A collapse from 17.99 kV, sampled 1000 times a second."""
    points = []
    for n in range(-63, 65):
        v, i = (17_990.0 + 9.0 * math.sin(n), 2.5e-5) if n <= 0 else (1650.0 * math.exp(-n / 40.0), 3.1e-3 / (1 + n))
        points.append(TrendBucket(n * 1e-3, v - 8.0, v + 8.0, i - 2e-6, i + 2e-6))
    return EvidenceView(kind=kind, number=4, text=text, span_s=1e-3, points=tuple(points))


def _reading(volts: float, amps: float, age_s: float = 0.04, flags: tuple[str, ...] = ()) -> Reading:
    return Reading(volts=volts, amps=amps, u_volts=8.0 + volts * 1e-3, u_amps=1.1e-6, volts_min=volts - 9,
                   volts_max=volts + 11, amps_min=amps, amps_max=amps, age_s=age_s, flags=flags)


RUN = RunView(run_id="3f2a91c7", plan="withstand.yaml", specimen="S-1042", operator="bob", step_number=2,
              step_total=4, step_name="withstand", step_text="hold 18.00 kV for 60 s, ±1 %", elapsed_s=78.0,
              remaining_s=66.0, expected_s=38.0, next_reading_s=13.0, folder="runs/20251201T130204Z-3f2a91c7",
              hold=HoldView(elapsed_s=42.0, required_s=60.0, at_most_s=90.0, volts=18e3, tolerance=0.01, step_s=43.0))
HELD = RUN.hold
assert HELD is not None

IDLE = Snapshot(
    utc_ns=NOW_NS, now_s=1078.0, seq=812, bench="demo", bench_title="Demo bench 25 kV", port="/dev/ttyACM0",
    link=LinkState.GREETED, voltage=VoltageState.BELOW, voltage_text="95 % bound 28 V", power_words="power relay open",
    set_volts=0.0, set_amps=0.0, reading=_reading(12.0, 2e-7), volts_full=25e3, amps_full=4e-3, ceiling_volts=25e3,
    trip_amps=3e-3, inputs=INPUTS_OFF, seat="bob (pid 4211)", events=EVENTS[:2], trend=(),
    next_acts=("hvhost run PLAN --specimen ID", "hvhost check FILE"), quality=LinkQuality(),
    record=RecordView(text="ready, 212 GB free"), outlets=(OutletView(name="local", clients=2),),
    discharge_text="", bleeds_passed=14.2,
)
RUNNING = replace(
    IDLE, permission=Permission.RUNNING, phase=Phase.HOLD, voltage=VoltageState.PRESENT, voltage_text="",
    power_words="power on", set_volts=18e3, set_amps=2e-3, ceiling_volts=20e3, reading=_reading(17_996.0, 2.46e-5),
    inputs=INPUTS_LIT, run=RUN, events=EVENTS, trend=_trend(18e3), recent=_trend(18e3)[36:],
    course=_course((0.0, 18e3), (18.0, 18e3), (27.0, 0.0)), record=RecordView(text="1.9 MB"),
    next_acts=("hvhost lower", "hvhost cut"), bleeds_passed=None, quality=LinkQuality(garbled=1, gaps=0, missed=3),
)
TRIPPED_EVENTS = (*EVENTS, *_events(
    ("BREAKDOWN at 17.99 kV: readback fell 16.3 kV in 3 samples, kind not inspected", Severity.TRIP),
    ("cut by the board: inhibit, clear, zero, relay", Severity.TRIP),
    ("cut 4 confirmed, 2.1 ms after the sample", Severity.NOTE), late_s=3.0,
))
TRIPPED = replace(
    RUNNING, permission=Permission.IDLE, phase=Phase.NONE, latched=("breakdown",), voltage=VoltageState.FALLING,
    voltage_text="612 V, fits the bleed time", power_words="power relay open", set_volts=0.0, set_amps=0.0,
    reading=_reading(612.0, 3e-7), inputs=INPUTS_OFF, events=TRIPPED_EVENTS, trend=_trend(18e3, 78.0, 73.0),
    course=(), evidence=_evidence(),
    stop=StopState.CUT_CONFIRMED, bleeds_passed=3.4, verdict_text="fail: disruptive discharge at 17.99 kV in the hold",
    run=replace(RUN, ended=True, hold=None, elapsed_s=73.0), next_acts=("hvhost reset breakdown", "hvhost show"),
)


def _states() -> dict[str, tuple[Snapshot, View]]:
    arm = ArmView(plan="withstand.yaml", specimen="S-1042", volts_highest=18e3, duration_s=146.0,
                  asked_by="bob (pid 4211)", expires_s=26.4)
    requested = replace(IDLE, permission=Permission.REQUESTED, arm=arm, bleeds_passed=None, events=EVENTS[:3],
                        course=_course((0.0, 0.0), (36.0, 18e3), (96.0, 18e3), (105.0, 0.0)),
                        next_acts=("press the arm input at the bench", "hvhost arm --cancel"))
    held = HELD
    lost = replace(RUNNING, link=LinkState.LOST, voltage=VoltageState.UNKNOWN, reading=_reading(17_996.0, 2e-5, 3.2),
                   run=replace(RUN, ended=True, hold=None), verdict_text="interrupted: the board fell silent",
                   next_acts=("see to the port; nothing resumes by itself",))
    plain = View()
    return {
        "idle": (IDLE, plain),
        "requested": (requested, plain),
        "requested without arm input": (replace(requested, arm=replace(
            arm, press_needed=False, typed_name="withstand S-1042")), plain),
        "proving": (replace(requested, arm=None, permission=Permission.PROVING, next_acts=()), plain),
        "warning": (replace(RUNNING, permission=Permission.WARNING, phase=Phase.NONE, warning_s=2.4, set_volts=0.0,
                            reading=_reading(9.0, 1e-7), trend=(), run=replace(RUN, hold=None, expected_s=107.0),
                            course=_course((0.0, 0.0), (2.4, 0.0), (38.4, 18e3), (98.4, 18e3), (107.4, 0.0))), plain),
        "ramp": (replace(RUNNING, phase=Phase.RAMP, set_volts=9400.0, reading=_reading(9391.0, 1.15e-4),
                         trend=tuple(one._replace(t_s=one.t_s + 59.2) for one in _trend(18e3, 18.8)),
                         course=_course((0.0, 9400.0), (17.2, 18e3), (77.2, 18e3), (86.2, 0.0)), run=replace(
                             RUN, step_number=1, step_name="rise", step_text="ramp to 18.00 kV at 500 V/s",
                             hold=None, next_reading_s=None, expected_s=86.2)), plain),
        "minute": (RUNNING, View(plotted=Plotted.MINUTE)),
        "hold waits": (replace(RUNNING, reading=_reading(17_700.0, 3.1e-5), run=replace(RUN, hold=replace(
            held, elapsed_s=0.0, inside=False, begun=False, restarts=2))), plain),
        "hold": (RUNNING, plain),
        "hold out of tolerance": (replace(RUNNING, reading=_reading(17_640.0, 2.5e-5), run=replace(
            RUN, hold=replace(held, clock="accumulate", inside=False))),
            plain),
        "retreat": (replace(RUNNING, phase=Phase.RETREAT, set_volts=6000.0, reading=_reading(5990.0, 8e-5),
                            course=_course((0.0, 6e3), (2.0, 8e3), (22.0, 18e3), (31.0, 0.0)),
                            evidence=_evidence("arc", ""),
                            run=replace(RUN, plan="gap.yaml", hold=None, arcs=3, arcs_allowed=10)), plain),
        "rest": (replace(RUNNING, phase=Phase.REST, set_volts=0.0, reading=_reading(41.0, 1e-7),
                         course=_course((0.0, 0.0), (31.0, 0.0), (67.0, 18e3), (76.0, 0.0)),
                         run=replace(RUN, hold=None, step_text="rest 60 s")), plain),
        "pausing": (replace(RUNNING, permission=Permission.PAUSING, phase=Phase.NONE, pause_s=6.6, set_volts=0.0,
                            voltage=VoltageState.PRESENT, voltage_text="inhibited after an arc, power stays on",
                            reading=_reading(830.0, 0.0), evidence=_evidence("arc", ""),
                            course=_course((0.0, 0.0), (6.6, 0.0), (9.0, 14e3), (17.0, 18e3), (77.0, 18e3)),
                            run=replace(RUN, plan="gap.yaml", hold=replace(held, clock="accumulate", inside=False),
                                        arcs=4, arcs_allowed=10)), plain),
        "arc while running": (replace(RUNNING, evidence=_evidence("arc", ""), run=replace(
            RUN, plan="gap.yaml", arcs=4, arcs_allowed=10)), View(plotted=Plotted.EVIDENCE)),
        "lowering": (replace(RUNNING, permission=Permission.LOWERING, phase=Phase.NONE, set_volts=7100.0,
                             reading=_reading(7340.0, 1e-6), voltage=VoltageState.PRESENT,
                             voltage_text="the output is being lowered", course=_course((0.0, 7100.0), (3.6, 0.0)),
                             run=replace(RUN, hold=None, ended=True), next_acts=("hvhost cut",)), plain),
        "tripped": (TRIPPED, plain),
        "falling": (replace(TRIPPED, latched=(), verdict_text=""), plain),
        "below threshold": (replace(IDLE, run=replace(RUN, ended=True, hold=None), verdict_text="pass"), plain),
        "not measured here": (replace(IDLE, voltage=VoltageState.NOT_MEASURED, voltage_text="",
                                      discharge_text="Voltage not measured here."), plain),
        "measurement lost": (replace(TRIPPED, voltage=VoltageState.LOST, voltage_text="a jump to zero"), plain),
        "grounded": (replace(IDLE, voltage=VoltageState.GROUNDED, voltage_text="grounding device's contact says "
                             "closed: a position, not a proof", inputs=tuple(
                                 replace(one, state="not on its hook", judgement=NOT_OK)
                                 if one.name == "grounding stick" else one for one in INPUTS_OFF)), plain),
        "unknown": (replace(IDLE, link=LinkState.NONE, voltage=VoltageState.UNKNOWN, voltage_text="no link",
                            reading=None, power_words="", inputs=tuple(
                                replace(one, state="unknown", judgement=UNKNOWN) for one in INPUTS_OFF),
                            next_acts=("see to the port: /dev/ttyACM0 is missing",)), plain),
        "observe only": (replace(IDLE, link=LinkState.OBSERVE, events=(*EVENTS[:1], *_events(
            ("settings differ: v_max is 20.00 kV in the bench file, 25.00 kV in the board", Severity.ATTENTION),
            late_s=2.0)),
            next_acts=("hvhost commission BENCH with the interlock open", "hvhost lower", "hvhost cut")), plain),
        "lost": (lost, plain),
        "old reading": (replace(RUNNING, reading=_reading(17_996.0, 2.46e-5, 0.21)), plain),
        "cut not confirmed": (replace(RUNNING, stop=StopState.CUT_NOT_CONFIRMED, permission=Permission.RUNNING,
                                      next_acts=("use the emergency switching off",)), plain),
        "wiring does not inhibit": (replace(IDLE, inhibits_without_mcu=False), plain),
        "programming only": (replace(TRIPPED, power_words=cautions.PROGRAMMED_TO_ZERO, inputs=INPUTS_OFF[:4]), plain),
        "negative bench": (replace(
            RUNNING, polarity=-1, bench="small", bench_title="Small bench 5 kV", volts_full=5e3, amps_full=20e-3,
            set_volts=4000.0, set_amps=15e-3, ceiling_volts=4500.0, trip_amps=18e-3, reading=_reading(3998.0, 1.13e-3),
            trend=tuple(b._replace(v_min=b.v_min / 4.5, v_max=b.v_max / 4.5) for b in _trend(18e3))), plain),
        "rehearsal": (replace(RUNNING, rehearsal=True, port="stand-in"), plain),
        "interlock open": (replace(IDLE, inputs=(replace(INPUTS_OFF[0], state="open", judgement=NOT_OK),
                                                 *INPUTS_OFF[1:]), next_acts=("close the interlock",)), plain),
        "record failed": (replace(RUNNING, permission=Permission.LOWERING, phase=Phase.NONE, record=RecordView(
            ok=False, text="no space left on /var/runs")), plain),
        "daemon gone": (RUNNING, View(connected=False, since_s=2.0)),
        "view cannot stop": (RUNNING, View(can_stop=False)),
        "bell silent": (RUNNING, View(bell=False)),
        "stopped by another": (replace(RUNNING, permission=Permission.LOWERING, phase=Phase.NONE,
                                       stopped_by="alice (pid 88)", voltage_text="the output is being lowered",
                                       run=replace(RUN, ended=True, hold=None)), plain),
        "ascii only": (RUNNING, View(ascii_only=True)),
        "key pressed": (replace(RUNNING, stop=StopState.CUT_SENT), View(note="cut sent by this key: cut 12 sent")),
    }


STATES: dict[str, tuple[Snapshot, View]] = _states()
