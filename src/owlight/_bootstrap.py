"""Makes the environment that the hashed lock describes. Standard library only; parses on any Python.

The environment is .venv in the checkout, or one in the user's cache folder when the checkout cannot be written.
The stamp that says "complete" is written last; a lock file keeps two starts at once from building over each other.
"""
import errno
import hashlib
import os
import shutil
import subprocess
import sys
import time

LEAST = (3, 11)
WAIT_S = 900.0
BUSY = (errno.EAGAIN, errno.EACCES, errno.EDEADLK)
NO_INSTALLER = "This Python can make an environment but has no pip to fill it: install pip or uv, then start again."
NOT_INSTALLED = "The packages could not be installed; why stands above. Mend that (the network?), then start again."


def ready_python(root, lock):
    """The path of an interpreter in which everything named by `lock` is installed; ends with a sentence if none."""
    if sys.version_info < LEAST:
        sys.exit("Owlight needs Python %d.%d or later; this is Python %d.%d." % (LEAST + tuple(sys.version_info[:2])))
    # what lies in the user's folder, statistics.py for instance, must shadow nothing here nor in any child
    os.environ["PYTHONSAFEPATH"] = "1"
    wanted = stamp_of(root, lock)
    local = os.path.join(root, ".venv")
    venv = place_of(root)
    for made in (local, venv):
        if is_ready(made, wanted):
            return interpreter(made)
    prepare(venv, local)
    try:
        with Turn(venv + ".lock"):
            if not is_ready(venv, wanted):  # another start may have built it while we waited
                build(root, lock, venv)
    except KeyboardInterrupt:
        say("\nStopped. The environment is incomplete; the next start completes it.")
        sys.exit(130)
    return interpreter(venv)


def place_of(root):
    """.venv in the checkout if it can be written, else in the user's cache folder."""
    if os.access(root, os.W_OK):
        return os.path.join(root, ".venv")
    return os.path.join(user_cache(), "environment-" + hashlib.sha256(root.encode()).hexdigest()[:12])


def prepare(venv, local):
    if venv == local:
        return
    say("This checkout cannot be written, so the environment goes to " + venv)
    try:
        os.makedirs(os.path.dirname(venv), exist_ok=True)
        open(venv + ".lock", "a").close()
    except OSError as trouble:
        sys.exit("Neither the checkout nor your cache folder can be written (%s); set HOME to your own." % trouble)


def user_cache():  # type: () -> str
    """The user's own cache folder for this program."""
    if os.name == "nt":
        base = os.environ.get("LOCALAPPDATA") or os.path.expanduser("~\\AppData\\Local")
    elif sys.platform == "darwin":
        base = os.path.expanduser("~/Library/Caches")
    else:
        base = os.environ.get("XDG_CACHE_HOME") or os.path.expanduser("~/.cache")
    return os.path.join(base, "owlight")


def stamp_of(root, lock):
    """Names the kind of lock, and what an environment depends on: the lock, this Python and where the checkout lies.

    A checkout that was moved or copied must not run the code of the place it came from.
    """
    with open(lock, "rb") as file:
        text = file.read()
    kind = "tests" if os.path.basename(os.path.dirname(lock)) == "tests" else "run"
    return kind + " " + hashlib.sha256(b"\0".join([text, sys.version.encode(), root.encode()])).hexdigest()


def stamp_path(venv, wanted):
    """One stamp a kind of lock, so that a run does not need the test tools."""
    return os.path.join(venv, "owlight-%s.stamp" % wanted.split()[0])


def is_ready(venv, wanted):
    try:
        with open(stamp_path(venv, wanted)) as file:
            return file.read() == wanted and os.path.exists(interpreter(venv))
    except OSError:
        return False


def interpreter(venv):
    return os.path.join(venv, "Scripts", "python.exe") if os.name == "nt" else os.path.join(venv, "bin", "python")


def build(root, lock, venv):
    say("Setting up the environment from %s, once; half a minute on a fast line ..." % os.path.relpath(lock, root))
    began = time.time()
    uv = shutil.which("uv")
    if not made_by_this_python(venv):
        make_venv(venv, uv)
    forget_stamps(venv)
    install(lock, venv, uv)
    link_checkout(root, venv)
    write_stamps(root, lock, venv)
    say("Environment ready after %.0f s." % (time.time() - began))


def made_by_this_python(venv):
    """An environment of another Python version is made anew; one of this version is only brought up to date."""
    if not os.path.exists(interpreter(venv)):
        return False
    code = "import sys; sys.exit(sys.version_info[:2] != %r)" % (tuple(sys.version_info[:2]),)
    return status_of([interpreter(venv), "-c", code]) == 0


def make_venv(venv, uv):
    shutil.rmtree(venv, ignore_errors=True)
    if uv and status_of([uv, "venv", "--quiet", "--python", sys.executable, venv]) == 0:
        return
    command = [sys.executable, "-m", "venv", venv]
    try:
        import ensurepip  # noqa: F401
    except ImportError:  # some distributions leave it out
        command.insert(3, "--without-pip")
    if status_of(command) != 0:
        sys.exit("This Python could not make an environment; why stands above. Mend that, then start again.")


def forget_stamps(venv):
    """Neither stamp is true while packages change, nor after: the other lock may be that of another commit."""
    for kind in ("run", "tests"):
        path = stamp_path(venv, kind)
        if os.path.exists(path):
            os.remove(path)


def write_stamps(root, lock, venv):
    """The test lock holds all of the run lock, so it earns both stamps."""
    for satisfied in {lock, os.path.join(root, "requirements.lock")}:
        wanted = stamp_of(root, satisfied)
        with open(stamp_path(venv, wanted), "w") as file:
            file.write(wanted)


def install(lock, venv, uv):
    hashed = ["--require-hashes", "--only-binary", ":all:", "-r", lock]
    python = interpreter(venv)
    if uv:
        if status_of([uv, "pip", "install", "--quiet", "--python", python] + hashed) == 0:
            return
        say("uv could not install the packages; trying pip ...")
    if has_pip(python):
        pip = [python, "-m", "pip"]
    elif has_pip(sys.executable):
        pip = [sys.executable, "-m", "pip", "--python", python]
    else:
        sys.exit(NO_INSTALLER)
    if status_of(pip + ["install", "--quiet", "--disable-pip-version-check", "--no-input"] + hashed) != 0:
        sys.exit(NOT_INSTALLED)


def has_pip(python):
    code = "import importlib.util, sys; sys.exit(importlib.util.find_spec('pip') is None)"
    return status_of([python, "-c", code]) == 0


def link_checkout(root, venv):
    """The checkout goes in by a path file: no build back end has to be fetched for it."""
    code = "import sysconfig; print(sysconfig.get_path('purelib'))"
    folder = subprocess.check_output([interpreter(venv), "-c", code]).decode().strip()
    with open(os.path.join(folder, "owlight-checkout.pth"), "w", encoding="utf-8") as file:
        file.write(os.path.join(root, "src") + "\n")


def status_of(command):
    """The one place that starts another program and waits for it."""
    return subprocess.call(command)


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
        except OSError as trouble:
            return trouble.errno not in BUSY  # a file system without locks: go on rather than never start
        return True

    def __exit__(self, *trouble):
        self.file.close()


def become(command):
    """Hand this process over on POSIX, so that Ctrl-C reaches one process; on Windows wait for a child."""
    sys.stdout.flush()
    sys.stderr.flush()
    if os.name != "nt":
        os.execv(command[0], command)
    import signal

    signal.signal(signal.SIGINT, signal.SIG_IGN)  # the child decides what Ctrl-C means
    return status_of(command)


def started_as(argument):
    """How the person started us, quoted where a path has spaces."""
    place = '"%s"' % argument if " " in argument else argument
    return ("py -3 " if os.name == "nt" else "python3 ") + place


def say(words):
    sys.stderr.write(words + "\n")
    sys.stderr.flush()
