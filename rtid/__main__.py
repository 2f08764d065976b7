"""`python -m rtid` is the command `rtid`."""

import sys

from rtid.cli.main import entry

sys.exit(entry())
