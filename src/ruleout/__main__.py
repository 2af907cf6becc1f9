"""``python -m ruleout``."""

import sys

from ruleout.cli import main

sys.exit(main())
