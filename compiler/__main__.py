"""`python -m rootwright`."""

import sys

from rootwright.cli import main

sys.exit(main())
