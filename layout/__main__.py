"""``python -m layout``: the command."""

import sys

from layout.cli import main

sys.exit(main())
