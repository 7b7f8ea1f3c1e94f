"""`python -m pinsim` is the command `pinsim`."""

import sys

from pinsim.cli import main

sys.exit(main())
