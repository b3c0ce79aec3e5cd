"""python -m owlight"""

from owlight.cli import main

main()
