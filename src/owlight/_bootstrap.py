"""Makes the environment that the hashed lock describes. Standard library only; parses on any Python 3.

The environment is .venv in the checkout, or one in the user's cache folder when the checkout cannot be written.
The stamp that says "complete" is written last; a lock file keeps two starts at once from building over each other.
"""
import hashlib
import os
import shutil
import subprocess
import sys
import time

LEAST = (3, 11)
WAIT_S = 900.0


def ready_python(root, lock):
    """The path of an interpreter in which everything named by `lock` is installed; exits with a sentence if none."""
    if sys.version_info < LEAST:
        sys.exit("Owlight needs Python %d.%d or later; this is Python %d.%d." % (LEAST + tuple(sys.version_info[:2])))
    venv = place_of(root)
    wanted = stamp_of(lock)
    if has_stamp(venv, lock, wanted):
        return interpreter(venv)
    with Turn(venv + ".lock"):
        if not has_stamp(venv, lock, wanted):  # another start may have built it while we waited
            build(root, lock, venv, wanted)
    return interpreter(venv)


def place_of(root):
    """.venv in the checkout if it can be written, else in the user's cache folder, said on screen."""
    if os.access(root, os.W_OK):
        return os.path.join(root, ".venv")
    base = os.environ.get("LOCALAPPDATA") or os.environ.get("XDG_CACHE_HOME")
    base = base or os.path.join(os.path.expanduser("~"), ".cache")
    name = "environment-" + hashlib.sha256(root.encode()).hexdigest()[:12]
    venv = os.path.join(base, "owlight", name)
    say("This checkout cannot be written, so the environment lies in " + venv)
    try:
        os.makedirs(os.path.dirname(venv), exist_ok=True)
    except OSError as trouble:
        sys.exit("Neither the checkout nor %s can be written (%s); set HOME to a folder of yours." % (base, trouble))
    return venv


def stamp_of(lock):
    with open(lock, "rb") as file:
        text = file.read()
    return hashlib.sha256(text + sys.version.encode()).hexdigest()


def stamp_path(venv, lock):
    """Two stamps: the test lock is a superset, so a folder's own stamp tells which lock is satisfied."""
    kind = "tests" if os.path.basename(os.path.dirname(lock)) == "tests" else "run"
    return os.path.join(venv, "owlight-%s.stamp" % kind)


def has_stamp(venv, lock, wanted):
    try:
        with open(stamp_path(venv, lock)) as file:
            return file.read() == wanted and os.path.exists(interpreter(venv))
    except OSError:
        return False


def interpreter(venv):
    return os.path.join(venv, "Scripts", "python.exe") if os.name == "nt" else os.path.join(venv, "bin", "python")


def build(root, lock, venv, wanted):
    say("Setting up the environment from %s (once, about half a minute) ..." % os.path.relpath(lock, root))
    began = time.time()
    uv = shutil.which("uv")
    if not made_by_this_python(venv):
        make_venv(venv, uv)
    install(lock, venv, uv)
    link_checkout(root, venv)
    with open(stamp_path(venv, lock), "w") as file:
        file.write(wanted)
    say("Environment ready after %.0f s." % (time.time() - began))


def made_by_this_python(venv):
    """An environment of another Python version is made anew; one of this version is only brought up to date."""
    if not os.path.exists(interpreter(venv)):
        return False
    code = "import sys; sys.exit(sys.version_info[:2] != %r)" % (tuple(sys.version_info[:2]),)
    return subprocess.call([interpreter(venv), "-c", code]) == 0


def make_venv(venv, uv):
    shutil.rmtree(venv, ignore_errors=True)
    if uv:
        run([uv, "venv", "--quiet", "--python", sys.executable, venv])
        return
    try:
        import ensurepip  # noqa: F401
        import venv as venv_module
    except ImportError:
        run([sys.executable, "-m", "venv", "--without-pip", venv])
        return
    venv_module.create(venv, with_pip=True)


def install(lock, venv, uv):
    hashed = ["--require-hashes", "--only-binary", ":all:", "-r", lock]
    if uv:
        run([uv, "pip", "install", "--quiet", "--python", interpreter(venv)] + hashed)
        return
    quiet = ["install", "--quiet", "--disable-pip-version-check", "--no-input"] + hashed
    if subprocess.call([interpreter(venv), "-c", "import pip"], stderr=subprocess.DEVNULL) == 0:
        run([interpreter(venv), "-m", "pip"] + quiet)
    elif subprocess.call([sys.executable, "-c", "import pip"], stderr=subprocess.DEVNULL) == 0:
        run([sys.executable, "-m", "pip", "--python", interpreter(venv)] + quiet)
    else:
        sys.exit("This Python has neither ensurepip nor pip; install pip or uv, then start again.")


def link_checkout(root, venv):
    """The checkout goes in by a path file: no build back end has to be fetched for it."""
    code = "import sysconfig; print(sysconfig.get_path('purelib'))"
    folder = subprocess.check_output([interpreter(venv), "-c", code]).decode().strip()
    with open(os.path.join(folder, "owlight-checkout.pth"), "w", encoding="utf-8") as file:
        file.write(os.path.join(root, "src") + "\n")


def run(command):
    if subprocess.call(command) != 0:
        sys.exit("The environment could not be set up: the command above failed. Mend its cause, then start again.")


class Turn:
    """One builder at a time: the operating system frees the lock when its holder ends, however it ends."""

    def __init__(self, path):
        self.path = path

    def __enter__(self):
        self.file = open(self.path, "a+")
        said = False
        deadline = time.time() + WAIT_S
        while not self.taken():
            if time.time() > deadline:
                sys.exit("Another start has been setting up the environment for too long; end it, then start again.")
            if not said:
                say("Another start is setting up the environment; waiting for it ...")
                said = True
            time.sleep(0.2)
        return self

    def taken(self):
        try:
            if os.name == "nt":
                import msvcrt

                self.file.seek(0)
                msvcrt.locking(self.file.fileno(), msvcrt.LK_NBLCK, 1)
            else:
                import fcntl

                fcntl.flock(self.file, fcntl.LOCK_EX | fcntl.LOCK_NB)
        except OSError:
            return False
        return True

    def __exit__(self, *trouble):
        self.file.close()


def call(command, root):
    """Run a child that leaves no byte code behind in a checkout that cannot be written; its exit status."""
    surroundings = dict(os.environ)
    if not os.access(root, os.W_OK):
        surroundings["PYTHONDONTWRITEBYTECODE"] = "1"
    return subprocess.call(command, env=surroundings)


def become(command):
    """Hand this process over on POSIX, so that Ctrl-C reaches one process; on Windows wait for a child."""
    sys.stdout.flush()
    sys.stderr.flush()
    if os.name != "nt":
        os.execv(command[0], command)
    import signal

    signal.signal(signal.SIGINT, signal.SIG_IGN)
    return subprocess.call(command)


def started_as(argument):
    """How the person started us, quoted where a path has spaces."""
    place = '"%s"' % argument if " " in argument else argument
    return ("py -3 " if os.name == "nt" else "python3 ") + place


def say(words):
    sys.stderr.write(words + "\n")
    sys.stderr.flush()
