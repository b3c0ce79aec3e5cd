"""`python -m owlight.guard`: the first line of standard input says what to guard, then a line a sign of life."""

import sys

from owlight.guard.process import main

sys.exit(main())
