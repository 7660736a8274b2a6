"""What azimuths do for the datum: true ones fix the turn, a set with an unknown turn does not, a held one is exact."""

from __future__ import annotations

from pathlib import Path

import numpy as np
import pytest

import adjust
import adjust.solver.solve as solving
from adjust.errors import Unsolvable
from tests.helpers import close

PLACES = {"A": (100.0, 200.0), "B": (260.0, 240.0), "C": (210.0, 60.0), "D": (80.0, 40.0)}
TOML = '[units]\nlength = "m"\nangle = "deg"\n[instruments.i]\ndistance = "3 mm"\nazimuth = "10 sec"\n{more}\n'


def azimuth(a: str, b: str) -> float:
    (ea, na), (eb, nb) = PLACES[a], PLACES[b]
    return float(np.degrees(np.arctan2(eb - ea, nb - na)) % 360)


def job(folder: Path, azimuths: list[str], control: str = "A", more: str = "", seed: int = 1) -> adjust.Job:
    """All six distances with noise of 3 mm, azimuths as given."""
    rng = np.random.default_rng(seed)
    print("seed", seed)
    folder.mkdir(parents=True, exist_ok=True)
    (folder / "job.toml").write_text(TOML.format(more=more))
    if control:
        rows = [f"{m},{PLACES[m][0]},{PLACES[m][1]}\n" for m in control]
        (folder / "control.csv").write_text("station,east,north\n" + "".join(rows))
    rows = [f"{m},{e + 0.01},{n}\n" for m, (e, n) in PLACES.items()]
    (folder / "stations.csv").write_text("station,east,north\n" + "".join(rows))
    names = list(PLACES)
    rows = []
    for i, a in enumerate(names):
        for b in names[i + 1 :]:
            d = np.hypot(PLACES[b][0] - PLACES[a][0], PLACES[b][1] - PLACES[a][1]) + rng.normal(0, 0.003)
            rows.append(f"{a},{b},{float(d)!r}\n")
    (folder / "distances.csv").write_text("from,to,distance\n" + "".join(rows))
    (folder / "azimuths.csv").write_text("from,to,azimuth,set,role\n" + "".join(azimuths))
    return adjust.read(folder)


def test_azimuths_without_a_set_fix_the_turn(tmp_path: Path) -> None:
    free = adjust.solve(job(tmp_path, [f"A,B,{azimuth('A', 'B')!r},,\n"], control=""))
    assert free.total.datum_missing == 2
    assert free.parts[0].datum is not None
    assert free.parts[0].datum.missing == ("shift east", "shift north")


def test_a_set_with_an_unknown_turn_fixes_nothing(tmp_path: Path) -> None:
    rows = [f"{a},{b},{(azimuth(a, b) - 12) % 360!r},m,\n" for a, b in ("AB", "AC", "CD")]
    free = adjust.solve(job(tmp_path, rows, control=""))
    assert free.total.datum_missing == 3
    # turn = azimuth - reading
    close(np.degrees(free.groups[0]), 12.0, atol=0.01)
    judgement = adjust.assess(free)
    close(judgement.reliability.redundancy.sum(), free.total.degrees_of_freedom, atol=1e-9)
    with pytest.raises(Unsolvable, match="nothing fixes the turn of A, B, C, D about A"):
        adjust.solve(job(tmp_path / "held", rows, control="A"))


def test_a_basis_bearing_is_kept_exactly(tmp_path: Path) -> None:
    basis = 63.25
    rows = [f"A,B,{basis},,held\n", f"B,C,{azimuth('B', 'C')!r},,\n"]
    solution = adjust.solve(job(tmp_path, rows))
    de, dn = (solution.positions[1] - solution.positions[0])[:2]
    close(np.degrees(np.arctan2(de, dn)), basis, atol=1e-10)
    total = solution.total
    assert (total.observations, total.conditions, total.unknowns, total.degrees_of_freedom) == (7, 1, 6, 2)
    judgement = adjust.assess(solution)
    close(np.nansum(judgement.reliability.redundancy), 2, atol=1e-9)
    assert np.isnan(judgement.statistic[solution.design.held]).all()


def test_a_basis_bearing_is_the_limit_of_a_very_good_one(tmp_path: Path) -> None:
    basis = azimuth("A", "B") + 0.002
    held = adjust.solve(job(tmp_path / "held", [f"A,B,{basis!r},,held\n", f"B,C,{azimuth('B', 'C')!r},,\n"]))
    near = job(tmp_path / "near", [f"A,B,{basis!r},,\n", f"B,C,{azimuth('B', 'C')!r},,\n"])
    text = (near.folder / "azimuths.csv").read_text().replace("role\n", "role,sd\n").replace(",,\n", ",,,10\n")
    (near.folder / "azimuths.csv").write_text(text.replace(",,,10\n", ",,,0.001\n", 1))
    soft = adjust.solve(adjust.read(near.folder))
    close(held.positions[1:, :2], soft.positions[1:, :2], atol=1e-8)
    close(held.sd[1:, :2], soft.sd[1:, :2], atol=1e-7)
    close(held.total.square_sum, soft.total.square_sum, atol=1e-6)


def test_the_working_weight_of_a_condition_does_not_matter(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    rows = [f"A,B,{azimuth('A', 'B') + 0.01!r},,held\n", f"C,D,{azimuth('C', 'D') - 0.003!r},,held\n"]
    made = job(tmp_path, rows)
    one = adjust.solve(made)
    monkeypatch.setattr(solving, "CONDITION_SD_RAD", 40 * solving.CONDITION_SD_RAD)
    two = adjust.solve(made)
    close(one.positions[:, :2], two.positions[:, :2], atol=1e-9)
    close(one.sd[1:, :2], two.sd[1:, :2], atol=1e-10)
    for a, b, wanted in (("A", "B", azimuth("A", "B") + 0.01), ("C", "D", azimuth("C", "D") - 0.003)):
        de, dn = (one.positions[one.names.index(b)] - one.positions[one.names.index(a)])[:2]
        close(np.degrees(np.arctan2(de, dn)) % 360, wanted, atol=1e-10)


def test_a_free_network_with_a_basis_bearing_keeps_it(tmp_path: Path) -> None:
    free = adjust.solve(job(tmp_path, ["A,B,45,,held\n"], control=""))
    assert free.total.datum_missing == 2
    de, dn = (free.positions[1] - free.positions[0])[:2]
    close(np.degrees(np.arctan2(de, dn)), 45, atol=1e-10)
