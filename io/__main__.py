"""``python -m wavekin.io``: the command line."""

import sys

from wavekin.io.command import main

sys.exit(main())
