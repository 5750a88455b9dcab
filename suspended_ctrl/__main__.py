"""``python -m suspended_ctrl`` is ``suspended-ctrl``."""

import sys

from suspended_ctrl.cli import main

sys.exit(main())
