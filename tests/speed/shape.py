"""What every line of every measurement must be."""

import json
import math
from collections.abc import Sequence

from hvhost.speed.figures import Line


def check(lines: Sequence[Line], *budgets: str) -> None:
    """Lines of these budgets only, with finite figures, units and a thing they are compared with; JSON without NaN."""
    assert lines
    assert {line.budget for line in lines} <= set(budgets)
    for line in lines:
        assert math.isfinite(line.measured)
        assert line.what
        assert line.against
        assert line.worst in ("most", "least")
        text = json.dumps(line.to_json(), allow_nan=False)
        assert json.loads(text)["measured"] == line.measured
