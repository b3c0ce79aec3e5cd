"""The environment is made from the lock, wherever it may stand; other programs are started by a stand-in."""

from __future__ import annotations

import ast
import errno
import os
import signal
import subprocess
import sys
import threading
from collections.abc import Callable
from pathlib import Path

import pytest

from owlight import _bootstrap

CHECKOUT = Path(_bootstrap.__file__).parents[2]
STARTS = [CHECKOUT / "src" / "__main__.py", CHECKOUT / "tests" / "__main__.py", Path(_bootstrap.__file__)]


class Programs:
    """Stands in for every other program: writes down what was asked, answers with an exit status."""

    def __init__(self) -> None:
        self.asked: list[list[str]] = []
        self.fails: Callable[[list[str]], bool] = lambda command: False
        self.watch: Callable[[], None] = lambda: None

    def __call__(self, command: list[str]) -> int:
        self.asked.append(command)
        self.watch()
        if self.fails(command):
            return 1
        if "venv" in command:
            python = Path(_bootstrap.interpreter(command[-1]))
            python.parent.mkdir(parents=True, exist_ok=True)
            python.touch()
        return 0

    def with_words(self, *words: str) -> list[list[str]]:
        return [command for command in self.asked if set(words) <= set(command)]


@pytest.fixture
def programs(monkeypatch: pytest.MonkeyPatch) -> Programs:
    started = Programs()
    monkeypatch.setattr(_bootstrap, "status_of", started)
    monkeypatch.setattr(_bootstrap, "link_checkout", lambda root, venv: None)
    monkeypatch.setattr(_bootstrap.shutil, "which", lambda name: None)
    monkeypatch.setenv("PYTHONSAFEPATH", "")
    return started


@pytest.fixture
def root(tmp_path: Path) -> Path:
    checkout = tmp_path / "a path with spaces"
    (checkout / "tests").mkdir(parents=True)
    (checkout / "requirements.lock").write_text("one==1\n")
    (checkout / "tests" / "requirements.lock").write_text("one==1\ntwo==2\n")
    return checkout


def ready(root: Path, folder: str = ".") -> Path:
    return Path(_bootstrap.ready_python(str(root), os.path.normpath(root / folder / "requirements.lock")))


def unwritable(monkeypatch: pytest.MonkeyPatch, folder: Path, cache: Path) -> None:
    """Mode bits do not stop an administrator, so the question is answered in their place."""
    real = os.access
    monkeypatch.setattr(_bootstrap.os, "access", lambda path, mode: str(path) != str(folder) and real(path, mode))
    monkeypatch.setattr(_bootstrap, "user_cache", lambda: str(cache))


@pytest.mark.parametrize("path", STARTS, ids=lambda path: f"{path.parent.name}/{path.name}")
def test_parses_on_old_python(path: Path) -> None:
    ast.parse(path.read_text("utf-8"), feature_version=(3, 7))
    assert path.read_bytes().isascii(), "a Python without a declared encoding stops at the first other letter"


def test_old_python_gets_one_sentence(monkeypatch: pytest.MonkeyPatch, root: Path, programs: Programs) -> None:
    monkeypatch.setattr(_bootstrap.sys, "version_info", (3, 8, 18))
    with pytest.raises(SystemExit) as stop:
        ready(root)
    assert stop.value.code == "Owlight needs Python 3.11 or later; this is Python 3.8."
    assert not programs.asked


def test_second_start_builds_nothing(root: Path, programs: Programs) -> None:
    python = ready(root)
    asked = len(programs.asked)
    assert python.is_relative_to(root / ".venv")
    assert ready(root) == python
    assert len(programs.asked) == asked > 0


def test_every_install_is_hashed(root: Path, programs: Programs, monkeypatch: pytest.MonkeyPatch) -> None:
    ready(root)
    monkeypatch.setattr(_bootstrap.shutil, "which", lambda name: "/somewhere/uv")
    (root / "requirements.lock").write_text("one==2\n")
    ready(root)
    installs = programs.with_words("install")
    assert [Path(command[0]).name for command in installs] == ["python", "uv"]
    for command in installs:
        assert {"--require-hashes", "--only-binary", ":all:", str(root / "requirements.lock")} <= set(command)


def test_failing_uv_is_followed_by_pip(root: Path, programs: Programs, monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr(_bootstrap.shutil, "which", lambda name: "/somewhere/uv")
    programs.fails = lambda command: command[0] == "/somewhere/uv"
    ready(root)
    assert programs.with_words("-m", "venv") and programs.with_words("-m", "pip", "install")


def test_missing_ensurepip_is_no_obstacle(root: Path, programs: Programs, monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setitem(sys.modules, "ensurepip", None)
    venv_python = _bootstrap.interpreter(str(root / ".venv"))
    programs.fails = lambda command: command[0] == venv_python and "find_spec('pip')" in command[-1]
    ready(root)
    assert programs.with_words("venv", "--without-pip")
    (install,) = programs.with_words("install")
    assert install[:5] == [sys.executable, "-m", "pip", "--python", venv_python]


def test_no_pip_anywhere_is_said(root: Path, programs: Programs) -> None:
    programs.fails = lambda command: "find_spec('pip')" in command[-1]
    with pytest.raises(SystemExit) as stop:
        ready(root)
    assert stop.value.code == _bootstrap.NO_INSTALLER


def test_failed_install_leaves_no_stamp(root: Path, programs: Programs) -> None:
    programs.fails = lambda command: "install" in command
    with pytest.raises(SystemExit) as stop:
        ready(root)
    assert stop.value.code == _bootstrap.NOT_INSTALLED
    programs.fails = lambda command: False
    ready(root)
    assert len(programs.with_words("install")) == 2


def test_stamp_comes_last(root: Path, programs: Programs) -> None:
    ready(root)
    (root / "requirements.lock").write_text("one==2\n")
    seen: list[list[Path]] = []
    programs.watch = lambda: seen.append(list((root / ".venv").glob("*.stamp")))
    ready(root)
    assert seen[-1] == [], "while packages change no stamp may say complete"
    assert list((root / ".venv").glob("*.stamp"))


def test_interrupted_start_is_completed_later(root: Path, programs: Programs) -> None:
    def interrupt(command: list[str]) -> bool:
        if "install" in command:
            raise KeyboardInterrupt
        return False

    programs.fails = interrupt
    with pytest.raises(SystemExit) as stop:
        ready(root)
    assert stop.value.code == 130
    programs.fails = lambda command: False
    ready(root)
    assert len(programs.with_words("install")) == 2


def test_test_lock_serves_runs_too(root: Path, programs: Programs) -> None:
    ready(root, "tests")
    ready(root)
    assert len(programs.with_words("install")) == 1


def test_other_commit_withdraws_both_stamps(root: Path, programs: Programs) -> None:
    ready(root, "tests")
    (root / "requirements.lock").write_text("one==0\n")  # an older commit, only run
    ready(root)
    (root / "requirements.lock").write_text("one==1\n")
    ready(root, "tests")
    assert len(programs.with_words("install")) == 3, "the newer packages were replaced: they must be put back"


def test_moved_checkout_runs_its_own_code(root: Path, programs: Programs) -> None:
    ready(root)
    moved = root.rename(root.parent / "moved")
    ready(moved)
    assert len(programs.with_words("install")) == 2


def test_other_python_gets_a_new_environment(root: Path, programs: Programs) -> None:
    ready(root)
    (root / "requirements.lock").write_text("one==2\n")
    programs.fails = lambda command: "version_info" in command[-1]
    (root / ".venv" / "left over").touch()
    ready(root)
    assert not (root / ".venv" / "left over").exists()


def test_unwritable_checkout_uses_cache_folder(
    root: Path, programs: Programs, monkeypatch: pytest.MonkeyPatch, capsys: pytest.CaptureFixture[str]
) -> None:
    cache = root.parent / "cache" / "owlight"
    unwritable(monkeypatch, root, cache)
    python = ready(root)
    assert python.is_relative_to(cache) and not (root / ".venv").exists()
    assert f"goes to {cache}" in capsys.readouterr().err
    assert ready(root) == python
    assert capsys.readouterr().err == ""


def test_shared_environment_in_unwritable_checkout(
    root: Path, programs: Programs, monkeypatch: pytest.MonkeyPatch
) -> None:
    python = ready(root)
    unwritable(monkeypatch, root, root.parent / "cache")
    assert ready(root) == python


def test_nothing_writable_is_said(root: Path, programs: Programs, monkeypatch: pytest.MonkeyPatch) -> None:
    (root.parent / "a file").touch()
    unwritable(monkeypatch, root, root.parent / "a file" / "owlight")
    with pytest.raises(SystemExit, match="Neither the checkout nor your cache folder can be written"):
        ready(root)


def test_second_of_two_starts_waits(
    root: Path, programs: Programs, monkeypatch: pytest.MonkeyPatch, capsys: pytest.CaptureFixture[str]
) -> None:
    waits = threading.Event()
    speak = _bootstrap.say

    def say(words: str) -> None:
        speak(words)
        if "waiting for it" in words:
            waits.set()

    monkeypatch.setattr(_bootstrap, "say", say)
    found: list[Path] = []
    with _bootstrap.Turn(str(root / ".venv.lock")):
        second = threading.Thread(target=lambda: found.append(ready(root)))
        second.start()
        assert waits.wait(10) and not programs.asked
        _bootstrap.build(str(root), str(root / "requirements.lock"), str(root / ".venv"))
    second.join(10)
    assert found == [Path(_bootstrap.interpreter(str(root / ".venv")))]
    assert len(programs.with_words("install")) == 1


def test_killed_builder_frees_its_turn(root: Path) -> None:
    hold = "import sys, _bootstrap; turn = _bootstrap.Turn(sys.argv[1]).__enter__(); print('held', flush=True); input()"
    command = [sys.executable, "-c", hold, str(root / ".venv.lock")]
    surroundings = {**os.environ, "PYTHONPATH": str(Path(_bootstrap.__file__).parent)}
    with subprocess.Popen(command, stdin=subprocess.PIPE, stdout=subprocess.PIPE, env=surroundings) as holder:
        assert holder.stdout is not None and holder.stdout.readline() == b"held\n"
        turn = _bootstrap.Turn(str(root / ".venv.lock"))
        turn.file = open(turn.path, "a+")  # noqa: SIM115  closed by __exit__
        assert not turn.taken()
        holder.kill()
        holder.wait()
        assert turn.taken()
        turn.__exit__()


@pytest.mark.skipif(os.name == "nt", reason="the other system's locks")
@pytest.mark.parametrize(("number", "taken"), [(errno.EAGAIN, False), (errno.ENOLCK, True)])
def test_folder_without_locks_starts_too(root: Path, monkeypatch: pytest.MonkeyPatch, number: int, taken: bool) -> None:
    def flock(file: object, kind: int) -> None:
        raise OSError(number, "")

    monkeypatch.setattr("fcntl.flock", flock)
    turn = _bootstrap.Turn(str(root / ".venv.lock"))
    with open(turn.path, "a+") as turn.file:
        assert turn.taken() is taken


@pytest.mark.skipif(os.name == "nt", reason="there a child is waited for")
def test_hands_over_its_process() -> None:
    become = "import os, sys, _bootstrap; print(os.getpid()); "
    become += "_bootstrap.become([sys.executable, '-c', 'import os; print(os.getpid())'])"
    surroundings = {**os.environ, "PYTHONPATH": str(Path(_bootstrap.__file__).parent)}
    said = subprocess.run([sys.executable, "-c", become], env=surroundings, capture_output=True, check=True).stdout
    before, after = said.split()
    assert before == after, "Ctrl-C must reach the one process that can make the bench safe"


def test_windows_waits_for_a_child(programs: Programs, monkeypatch: pytest.MonkeyPatch) -> None:
    before = signal.getsignal(signal.SIGINT)
    monkeypatch.setattr(_bootstrap.os, "name", "nt")
    try:
        programs.fails = lambda command: True
        assert _bootstrap.become(["python.exe", "-m", "owlight"]) == 1
        assert signal.getsignal(signal.SIGINT) is signal.SIG_IGN
    finally:
        signal.signal(signal.SIGINT, before)


@pytest.mark.skipif(os.name == "nt", reason="links need a privilege there")
@pytest.mark.parametrize("folder", ["src", "tests"])
def test_link_to_checkout_is_the_checkout(tmp_path: Path, folder: str) -> None:
    (tmp_path / "link").symlink_to(CHECKOUT)
    show = "import runpy, sys; print(runpy.run_path(sys.argv[1])['HERE'])"
    surroundings = {**os.environ, "PYTHONPATH": str(Path(_bootstrap.__file__).parent)}
    command = [sys.executable, "-c", show, str(tmp_path / "link" / folder / "__main__.py")]
    found = subprocess.run(command, cwd=tmp_path, env=surroundings, capture_output=True, text=True, check=True)
    assert found.stdout.strip() == str((CHECKOUT / folder).resolve()), "else each name would set everything up again"


def test_bare_start_names_the_commands(tmp_path: Path) -> None:
    found = subprocess.run(
        [sys.executable, str(CHECKOUT / "src")], cwd=tmp_path, capture_output=True, text=True, check=True
    )
    lines = found.stdout.splitlines()
    assert [line.split()[1:3][-1] for line in lines[:4]] == ["demo", "forecast", "run", "report"]
    assert lines[4].split()[:2] == ["python3", "tests"] and len(lines) == 5
    assert found.stderr == ""


REAL_START = """
import sys
sys.modules["ensurepip"] = None
sys.path[0] = sys.argv[1]
import _bootstrap
del sys.path[0]
_bootstrap.shutil.which = lambda name: None
python = _bootstrap.ready_python(sys.argv[2], sys.argv[2] + "/requirements.lock")
sys.exit(_bootstrap.become([python, "-m", "found_by_path_file"]))
"""


def test_real_environment_without_ensurepip(tmp_path: Path) -> None:
    """The one real environment of these tests: empty lock, no network, spaces in its path, ensurepip hidden."""
    root, here = tmp_path / "a path with spaces", tmp_path / "here"
    (root / "src").mkdir(parents=True)
    here.mkdir()
    (root / "src" / "found_by_path_file.py").write_text("import statistics\nprint(statistics.mean([1, 3]))\n")
    (root / "requirements.lock").write_text("# nothing is needed\n")
    (here / "statistics.py").write_text("raise SystemExit('a file of the user shadows the standard library')\n")
    (tmp_path / "start.py").write_text(REAL_START)
    surroundings = {name: value for name, value in os.environ.items() if not name.startswith("PYTHON")}
    command = [sys.executable, str(tmp_path / "start.py"), str(Path(_bootstrap.__file__).parent), str(root)]
    found = subprocess.run(command, cwd=here, env=surroundings, capture_output=True, text=True, check=False)
    assert (found.returncode, found.stdout) == (0, "2\n"), found.stderr


UNWRITABLE_DEMO = """
import os, runpy, sys
start = runpy.run_path(sys.argv[1])
os.access = lambda path, mode: False
for words in (["demo"], ["demo", "--logbook=mine"], ["show", "last"]):
    print(start["place_for_demo"](words))
"""


def test_demo_finds_a_folder_to_write(tmp_path: Path) -> None:
    command = [sys.executable, "-c", UNWRITABLE_DEMO, str(CHECKOUT / "src" / "__main__.py")]
    surroundings = {**os.environ, "PYTHONPATH": str(Path(_bootstrap.__file__).parent), "HOME": str(tmp_path)}
    surroundings["USERPROFILE"] = str(tmp_path)
    found = subprocess.run(command, cwd=tmp_path, env=surroundings, capture_output=True, text=True, check=True)
    assert found.stdout.splitlines() == [str(["--logbook", str(tmp_path / "owlight-demo")]), "[]", "[]"]
