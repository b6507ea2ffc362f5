"""`python -m pulsewright`: the same as the command `pulsewright`."""

import sys

from pulsewright.cli.main import main

sys.exit(main())
