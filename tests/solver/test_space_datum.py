"""Scale of a free network in space: angles alone have none, one length or one levelled line gives it."""

from __future__ import annotations

from pathlib import Path

import numpy as np
import pytest

import adjust
from adjust.errors import Unsolvable
from tests.helpers import close

PLACES = {"A": (0.0, 0.0, 10.0), "B": (200.0, 10.0, 30.0), "C": (150.0, 180.0, 55.0), "D": (-20.0, 170.0, 40.0)}
TOML = """[units]
length = "m"
angle = "deg"
[instruments.i]
direction = "3 sec"
zenith = "3 sec"
levelling = "1 mm*sqrt(km)"
"""
LEVELLED = "from,to,rise,length\nA,B,20.001,200\n"
DISTANCE = "from,to,distance,sd\nA,C,234.307,0.003\n"


def job(folder: Path, more: dict[str, str]) -> adjust.Job:
    """Directions and zenith angles between all, with noise; curvature is left out of what is booked."""
    rng = np.random.default_rng(1)
    directions, zeniths = ["at,to,direction"], ["from,to,zenith_angle,instrument_height,target_height"]
    for a, (ea, na, ha) in PLACES.items():
        for b, (eb, nb, hb) in PLACES.items():
            if a != b:
                d = np.hypot(eb - ea, nb - na)
                azimuth = np.degrees(np.arctan2(eb - ea, nb - na)) + rng.normal(0, 3 / 3600)
                zenith = np.degrees(np.arctan2(d, hb - ha - 0.87 * d * d / 2 / 6371000)) + rng.normal(0, 3 / 3600)
                directions.append(f"{a},{b},{float(azimuth % 360)!r}")
                zeniths.append(f"{a},{b},{float(zenith)!r},0,0")
    tables = {"directions": "\n".join(directions) + "\n", "zenith_angles": "\n".join(zeniths) + "\n", **more}
    folder.mkdir(parents=True, exist_ok=True)
    (folder / "job.toml").write_text(TOML)
    for name, text in tables.items():
        (folder / f"{name}.csv").write_text(text)
    return adjust.read(folder)


def starts(header: str = "station,east,north,height") -> str:
    return header + "\n" + "".join(f"{k},{e},{n},{h}\n" for k, (e, n, h) in PLACES.items())


@pytest.mark.parametrize(("more", "missing"), [({}, 5), ({"levelled": LEVELLED}, 4), ({"distances": DISTANCE}, 4)])
def test_freedoms_of_a_free_network_in_space(tmp_path: Path, more: dict[str, str], missing: int) -> None:
    """Curvature alone would fix the scale to tens of metres; it counts as free."""
    judgement = adjust.assess(adjust.solve(job(tmp_path, {"stations": starts(), **more})))
    solution = judgement.solution
    assert solution.total.datum_missing == missing
    close(judgement.reliability.redundancy.sum(), solution.total.degrees_of_freedom, atol=1e-4)
    assert np.nanmax(solution.sd) < 0.02


def test_angles_alone_say_that_they_have_no_scale(tmp_path: Path) -> None:
    control = "station,east,north,height\nA,0,0,10\n"
    rows = "from,to,azimuth,sd\nA,B,87.137594773888,5\n"
    made = job(tmp_path, {"stations": starts(), "control": control, "azimuths": rows})
    with pytest.raises(Unsolvable, match="nothing fixes the scale of A, B, C, D about A"):
        adjust.solve(made)
