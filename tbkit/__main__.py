"""``python -m tbkit``."""

import sys

from tbkit.cli import main

sys.exit(main())
