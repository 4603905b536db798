"""``python -m pitchsweep.drivers.twin``: started by the launcher, not by hand."""

import sys

from pitchsweep.drivers.twin.process import main

sys.exit(main())
