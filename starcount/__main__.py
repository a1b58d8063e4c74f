"""``python -m starcount`` is the command ``starcount``."""

import sys

from starcount.cli import main

sys.exit(main())
