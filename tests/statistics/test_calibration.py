"""What the judge states is true as often as it says: reduced draws of the study in calibration.py, seeded.

Every rate must lie within four standard errors of its nominal value, and its negative control, sigma wrong by 5 %,
outside. The full study is run by script; its tables stand in docs/measured.md.
"""

from __future__ import annotations

import math
from functools import cache
from pathlib import Path

import numpy as np
import pytest

from adjust.judge import critical
from tests.helpers import close
from tests.statistics.calibration import Result, compare
from tests.statistics.draws import MODES, Bench
from tests.statistics.jobs import network
from tests.statistics.rates import FIVE, Rate, Rates, both_above, coverage, detection, of_jobs, of_readings

DRAWS, JOBS = 10_000, 2_000
"""Draws judged as arrays, and draws judged one by one."""
SEED = 42


@cache
def bench(name: str, folder: Path) -> Bench:
    return Bench(network(name, folder))


@pytest.fixture(scope="module")
def place(tmp_path_factory: pytest.TempPathFactory) -> Path:
    return tmp_path_factory.mktemp("networks")


def assert_calibrated(rates: Rates, controls: Rates, spared: tuple[str, ...] = ()) -> None:
    """Every rate inside its bound; every control of a rate with a nominal value outside, but those ``spared``."""
    assert rates
    for name, rate in rates.items():
        assert rate.holds, f"{name}: {rate}"
        if rate.low > 0 and name not in spared:
            assert Result(rate, controls[name]).control_fails, f"the control of {name}: {controls[name]}, {rate}"


@pytest.mark.parametrize("mode", MODES)
@pytest.mark.parametrize("name", ["levels, weighted", "plane, held, centring", "space, free"])
def test_figures_and_readings(place: Path, name: str, mode: str) -> None:
    """Ellipses, circles, relative ellipses, intervals, false alarms and the job's level."""
    print("seed", SEED)
    of, given = bench(name, place), mode == "given"
    errors = of.clean.errors(np.random.default_rng(SEED), DRAWS)
    rates = of_readings(of, of.of(errors), mode)
    larger = of.of(errors * (1 + FIVE)) if given else of.of(errors)
    assert_calibrated(rates, of_readings(of, larger, mode, 1.0 if given else 1 / (1 + FIVE)))


@pytest.mark.parametrize(
    ("name", "mode"),
    [("plane, held, centring", "given"), ("plane, weighted", "from-residuals"),
     ("two halves on one common mark", "from-residuals")],
)  # fmt: skip
def test_whole_jobs_and_marks(place: Path, name: str, mode: str) -> None:
    """Overall tests, marks and exit 1; rare ones need the full study for their controls."""
    print("seed", SEED)
    of, given = bench(name, place), mode == "given"
    errors = of.clean.errors(np.random.default_rng(SEED), JOBS)
    rates = of_jobs(of, of.of(errors), mode, 1.0, FIVE)
    few = errors[: JOBS // 3]
    larger = of.of(few * (1 + FIVE)) if given else of.of(few)
    controls = of_jobs(of, larger, mode, 1.0 if given else 1 / (1 + FIVE), FIVE)
    weak = ("overall, better than stated",)
    assert any(name not in weak and rate.low > 0 for name, rate in rates.items())
    assert_calibrated(rates, controls, weak)


@pytest.mark.parametrize("mode", MODES)
@pytest.mark.parametrize("name", ["quadrilateral, few to spare", "plane, held, centring"])
def test_the_smallest_detectable_blunder_is_found_with_its_power(place: Path, name: str, mode: str) -> None:
    print("seed", SEED)
    of, rng = bench(name, place), np.random.default_rng(SEED)
    errors = of.clean.errors(rng, DRAWS)
    rate = detection(of, errors, mode, 4, rng)
    assert_calibrated({"found": rate}, {"found": detection(of, errors * (1 + FIVE), mode, 4, rng)})


@pytest.mark.parametrize("name", ["levels, free", "plane, weighted, centring", "space, held, centring"])
def test_draws_at_one_linearisation_say_what_complete_adjustments_say(place: Path, name: str) -> None:
    print("seed", SEED)
    found = compare(bench(name, place), 6, SEED)
    assert found.of > 100
    assert found.verdicts == 0
    # second-order terms: a millimetre in 40 m; noise that was not carried through would differ by about 1
    assert max(found.statistic, found.scale, found.place, found.misfit) < 1e-3


def test_normal_factors_on_a_scale_from_few_residuals_would_not_do(place: Path) -> None:
    """Student and Fisher are needed: with seven to spare the factors of a given scale cover far too little."""
    print("seed", SEED)
    of = bench("quadrilateral, few to spare", place)
    draws = of.draw(np.random.default_rng(SEED), DRAWS)
    scale = of.scale(draws, "from-residuals")
    assert all(rate.holds for rate in coverage(of.base["given"], of.base["from-residuals"].degrees, draws.moves, scale)
               .values())  # fmt: skip
    wrong = coverage(of.base["given"], None, draws.moves, scale)
    assert all(rate.off < -20 for rate in wrong.values()), wrong


def test_errors_are_drawn_with_the_covariance_they_are_said_to_have(place: Path) -> None:
    """The study's own figures: without this a wrong draw could excuse a wrong judge."""
    print("seed", SEED)
    clean = bench("plane, held, centring", place).clean
    errors = clean.errors(np.random.default_rng(SEED), DRAWS)
    size = np.sqrt(np.diag(clean.covariance))
    got = np.cov(errors.T / size[:, None])
    close(got, clean.covariance / size / size[:, None], atol=5 / math.sqrt(DRAWS))


@pytest.mark.parametrize("r", [None, 3, 8, 40])
def test_two_statistics_above_their_limit(r: int | None) -> None:
    """Alone, always together, never tied, and tied by 0.6, by drawing."""
    level = 0.01
    limit = critical.normal_critical(level) if r is None else critical.tau_critical(level, r)
    assert limit is not None
    print("seed", SEED)
    rng, n = np.random.default_rng(SEED), 400_000
    z = rng.normal(size=(n, r or 2))
    unit = np.sqrt((z**2).sum(axis=1) / r) if r else np.ones(n)
    first, second = z[:, 0] / unit, (0.6 * z[:, 0] + 0.8 * z[:, 1]) / unit
    drawn = np.array([level, float(((np.abs(first) > limit) & (np.abs(second) > limit)).mean())])
    found = both_above(limit, np.array([1.0, 0.6]), r)
    close(found[0], drawn[0], atol=2e-5)
    close(found[1], drawn[1], atol=4.5 * math.sqrt(drawn[1] / n) + 1e-6)
    if r is None:
        close(both_above(limit, np.zeros(1), r)[0], level**2, atol=1e-9)


def test_a_rate_of_tied_statements_has_the_error_of_its_jobs() -> None:
    """Ten statements that say the same count as one."""
    print("seed", SEED)
    one = np.random.default_rng(SEED).random((1000, 1)) < 0.05
    close(Rate.of(np.repeat(one, 10, axis=1), 0.05).error, math.sqrt(0.05 * 0.95 / 1000), atol=0.001)
