"""python3 tests ARGS: sets up the environment from the test lock, then runs the suite (ARGS go to pytest)."""
import os
import sys

HERE = os.path.dirname(os.path.abspath(__file__))
# tests/ itself must not be on the path: its folders carry names of standard modules
sys.path[0] = os.path.join(os.path.dirname(HERE), "src", "owlight")

import _bootstrap  # noqa: E402

del sys.path[0]  # the rooms there carry names of standard modules

if __name__ == "__main__":
    root = os.path.dirname(HERE)
    python = _bootstrap.ready_python(root, os.path.join(HERE, "requirements.lock"))
    # each worker is one process of ours: threads inside would fight for the same cores
    os.environ.setdefault("OMP_NUM_THREADS", "1")
    os.environ.setdefault("OPENBLAS_NUM_THREADS", "1")
    _bootstrap.call([python, "-c", "from owlight.demodulation import worker; worker.warm()"], root)
    spread = [] if any(arg.startswith("-n") for arg in sys.argv[1:]) else ["-n", "2", "--dist", "loadfile"]
    command = [python, "-m", "pytest", "-q", "--rootdir", root, "-c", os.path.join(root, "pyproject.toml")]
    os.chdir(root)
    sys.exit(_bootstrap.call(command + spread + ["--durations=15"] + sys.argv[1:], root))
