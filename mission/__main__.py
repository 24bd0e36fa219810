"""``python -m mission`` is the command ``mission``."""

import sys

from .cli import main

sys.exit(main())
