"""``python -m knucklepath.viewer`` is the command line."""

import sys

from knucklepath.viewer.cli import main

sys.exit(main())
