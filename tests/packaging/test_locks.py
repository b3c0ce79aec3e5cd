"""The locks name exactly what is installed, and nowhere to get it from."""

from __future__ import annotations

import re
import tomllib
from pathlib import Path

import pytest
from packaging.requirements import Requirement
from packaging.utils import canonicalize_name

ROOT = Path(__file__).parents[2]
LOCKS = {"run": ROOT / "requirements.lock", "tests": ROOT / "tests" / "requirements.lock"}


def locked(kind: str) -> dict[Requirement, frozenset[str]]:
    """Requirement -> its hashes."""
    text = re.sub(r"(?m)^\s*#.*\n", "", LOCKS[kind].read_text("utf-8")).replace("\\\n", " ")
    entries = [line.split() for line in text.splitlines() if line.strip()]
    found = {}
    for words in entries:
        hashes = frozenset(word for word in words if word.startswith("--hash=sha256:"))
        found[Requirement(" ".join(word for word in words if word not in hashes))] = hashes
    return found


@pytest.mark.parametrize("kind", LOCKS)
def test_every_package_is_pinned_and_hashed(kind: str) -> None:
    found = locked(kind)
    assert len(found) > 20
    for requirement, hashes in found.items():
        assert re.fullmatch(r"==[^,*]+", str(requirement.specifier)), requirement
        assert hashes, requirement


@pytest.mark.parametrize("kind", LOCKS)
def test_no_address_in_the_lock(kind: str) -> None:
    text = LOCKS[kind].read_text("utf-8")
    assert "://" not in text
    assert not re.search(r"(?m)^\s*(--index|--extra-index|--find-links|-i |-f |--trusted)", text)
    assert not re.search(r"[\s=]/\w", text), "a path of the machine that made it"


def test_test_lock_holds_the_run_lock() -> None:
    run, tests = locked("run"), locked("tests")
    missing = {str(requirement) for requirement in run if requirement not in tests}
    assert not missing, "a run after the tests would use other packages than a run alone"
    assert all(tests[requirement] == hashes for requirement, hashes in run.items())


@pytest.mark.parametrize("kind", LOCKS)
def test_lock_satisfies_the_project(kind: str) -> None:
    project = tomllib.loads((ROOT / "pyproject.toml").read_text("utf-8"))
    asked = project["project"]["dependencies"] + (project["dependency-groups"]["tests"] if kind == "tests" else [])
    pinned: dict[str, list[str]] = {}
    for requirement in locked(kind):
        pinned.setdefault(canonicalize_name(requirement.name), []).append(str(requirement.specifier)[2:])
    for wanted in map(Requirement, asked):
        versions = pinned.get(canonicalize_name(wanted.name), [])
        assert versions and all(wanted.specifier.contains(version) for version in versions), wanted
