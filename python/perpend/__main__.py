"""``python -m perpend`` is the command ``perpend``."""

import sys

from perpend.cli import main

sys.exit(main())
