"""``hvhost status``: what the bench does now, in a few plain lines."""

import json

from hvhost.cli import exits
from hvhost.cli.talk import Bench, parser_of, state_line


def run(argv: list[str]) -> int:
    """Print the state."""
    parser = parser_of("status", "Says what the bench does now, what is latched, and what hinders arming.")
    parser.add_argument("--json", action="store_true")
    options = parser.parse_args(argv)
    with Bench(options) as bench:
        status = bench.status()
    if options.json:
        print(json.dumps(status))
        return exits.PASSED
    shot = status["snapshot"]
    print(f"{shot['bench']} ({shot['bench_title']}): {state_line(shot)}")
    print(f"link: {shot['link_text']}")
    if shot["voltage_text"]:
        print(f"voltage: {shot['voltage_text']}")
    for view in shot["inputs"]:
        print(f"  {view['name']}: {view['state']}" + ("" if view["judgement"] != "not ok" else "  (hinders arming)"))
    if status["run"]:
        print(f"run {status['run']}: {status['stage']} {status['outcome']} {status['why']}".rstrip())
    print(f"control: {shot['seat'] or 'nobody'}")
    print("next: " + ("; ".join(shot["next_acts"]) or "nothing"))
    if status["obstacles"]:
        print("hinders arming: " + "; ".join(status["obstacles"]))
    return exits.PASSED
