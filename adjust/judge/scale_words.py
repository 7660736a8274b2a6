"""A common scale between control and readings, and what figures of the trade it may be.

With m = known / measured length, ppm = (m - 1) 10^6, and its standard deviation, a figure is recognised if it lies
within NEAR standard deviations and no other figure of the list does:

    m = 0.3048, 1200/3937, or one over these   metres against feet (international 1959; US survey, Mendenhall 1893)
    ppm = -2.0 or +2.0                         international against US survey foot, 0.3048 * 3937/1200 = 1 - 2.0e-6
    |ppm| from 30 to 400                       lengths on the ground against grid or sea level: 10^6 H/R = 157 ppm per
                                               1,000 m of height with R = 6,371 km, scale factors to 400 ppm

Below 30 ppm air, the meter's own scale (1 ppm per degree Celsius) and small heights look alike, so nothing is named.
"""

from __future__ import annotations

import math
from dataclasses import dataclass, replace

from adjust.book.job import Job
from adjust.units import LENGTHS, US_FOOT

NEAR = 3.0
"""Standard deviations within which a stated figure is recognised."""
FOOT = LENGTHS["ft"]
FEET = {
    "the known coordinates are in metres but the lengths in feet": FOOT,
    "the known coordinates are in feet but the lengths in metres": 1 / FOOT,
    "the known coordinates are in metres but the lengths in US survey feet": US_FOOT,
    "the known coordinates are in US survey feet but the lengths in metres": 1 / US_FOOT,
}
"""Cause by ratio m of known to measured lengths when both were read in one unit."""
FEET_BESIDES_PPM = 1000.0
"""Scale beside that of the foot with which it is still recognised: no other figure of the trade is within a percent."""
FOOT_PPM = (US_FOOT / FOOT - 1) * 1e6
GROUND_PPM = (30.0, 400.0)
PPM_PER_KM = 1e9 / 6.371e6


@dataclass(frozen=True)
class ScaleFinding:
    """A common scale of the control against the readings."""

    ppm: float
    """(known / measured - 1) 10^6."""
    sd_ppm: float
    cause: str
    """feet-and-metres, foot-and-us-foot, ground-and-grid, or '' where not recognised."""
    sentence: str

    @property
    def ratio(self) -> float:
        """Known over measured length."""
        return 1 + self.ppm * 1e-6


def scale_finding(ppm: float, sd_ppm: float, agree: str = "the marks agree") -> ScaleFinding:
    """The finding for a scale and its standard deviation; ``agree``: what happens once it is allowed."""
    cause, words = recognise(ppm, sd_ppm)
    size = size_words(ppm, sd_ppm)
    return ScaleFinding(ppm, sd_ppm, cause, f"Control: {agree} once {size} is allowed for: {words}")


def size_words(ppm: float, sd_ppm: float) -> str:
    """'a common scale of -80.2 ppm (standard deviation 1.1 ppm; known lengths are shorter than measured)'."""
    longer = "longer" if ppm > 0 else "shorter"
    if abs(ppm) >= 1e5:
        m = 1 + ppm * 1e-6
        return f"a common scale of {m:.6g} times (known over measured length; standard deviation {sd_ppm * 1e-6:.1g})"
    return (f"a common scale of {ppm:+.1f} ppm (standard deviation {sd_ppm:.1f} ppm; known lengths are {longer} than "
            "measured)")  # fmt: skip


def recognise(ppm: float, sd_ppm: float) -> tuple[str, str]:
    """Cause and words."""
    near = NEAR * sd_ppm
    feet = feet_cause(ppm, sd_ppm)
    if feet:
        return "feet-and-metres", feet
    if abs(abs(ppm) - FOOT_PPM) <= near and abs(ppm) > near and abs(ppm) + near < GROUND_PPM[0]:
        return "foot-and-us-foot", (
            f"as between international and US survey feet ({FOOT_PPM:.1f} ppm); air or the distance meter's own scale "
            "can be as much: check [units] of the control and of the distances, then the air and the calibration"
        )
    low, high = abs(ppm) - near, abs(ppm) + near
    if high >= GROUND_PPM[0] and low <= GROUND_PPM[1] and low > FOOT_PPM and abs(ppm) < GROUND_PPM[1] + near:
        return "ground-and-grid", _ground(ppm)
    return "", "cause not recognised; check units, surface and corrections of the distances, and where control is from"


def _ground(ppm: float) -> str:
    factor = f"a scale factor of {1 + ppm * 1e-6:.6f}"
    height = f" or lengths not reduced from a height of about {abs(ppm) / PPM_PER_KM * 1000:.0f} m" if ppm < 0 else ""
    return (f"as between lengths on the ground and on a grid or at sea level ({factor}{height}); check the surface of "
            "the distances and what plane the known coordinates are on")  # fmt: skip


def feet_cause(ppm: float, sd_ppm: float) -> str:
    """In words, where the ratio is that of feet and metres; '' where it is not."""
    m, sd = 1 + ppm * 1e-6, sd_ppm * 1e-6
    rest = {words: (m / ratio - 1, sd / ratio) for words, ratio in FEET.items()}
    near = {words: off for words, (off, s) in rest.items() if abs(off) <= max(NEAR * s, FEET_BESIDES_PPM * 1e-6)}
    if not near:
        return ""
    exact = [words for words, (off, s) in rest.items() if abs(off) <= NEAR * s]
    best = min(near, key=lambda words: abs(near[words]))
    if len(exact) == 1:
        return f"{exact[0]}; check [units] of the control and of the distances"
    kind = best.replace("US survey ", "")
    if exact:
        return f"{kind} (international or US survey, too near to tell); check [units] of both"
    return f"{kind}, and {near[best] * 1e6:+.0f} ppm besides; check [units] of the control and of the distances"


def scale_of(job: Job) -> ScaleFinding | None:
    """A gross scale between the control of a job and its readings, told from the readings adjusted alone; None if they
    have none, or do not fit among themselves.

    For a job that was refused or does not settle: control in one unit and distances in another bend a network until
    nothing fits.
    """
    from adjust.errors import NotConverged, Unsolvable
    from adjust.judge.similarity import fit_control
    from adjust.network import HELD, WEIGHTED
    from adjust.solver.solve import solve

    role = job.network.stations.role[:, :2]
    marks = ((role == HELD) | (role == WEIGHTED)).all(axis=1).nonzero()[0]
    if job.settings.datum_kind == "free" or len(marks) < 2:
        return None
    names = tuple(job.network.stations.names[i] for i in marks)
    alone = replace(job, settings=replace(job.settings, datum_kind="free", datum_stations=names))
    try:
        solution = solve(alone)
    except (Unsolvable, NotConverged):
        return None
    fit = fit_control(solution, 1.0)
    if (
        (solution.total.variance_factor or 0.0) > HOLDS_TOGETHER
        or fit is None
        or fit.sd_scale_ppm is None
        or not math.isfinite(fit.scale_ppm)
    ):
        return None
    sd = fit.sd_scale_ppm * max(1.0, 1 + fit.scale_ppm * 1e-6)
    if abs(fit.scale_ppm) <= max(GROSS_PPM, 5 * sd):
        return None
    cause, words = recognise(fit.scale_ppm, sd)
    return ScaleFinding(fit.scale_ppm, sd, cause, "the readings hold together by themselves, and the known coordinates "
                        f"differ from them by {size_words(fit.scale_ppm, sd)}: {words}")  # fmt: skip


GROSS_PPM = 10_000.0
"""Scale from which a job that does not settle is told of it; smaller ones bend a network too little to stop it."""
HOLDS_TOGETHER = 100.0
"""Variance factor of the readings alone up to which they are said to: standard deviations may be wrong by a factor of
ten; a gross error that stops an adjustment makes thousands."""
