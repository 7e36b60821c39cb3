"""``python -m yieldsim``."""

import sys

from yieldsim.cli import main

sys.exit(main())
