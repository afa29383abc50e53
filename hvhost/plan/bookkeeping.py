"""Preflight, the bookkeeping: who, what, released by whom, connected how, and whether the label can be right."""

from collections.abc import Iterator

from hvhost.bench.model import GroundDevice
from hvhost.plan.case import Case, Check
from hvhost.plan.program import CriterionKind
from hvhost.wire.vocabulary import Fitted
from hvhost.words.findings import Finding, Grade

POLARITY_WORDS = {1: "positive", -1: "negative"}


def check_release(case: Case) -> Iterator[Finding]:
    """A plan is released by a named person before it is run."""
    release = case.plan.release
    if release is None:
        yield case.in_plan(Grade.REASON, 1, "released", "'released' with 'by' and 'on': a plan is released by a named "
                           "person", "nothing")
    elif case.today is not None and release.on > case.today:
        yield case.in_plan(Grade.REASON, release.line, "released.on", f"a date up to today, {case.today}",
                           str(release.on))


def check_specimen(case: Case) -> Iterator[Finding]:
    """The label fits what happened since the last run."""
    specimen, history = case.sheet.specimen, case.history
    if specimen in history.used_specimens and not case.sheet.repeat_of:
        yield case.in_sheet(Grade.REASON, "specimen", "an ID that was not used before", f"'{specimen}'",
                            "repeat, or wrong label?")
    elif specimen in history.used_specimens:
        yield case.in_sheet(Grade.NOTE, "specimen", "", f"'{specimen}' again: {case.sheet.repeat_of}")
    if history.last_specimen and specimen != history.last_specimen and not history.interlock_opened_since:
        yield case.in_sheet(Grade.REASON, "specimen", f"an opening of the interlock since the run of "
                            f"'{history.last_specimen}'", f"another specimen, '{specimen}', and no opening",
                            "wrong label or defeated interlock")
    alike = next((used for used in sorted(history.used_specimens) if used != specimen
                  and _plain(used) == _plain(specimen)), "")
    if alike and specimen not in history.used_specimens:
        yield case.in_sheet(Grade.REASON, "specimen", f"an ID that differs from '{alike}' in more than its writing",
                            f"'{specimen}'", "repeat, or wrong label?")


def _plain(specimen: str) -> str:
    return "".join(c for c in specimen.casefold() if c.isalnum())


def check_people(case: Case) -> Iterator[Finding]:
    """Who operates; where a second person is named, fine."""
    if not case.sheet.operator:
        yield case.in_sheet(Grade.REASON, "operator", "the operator's name", "nothing")


def check_connected(case: Case) -> Iterator[Finding]:
    """Without a window that proves the specimen connected, the verdict cannot be pass."""
    if case.program.acceptance and case.program.specimen_proof is None:
        yield case.in_sheet(Grade.NOTE, "connected", "'capacitance' or 'current' that proves a specimen connected",
                            "nothing", "the verdict will be 'not decided: no specimen seen' at best")


def check_confirmed(case: Case) -> Iterator[Finding]:
    """What the operator says about the set-up agrees with the bench and with safe work."""
    said, bench = case.sheet.confirmed, case.bench
    wanted = POLARITY_WORDS[bench.polarity]
    if said.polarity is not None and said.polarity != bench.polarity:
        yield case.in_sheet(Grade.REFUSE, "confirmed.polarity", f"'{wanted}', as the bench file says",
                            f"'{POLARITY_WORDS[said.polarity]}'", "ground, change the supply, and check again")
    elif said.polarity is None and not bench.has(Fitted.POLARITY):
        yield case.in_sheet(Grade.REASON, "confirmed.polarity", f"'{wanted}', confirmed by the operator: the bench has "
                            "no polarity contact", "nothing")
    if said.ground_removed is None and bench.ground is GroundDevice.NONE:
        yield case.in_sheet(Grade.REASON, "confirmed.ground_removed", "'yes': the bench has no contact that tells",
                            "nothing")
    refusals = (("ground_removed", said.ground_removed, "take it off before arming"),
                ("grounded_while_connecting", said.grounded_while_connecting,
                 "switch off, prove dead, discharge, ground, then connect"),
                ("area_clear", said.area_clear, "clear the area"))
    for key, answer, remedy in refusals:
        if answer is False:
            yield case.in_sheet(Grade.REFUSE, f"confirmed.{key}", "'yes'", "'no'", remedy)


def check_calibration(case: Case) -> Iterator[Finding]:
    """A daemon may outlive the calibration that was valid when it read the bench file."""
    until = case.bench.calibration_valid_until
    told = any(finding.what.startswith("calibration") for finding in case.bench.findings)
    if case.today is not None and until is not None and until < case.today and not told:
        yield Finding(grade=Grade.REASON, file=case.bench.file, line=0, what="calibration.valid_until",
                      expected=f"a day not before today, {case.today}", found=str(until),
                      remedy="a run under a reason about calibration never returns a plain pass")


def check_judged(case: Case) -> Iterator[Finding]:
    """A breakdown limit needs a ramp that looks for breakdown."""
    until = any(getattr(step, "until_breakdown", False) for step in case.program.steps)
    for criterion in case.program.acceptance:
        if criterion.kind is CriterionKind.BREAKDOWN_ABOVE and not until:
            line = int(criterion.place.rpartition(":")[2])
            yield case.in_plan(Grade.NOTE, line, "acceptance", "a ramp with 'until: breakdown'", "none",
                               "without a breakdown the criterion is not decided")


BOOKKEEPING: tuple[Check, ...] = (check_release, check_specimen, check_people, check_connected, check_confirmed,
                                  check_calibration, check_judged)
