"""`python -m bridge` is the same as `savefit`."""

import sys

from bridge.cli import main

sys.exit(main())
