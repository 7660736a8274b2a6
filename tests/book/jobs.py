"""Small jobs for the tests of reading."""

from __future__ import annotations

from pathlib import Path

from adjust import Job, read
from adjust.network import Block

HEAD = """
[units]
length = "m"
angle = "dms"
[instruments.station-1]
distance = "2 mm + 3 ppm"
direction = "2 sec"
azimuth = "5 sec"
zenith = "3 sec"
[instruments.level-1]
levelling = "1.2 mm*sqrt(km)"
"""
PLAIN = "from,to,distance,note\nA,B,100.5,x\nB,C,200.25,y\n"


def job(folder: Path, toml: str = HEAD, **tables: str | bytes) -> Job:
    """A job of ``kind=text`` tables, read."""
    folder.mkdir(exist_ok=True)
    (folder / "job.toml").write_text(toml, "utf-8")
    for kind, text in tables.items():
        (folder / f"{kind}.csv").write_bytes(text if isinstance(text, bytes) else text.encode())
    return read(folder)


def one(folder: Path, toml: str = HEAD, **tables: str | bytes) -> Block:
    """The only block of observations of such a job."""
    (block,) = job(folder, toml, **tables).network.blocks
    return block


def ends(found: Job) -> list[tuple[str, ...]]:
    """Station names of every row in the order of the record."""
    names = found.network.stations.names
    return [tuple(names[i] for i in row) for block in found.network.blocks for row in block.stations]
