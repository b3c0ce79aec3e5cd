"""The verbs, one a file: what the command line, Python and tests all call."""
