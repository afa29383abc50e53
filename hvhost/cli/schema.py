"""``hvhost schema bench|plan|sheet``: the JSON Schema of a file."""

import argparse
import json

from hvhost.cli import exits


def run(argv: list[str]) -> int:
    """Print one schema."""
    parser = argparse.ArgumentParser(prog="hvhost schema", description="Prints the JSON Schema of one kind of file.",
                                     epilog=exits.EPILOG)
    parser.add_argument("kind", choices=("bench", "plan", "sheet"))
    kind = parser.parse_args(argv).kind
    if kind == "bench":
        from hvhost.bench.file import bench_schema as schema
    elif kind == "plan":
        from hvhost.plan.language import plan_schema as schema
    else:
        from hvhost.plan.sheet import sheet_schema as schema
    print(json.dumps(schema(), indent=1, ensure_ascii=False))
    return exits.PASSED
