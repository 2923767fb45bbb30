"""Run the command line: ``python -m dec``."""

import sys

from dec.cli import main

sys.exit(main())
