"""python3 src ARGS: sets up an environment of its own from the hashed lock, then runs owlight in it."""
import os
import sys

HERE = os.path.dirname(os.path.realpath(__file__))
sys.path[0] = os.path.join(HERE, "owlight")  # only the bootstrap; the rest waits for its environment

import _bootstrap  # noqa: E402

del sys.path[0]  # the rooms there carry names of standard modules

WORDS = """python3 src demo                            measure on the simulated bench
python3 src forecast SEQUENCE --bench B     what would be done, without touching an instrument
python3 src run SEQUENCE --bench B          measure
python3 src report last                     one page to print or send
python3 tests                               run the tests"""


def main(arguments):
    if not arguments:
        print(WORDS)
        return 0
    root = os.path.dirname(HERE)
    python = _bootstrap.ready_python(root, os.path.join(root, "requirements.lock"))
    # so that the commands the program shows can be pasted as they are
    os.environ.setdefault("OWLIGHT_STARTED_AS", _bootstrap.started_as(sys.argv[0]))
    return _bootstrap.become([python, "-m", "owlight"] + arguments + place_for_demo(arguments))


def place_for_demo(arguments):
    """The demo can be tried in a folder that cannot be written: its logbook then goes to the home folder."""
    named = any(word.split("=")[0] == "--logbook" for word in arguments)
    if arguments[0] != "demo" or named or "--help" in arguments or os.access(os.getcwd(), os.W_OK):
        return []
    place = os.path.join(os.path.expanduser("~"), "owlight-demo")
    _bootstrap.say("This folder cannot be written, so the logbook goes to " + place)
    return ["--logbook", place]


if __name__ == "__main__":
    sys.exit(main(sys.argv[1:]))
