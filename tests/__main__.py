"""python3 tests ARGS: sets up the environment from the test lock, then runs the suite (ARGS go to pytest)."""
import os
import sys

HERE = os.path.dirname(os.path.realpath(__file__))
# tests/ itself must not be on the path: its folders carry names of standard modules
sys.path[0] = os.path.join(os.path.dirname(HERE), "src", "owlight")

import _bootstrap  # noqa: E402

del sys.path[0]  # the rooms there carry names of standard modules


def main(arguments):
    root = os.path.dirname(HERE)
    python = _bootstrap.ready_python(root, os.path.join(HERE, "requirements.lock"))
    # each worker is one process of ours: threads inside would fight for the same cores
    os.environ.setdefault("OMP_NUM_THREADS", "1")
    os.environ.setdefault("OPENBLAS_NUM_THREADS", "1")
    command = [python, "-m", "pytest", "-q", "--rootdir", root, "-c", os.path.join(root, "pyproject.toml")]
    command.append("--durations=15")
    if not any(argument.startswith(("-n", "--numprocesses")) for argument in arguments):
        command += ["-n", "2", "--dist", "loadfile"]
    if not os.access(root, os.W_OK):
        notes = os.path.join(_bootstrap.user_cache(), "tests")
        command += ["-o", "cache_dir=" + os.path.join(notes, "pytest")]
        os.environ.setdefault("HYPOTHESIS_STORAGE_DIRECTORY", os.path.join(notes, "hypothesis"))
    os.chdir(root)
    # compiled once here, or every worker would compile them at the same time
    _bootstrap.status_of([python, "-c", "from owlight.demodulation import worker; worker.warm()"])
    return _bootstrap.become(command + arguments)


if __name__ == "__main__":
    sys.exit(main(sys.argv[1:]))
