"""``python -m hvhost`` is the command ``hvhost``."""

import sys

from hvhost.cli import main

sys.exit(main())
