"""`python -m owlight.simulation`: one line of JSON says where, then the bench serves."""

import sys

from owlight.simulation.process import main

sys.exit(main(sys.argv[1:]))
