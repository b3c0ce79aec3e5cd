"""python -I read_wheel.py FOLDER: the wheel installed in FOLDER imports, starts, and reads the data it carries."""

from __future__ import annotations

import subprocess
import sys
from pathlib import Path

place = Path(sys.argv[1]).resolve()
sys.path.insert(0, str(place))

from owlight import shipped  # noqa: E402

assert Path(shipped.__file__).is_relative_to(place), f"read {shipped.__file__} instead of the wheel"
for kind in shipped.KINDS:
    assert shipped.names(kind), f"the wheel carries no {kind}"
    for name in shipped.names(kind):
        path = shipped.find(kind, name)
        assert path.is_relative_to(place), f"{path} does not come from the wheel"
        assert path.read_text("utf-8"), f"{path} is empty"
strangers = [path for path in (place / "owlight" / "shipped").rglob("*") if path.is_file() and path.suffix != ".toml"]
assert not strangers, f"more than data: {strangers}"
assert not list(place.glob("owlight/**/test_*.py")), "the wheel carries tests"

start = f"import sys; sys.path.insert(0, {str(place)!r}); sys.argv = ['owlight', 'forecast', *sys.argv[1:]]; "
start += "from owlight.cli import main; main()"
command = [sys.executable, "-I", "-c", start, "qpsk_sensitivity", "--bench", "bench", "--json"]
found = subprocess.run(command, capture_output=True, text=True, check=False)
assert found.returncode == 0, found.stderr
print("wheel read:", {kind: len(shipped.names(kind)) for kind in shipped.KINDS})
