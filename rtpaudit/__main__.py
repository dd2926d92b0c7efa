"""``python -m rtpaudit``: the same as the command ``rtpaudit``."""

import sys

from rtpaudit.cli import main

sys.exit(main())
