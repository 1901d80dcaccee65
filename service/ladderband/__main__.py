"""``python -m ladderband`` is the ``ladderband`` command."""

import sys

from ladderband.cli import main

sys.exit(main())
