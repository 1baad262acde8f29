"""``python -m flatplan`` is the command line."""

import sys

from flatplan.cli import main

sys.exit(main())
