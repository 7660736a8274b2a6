"""Look into the built wheel and source archive: check_archives.py CHECKOUT DIST.

The wheel must hold every tracked file of adjust/ (so the starter job and py.typed too), the licence, and nothing
else; the source archive everything that is needed to build and test again.
"""

from __future__ import annotations

import subprocess
import sys
import tarfile
import zipfile
from pathlib import Path

STARTER = {f"adjust/starter/{name}" for name in ("job.toml", "control.csv", "distances.csv", "directions.csv")}
SOURCE = {"README.md", "DEVELOPERS.md", "pyproject.toml", "docs/LICENSE.txt", "networks/simulate.py"}
SOURCE |= {".ci/run", ".ci/oldest.txt", ".github/workflows/tests.yml"}


def tracked(checkout: Path) -> set[str]:
    """Names of the files that git tracks in the checkout."""
    out = subprocess.run(["git", "-C", checkout, "ls-files", "-z"], check=True, capture_output=True, text=True).stdout
    return set(out.split("\0")) - {""}


def only(dist: Path, pattern: str) -> Path:
    """The one file of the pattern; anything else ends the check."""
    found = list(dist.glob(pattern))
    if len(found) != 1:
        sys.exit(f"one {pattern} expected, found {[p.name for p in found]}")
    return found[0]


def faults_of_wheel(wheel: Path, files: set[str]) -> list[str]:
    """One sentence a file that the wheel lacks or should not hold."""
    names = set(zipfile.ZipFile(wheel).namelist())
    info = {name for name in names if name.split("/")[0].endswith(".dist-info")}
    package = {name for name in files if name.startswith("adjust/")}
    faults = [f"wheel lacks {name}" for name in sorted((package | STARTER | {"adjust/py.typed"}) - names)]
    faults += [f"wheel holds {name}" for name in sorted(names - info - package)]
    if not any(name.endswith("/licenses/docs/LICENSE.txt") for name in info):
        faults.append("wheel lacks the licence")
    return faults


def faults_of_source(archive: Path, files: set[str]) -> list[str]:
    """One sentence a file that the source archive lacks."""
    with tarfile.open(archive) as tar:
        names = {name.partition("/")[2] for name in tar.getnames()}
    tests = {name for name in files if name.startswith(("tests/", "adjust/"))}
    return [f"source archive lacks {name}" for name in sorted((SOURCE | tests) - names)]


def main(checkout: Path, dist: Path) -> None:
    """Check both archives; the faults are the exit message."""
    files = tracked(checkout)
    wheel, archive = only(dist, "*.whl"), only(dist, "*.tar.gz")
    faults = faults_of_wheel(wheel, files) + faults_of_source(archive, files)
    if faults:
        sys.exit("\n".join(faults))
    print(f"{wheel.name} and {archive.name} hold what they should")


if __name__ == "__main__":
    main(Path(sys.argv[1]), Path(sys.argv[2]))
