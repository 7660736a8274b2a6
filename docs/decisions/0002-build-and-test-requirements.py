"""Which pip does a new virtual environment get, and what does `python -m` put on the path?"""

from __future__ import annotations

import ensurepip
import platform
import subprocess
import sys
import tempfile
from pathlib import Path

SHOWN = "import os, sys; print(os.path.realpath(sys.path[0]) == os.path.realpath(os.getcwd()))"

print(f"Python {platform.python_version()} makes environments with pip {ensurepip.version()}")
with tempfile.TemporaryDirectory() as folder:
    scripts = Path(folder) / "bin"
    scripts.mkdir()
    for place in (Path(folder), scripts):
        (place / "shown.py").write_text(SHOWN, encoding="utf-8")
    for how in (["-m", "shown"], ["bin/shown.py"]):
        done = subprocess.run([sys.executable, *how], cwd=folder, capture_output=True, text=True, check=True)
        print(f"python {' '.join(how)}: the current folder is first on the path: {done.stdout.strip()}")
