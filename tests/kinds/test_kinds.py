"""Every kind in every frame: partials against central differences, values against tables worked by hand.

Step theory. With step h the central difference errs by h^2/6 |f'''| and by the rounding of f and of its argument,
eps (|f| + |x| |f'|) / h. The third derivative is itself measured, by the five-point difference with a long step, so the
tolerance knows nothing of the kind; the test would accept four times the sum.
"""

from __future__ import annotations

import inspect
import tomllib
from collections.abc import Callable
from pathlib import Path

import numpy as np
import pytest
from numpy.typing import NDArray

import adjust.frames
from adjust.frames import LocalPlane
from adjust.kinds import KINDS
from adjust.kinds.base import Kind
from tests.helpers import close

HERE = Path(__file__).parent
Array = NDArray[np.float64]
STEP, LONG = 1e-3, 1.0
EPS = np.finfo(float).eps
FRAMES = {
    name: found
    for name, found in inspect.getmembers(adjust.frames, inspect.isclass)
    if found.__module__ == "adjust.frames" and hasattr(found, "sights") and hasattr(found, "carry")
}
TABLES = {path.stem: tomllib.loads(path.read_text("utf-8")) for path in sorted(HERE.glob("*.toml"))}
CASES = [
    pytest.param(name, case, id=f"{name}: {case['what']}") for name, table in TABLES.items() for case in table["case"]
]


def test_every_frame_is_found() -> None:
    assert "LocalPlane" in FRAMES


def wrapped(difference: Array, kind: Kind) -> Array:
    """Differences of values, within half a circle where the values are angles."""
    return np.remainder(difference + np.pi, 2 * np.pi) - np.pi if kind.wraps else difference


def differences(value: Callable[[float], Array], kind: Kind, size: float) -> tuple[Array, Array]:
    """Central difference of value(step) and the error allowed for it; ``size`` is that of the argument."""
    middle = value(0.0)

    def moved(h: float) -> Array:
        return wrapped(value(h) - middle, kind)

    slope = (moved(STEP) - moved(-STEP)) / (2 * STEP)
    third = (moved(2 * LONG) - 2 * moved(LONG) + 2 * moved(-LONG) - moved(-2 * LONG)) / (2 * LONG**3)
    rounding = EPS * (np.abs(middle) + np.pi * kind.wraps + (size + 1) * (np.abs(slope) + EPS)) / STEP
    return slope, 4 * (STEP**2 / 6 * np.abs(third) + rounding)


def compare(partial: Array, slope: Array, allowed: Array) -> None:
    """Partials within the error of the difference, which itself must tell them from zero where they are not small."""
    assert (np.abs(partial - slope) <= allowed).all(), np.abs(partial - slope).max()
    large = np.abs(slope) > 1e-3 * np.abs(slope).max()
    assert (allowed[large] < 1e-3 * np.abs(slope[large])).all() or not np.abs(slope).max(), "the tolerance accepts zero"


@pytest.mark.parametrize("name", KINDS)
def test_partials_by_the_sights_and_by_the_group(name: str) -> None:
    kind, rng = KINDS[name], np.random.default_rng(31)
    m, s = 40, len(kind.sights)
    sights = rng.uniform(40.0, 200.0, (m, s, 4)) * rng.choice([-1.0, 1.0], (m, s, 4))
    group = rng.uniform(-3.0, 3.0, m)
    _, by_sight, by_group = kind.geometry(sights, group)
    assert by_sight.shape == (m, len(kind.parts), s, 4)
    assert by_group.shape == (m, len(kind.parts))
    for k in range(s):
        for c in range(4):
            step = np.zeros_like(sights)
            step[:, k, c] = 1.0
            compare(by_sight[:, :, k, c],
                    *differences(lambda h, d=step: kind.geometry(sights + h * d, group)[0], kind, 200.0))  # fmt: skip
    compare(by_group, *differences(lambda h: kind.geometry(sights, group + h)[0], kind, 3.0))
    assert bool(np.abs(by_group).max()) == (kind.group is not None)


def sights_of(frame: LocalPlane, positions: Array, ends: list[tuple[NDArray[np.int64], NDArray[np.int64]]],
              m: int) -> Array:  # fmt: skip
    """Sights (m, s, 4); a kind without stations has none."""
    return np.concatenate([np.empty((m, 0, 4)), *(frame.sights(positions, *pair)[:, None] for pair in ends)], axis=1)


@pytest.mark.parametrize("frame_name", FRAMES)
@pytest.mark.parametrize("name", KINDS)
def test_partials_carried_to_both_ends(name: str, frame_name: str) -> None:
    kind, frame, rng = KINDS[name], FRAMES[frame_name](), np.random.default_rng(32)
    m, n = 40, len(kind.stations)
    grid = np.array([[0.0, 0.0, 0.0], [150.0, 20.0, 5.0], [-30.0, 160.0, -4.0]])[:n]
    positions = (grid[None] + rng.uniform(-40.0, 40.0, (m, n, 3)) + [500.0, 300.0, 60.0]).reshape(-1, 3)
    station = np.arange(m * n).reshape(m, n)
    group = rng.uniform(-3.0, 3.0, m)

    def ends(i: int, j: int) -> tuple[NDArray[np.int64], NDArray[np.int64]]:
        return (station[:, i] if i >= 0 else np.full(m, -1)), station[:, j]

    def value(at: Array) -> Array:
        return kind.geometry(sights_of(frame, at, [ends(*pair) for pair in kind.sights], m), group)[0]

    sights = sights_of(frame, positions, [ends(*pair) for pair in kind.sights], m)
    by_sight = kind.geometry(sights, group)[1]
    total = np.zeros((m, len(kind.parts), n, 3))
    for k, pair in enumerate(kind.sights):
        carried = frame.carry(by_sight[:, :, k])
        for end, place in enumerate(pair):
            if place >= 0:
                total[:, :, place] += carried[:, :, end]
    for place in range(n):
        for c in range(3):
            step = np.zeros_like(positions)
            step[station[:, place], c] = 1.0
            found = differences(lambda h, d=step: value(positions + h * d), kind, 700.0)
            compare(total[:, :, place, c], *found)


def test_every_kind_has_a_table_and_every_table_a_kind() -> None:
    assert set(TABLES) == set(KINDS)
    assert all(len(table["case"]) >= 3 for table in TABLES.values())


@pytest.mark.parametrize(("name", "case"), CASES)
def test_worked_values(name: str, case: dict[str, object]) -> None:
    kind = KINDS[name]
    positions = np.array(case["positions"], float)
    group = np.radians([float(str(case.get("group_degrees", 0)))])
    starts = [(np.array([i]), np.array([j])) for i, j in kind.sights]
    got = kind.geometry(sights_of(LocalPlane(), positions, starts, 1), group)[0][0]
    unit = {"angle": "degrees", "length": "metres", "number": "number"}[kind.dimension]
    wanted = np.radians(case[unit]) if unit == "degrees" else np.array(case[unit], float)
    assert got.shape == wanted.shape
    size = max(np.abs(positions).max(initial=0), np.abs(wanted).max()) if not kind.wraps else np.pi
    close(np.abs(wrapped(got - wanted, kind)), np.zeros(len(wanted)), atol=4 * EPS * size)


def test_a_worked_value_that_is_wrong_is_seen() -> None:
    case = {"what": "a wrong 3-4-5", "positions": [[0, 0, 0], [3, 4, 0]], "metres": [5.000001]}
    with pytest.raises(AssertionError):
        test_worked_values("distance", case)


def test_a_partial_that_is_wrong_is_seen() -> None:
    slope, allowed = differences(lambda h: np.array([[np.hypot(3.0 + h, 4.0)]]), KINDS["distance"], 5.0)
    compare(np.array([[0.6]]), slope, allowed)
    with pytest.raises(AssertionError):
        compare(np.array([[0.6001]]), slope, allowed)
