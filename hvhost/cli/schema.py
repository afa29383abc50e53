"""``hvhost schema KIND``: the JSON Schema of a file, or the table of the instrument socket's commands."""

import argparse
import json
from importlib import import_module

from hvhost.cli import exits

# kind -> (module, function); imported only when asked for
KINDS: dict[str, tuple[str, str]] = {
    "bench": ("hvhost.bench.file", "bench_schema"),
    "plan": ("hvhost.plan.language", "plan_schema"),
    "sheet": ("hvhost.plan.sheet", "sheet_schema"),
    "result": ("hvhost.report.resultfile", "result_schema"),
    "mqtt": ("hvhost.publish.mqtt.topics", "mqtt_schema"),
    "instrument": ("hvhost.publish.instrument.commands", "command_table"),
}


def run(argv: list[str]) -> int:
    """Print one schema."""
    parser = argparse.ArgumentParser(prog="hvhost schema", description="Prints the JSON Schema of one kind of file, or "
                                     "the instrument socket's commands as a table.",
                                     epilog=exits.EPILOG)
    parser.add_argument("kind", choices=tuple(KINDS))
    module, function = KINDS[parser.parse_args(argv).kind]
    schema = getattr(import_module(module), function)()
    print(schema if isinstance(schema, str) else json.dumps(schema, indent=1, ensure_ascii=False))
    return exits.PASSED
