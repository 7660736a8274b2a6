"""Raw books of a total station: faces, sets, limits, and what is found in them."""

from __future__ import annotations

import math
from pathlib import Path

import numpy as np
import pytest

import adjust
from adjust.book.job import Job
from adjust.errors import InputError
from adjust.units import TURN, format_angle, parse_circle
from tests.book.rounds_book import HEAD, SEC, Book
from tests.helpers import close

TABLE = '[[book]]\nkind = "rounds"\n'


def read(folder: Path, csv: str, toml: str = TABLE) -> Job:
    (folder / "job.toml").write_text(HEAD + toml, "utf-8")
    (folder / "rounds.csv").write_text(csv, "utf-8")
    return adjust.read(folder)


def faults(folder: Path, csv: str, toml: str = TABLE) -> str:
    with pytest.raises(InputError) as stop:
        read(folder, csv, toml)
    return "\n".join(stop.value.sentences)


def block(job: Job, kind: str) -> adjust.network.Block:
    return next(b for b in job.network.blocks if b.kind == kind)


def mean_of(job: Job, what: str, of: str) -> dict[str, float | None]:
    return next(r.values for r in job.reductions if r.what == what and r.of == of)


def moved(book: Book, k: int, column: str, by: float) -> Book:
    """A circle reading changed by an angle."""
    old = parse_circle(book.rows[k][column], "dms")
    book.rows[k][column] = format_angle((old + by) % TURN, "dms")
    return book


def test_a_book_with_collimation_and_index_reduces_to_the_truth(tmp_path: Path) -> None:
    """20 seeded books: collimation of minutes, circles moved between sets, readings on both sides of zero."""
    for seed in range(20):
        book = Book(np.random.default_rng([2026, seed]), pointing=0.0, distance=0.0, two_c=200 * SEC, index=75 * SEC)
        folder = tmp_path / str(seed)
        folder.mkdir()
        job = read(folder, book.csv())
        rounding = 0.06 * SEC
        for j, name in enumerate(book.names):
            got = mean_of(job, "set mean of directions", f"S to {name}")["mean"]
            assert got is not None
            off = (got - (book.direction[j] - book.direction[0]) + math.pi) % TURN - math.pi
            assert abs(off) < 2 * rounding, f"seed {seed}, {name}"
        zenith = block(job, "zenith_angle")
        close(zenith.values[: book.targets, 0], book.zenith, atol=rounding)
        close(block(job, "distance").values[: book.targets, 0], book.slope, atol=6e-5)
        close(float(mean_of(job, "index", "S")["mean"] or 0), 75 * SEC, atol=rounding)
        # 2C is seen on the circle, where it grows with 1/sin z
        two_c = mean_of(job, "collimation (2C)", "S")["mean"] or 0.0
        close(float(two_c), float((200 * SEC / np.sin(book.zenith)).mean()), atol=0.2 * SEC)


def test_means_cross_zero(tmp_path: Path) -> None:
    """359 59 in one face with 0 01 in the other is 0 00, not 180."""
    rows = ["S,A,1,359 59 30.0", "S,A,2,180 01 30.0", "S,B,1,90 00 00.0", "S,B,2,270 02 00.0"]
    job = read(tmp_path, "at,to,face,horizontal_circle\n" + "\n".join(rows) + "\n")
    got = np.degrees(block(job, "direction").values[:, 0]) * 3600
    close(got, [30.0, 90 * 3600 + 60.0], atol=1e-6)


def test_both_standard_deviations_of_a_mean(tmp_path: Path) -> None:
    book = Book(np.random.default_rng(7), sets=4, pointing=1.0 * SEC)
    job = read(tmp_path, book.csv())
    got = mean_of(job, "set mean of directions", "S to P3")
    close(float(got["sd_instrument"] or 0), SEC / 2, atol=1e-12)  # 1 second a pointing in both faces, four sets
    spread = [float(r.values["sd_spread"] or 0) for r in job.reductions if r.what == "set mean of directions"]
    assert 0.25 * SEC < spread[0] < 1.0 * SEC
    # one pointing counts as it was: the first target was sighted twice in each face
    sd = block(job, "direction").sd[:, 0] / SEC
    close(sd[:2], [1 / math.sqrt(2), 1.0], atol=1e-9)


def test_the_spread_of_sets_is_that_of_an_independent_fit(tmp_path: Path) -> None:
    book = Book(np.random.default_rng(8), sets=3, targets=5, reopen=False)
    job = read(tmp_path, book.csv())
    d = block(job, "direction").values[:, 0].reshape(3, 5)
    a = np.zeros((15, 7))  # five targets, orientations of sets 2 and 3
    for s in range(3):
        for t in range(5):
            a[5 * s + t, t] = 1.0
            if s:
                a[5 * s + t, 4 + s] = 1.0
    near = d[0] + (d[:, :1] - d[0, 0])
    off = (d - near + math.pi) % TURN - math.pi
    _, rest, *_ = np.linalg.lstsq(a, (near + off).ravel(), rcond=None)
    wanted = math.sqrt(float(rest[0]) / 8) / math.sqrt(3)
    got = [r.values["sd_spread"] for r in job.reductions if r.what == "set mean of directions"]
    close(float(got[0] or 0), wanted, atol=1e-12)


def test_a_missing_face_is_corrected_said_and_counts_half(tmp_path: Path) -> None:
    book = Book(np.random.default_rng(9), pointing=0.0, two_c=100 * SEC, index=40 * SEC, reopen=False)
    k = next(k for k, row in enumerate(book.rows) if row["set"] == "2" and row["to"] == "P4" and row["face"] == "2")
    del book.rows[k]
    job = read(tmp_path, book.csv())
    i = [job.network.stations.names[s] for s in block(job, "direction").stations[:, 1]].index("P4", 6)
    close(block(job, "direction").sd[i, 0], math.sqrt(2) * SEC, atol=1e-12)
    got = block(job, "direction").values[:, 0]
    off = (got[i] - got[6] - (book.direction[3] - book.direction[0]) + math.pi) % TURN - math.pi
    assert abs(off) < 2 * SEC  # uncorrected it would be 50 seconds
    assert abs(block(job, "zenith_angle").values[i, 0] - book.zenith[3]) < 0.2 * SEC
    assert any("read in one face only" in r.sentence for r in job.reductions)


def test_a_zenith_circle_missing_in_one_face_alone_is_corrected_too(tmp_path: Path) -> None:
    """The horizontal circle was read in both faces, the vertical one in one: the index of the others is taken off."""
    book = Book(np.random.default_rng(16), pointing=0.0, index=40 * SEC, reopen=False)
    row = next(row for row in book.rows if row["set"] == "2" and row["to"] == "P4" and row["face"] == "2")
    row["zenith_circle"] = ""
    job = read(tmp_path, book.csv())
    zenith, direction = block(job, "zenith_angle"), block(job, "direction")
    i = [job.network.stations.names[s] for s in zenith.stations[:, 1]].index("P4", 6)
    assert abs(zenith.values[i, 0] - book.zenith[3]) < 0.2 * SEC  # uncorrected it would be 40 seconds
    close(zenith.sd[i, 0], math.sqrt(2) * SEC, atol=1e-12)
    close(direction.sd[i, 0], SEC, atol=1e-12)
    assert [r.of for r in job.reductions if "read in one face only" in r.sentence] == ["S set 2 to P4"]


def test_what_is_rejected_is_called_by_its_id(tmp_path: Path) -> None:
    book = Book(np.random.default_rng(10), sets=3, reopen=False)
    for k, row in enumerate(book.rows):
        row["id"] = f"shot-{k}"
    k = next(k for k, row in enumerate(book.rows) if row["set"] == "2" and row["to"] == "P4" and row["face"] == "1")
    moved(book, k, "horizontal_circle", 60 * SEC)
    job = read(tmp_path, book.csv(), '[rejection]\ndirection = "6 sec"\n' + TABLE)
    assert [a.observation for a in job.left_out] == [f"shot-{k} direction"]


def test_limits_declared_beforehand_leave_out_what_lies_outside(tmp_path: Path) -> None:
    book = Book(np.random.default_rng(10), sets=3, reopen=False)
    k = next(k for k, row in enumerate(book.rows) if row["set"] == "2" and row["to"] == "P4" and row["face"] == "1")
    moved(book, k, "horizontal_circle", 60 * SEC)
    limits = '[rejection]\ndirection = "6 sec"\nhorizon = "5 sec"\ncollimation = "30 sec"\n'
    job = read(tmp_path, book.csv(), limits + TABLE)
    assert [(a.line, a.kind) for a in job.left_out] == [(k + 2, "direction")]
    assert "outside the limit of 6 sec declared in [rejection]" in job.left_out[0].reason
    assert len(block(job, "direction")) == 17
    verdicts = [r.verdict for r in job.reductions if r.what == "face mean"]
    assert verdicts.count("not met") == 1  # the minute shows in 2C, too
    sound = read(tmp_path, Book(np.random.default_rng(10), sets=3).csv(), limits + TABLE)
    assert sound.left_out == ()
    closures = [r for r in sound.reductions if r.what == "horizon closure"]
    assert len(closures) == 3
    assert {r.verdict for r in closures} == {"met"}


@pytest.mark.parametrize("by", [2 * math.pi, 10.0])
def test_a_distance_misread_by_metres_is_no_angle(tmp_path: Path, by: float) -> None:
    """Distances were once compared on the circle, where 6.283 m is nothing and 10 m are 2.6 m the other way."""
    book = Book(np.random.default_rng(17), sets=3, reopen=False)
    for row in book.rows:
        if row["set"] == "2" and row["to"] == "P4":
            row["slope_distance"] = f"{float(row['slope_distance']) + by:.4f}"
    job = read(tmp_path, book.csv(), '[rejection]\ndistance = "6 mm"\n' + TABLE)
    assert [a.kind for a in job.left_out] == ["distance"]
    close(float(mean_of(job, "mean of distances", "S to P4")["mean"] or 0.0), book.slope[3], atol=0.003)
    unlimited = mean_of(read(tmp_path, book.csv()), "mean of distances", "S to P4")
    close(float(unlimited["spread"] or 0.0), by, atol=0.01)


def test_of_two_sets_none_is_left_out(tmp_path: Path) -> None:
    book = Book(np.random.default_rng(11), sets=2, reopen=False)
    moved(book, 3, "horizontal_circle", 60 * SEC)
    job = read(tmp_path, book.csv(), '[rejection]\ndirection = "6 sec"\n' + TABLE)
    assert job.left_out == ()
    assert any("two sets cannot tell which is wrong" in w for w in job.warnings)


def test_a_zero_target_that_moved(tmp_path: Path) -> None:
    book = Book(np.random.default_rng(12), sets=4, reopen=False)
    for k, row in enumerate(book.rows):
        if row["set"] == "3" and row["to"] == "P1":
            moved(book, k, "horizontal_circle", 45 * SEC)
    found = [w for w in read(tmp_path, book.csv()).warnings if "zero target" in w]
    assert len(found) == 1
    assert "S set 3: the zero target P1 lies 4" in found[0]


def test_one_target_under_two_names(tmp_path: Path) -> None:
    book = Book(np.random.default_rng(13), reopen=False)
    for row in [dict(r) for r in book.rows if r["to"] == "P2"]:
        book.rows.append(row | {"to": "P2A"})
    found = [w for w in read(tmp_path, book.csv()).warnings if "two names" in w]
    assert len(found) == 1
    assert "P2 and P2A" in found[0]


def test_2c_that_changes_with_the_target(tmp_path: Path) -> None:
    book = Book(np.random.default_rng(14), sets=4, reopen=False)
    for k, row in enumerate(book.rows):
        if row["to"] == "P5":
            moved(book, k, "horizontal_circle", (20 if row["face"] == "1" else -20) * SEC)
    found = [w for w in read(tmp_path, book.csv()).warnings if "2C changes" in w]
    assert len(found) == 1
    assert "to P5" in found[0]


def test_a_sound_book_is_told_nothing(tmp_path: Path) -> None:
    """30 seeded books without a slip: no sentence in any."""
    for seed in range(30):
        book = Book(np.random.default_rng([77, seed]), sets=3)
        folder = tmp_path / str(seed)
        folder.mkdir()
        assert read(folder, book.csv()).warnings == (), f"seed {seed}"


def test_the_raw_book_adjusts_as_its_reductions_typed_as_tables(tmp_path: Path) -> None:
    """Steep sights from two known points to two new ones: the same coordinates by both ways, to the last digit."""
    raw, typed = tmp_path / "raw", tmp_path / "typed"
    toml = '[[book]]\nkind = "control"\n'
    control = "station,east,north,height\nA,0,0,100\nB,300,0,100\n"
    place = {"A": (0, 0, 100), "B": (300, 0, 100), "P": (120, 180, 130), "Q": (220, 160, 95)}
    rng = np.random.default_rng(15)
    rows = []
    for at, others in (("A", "BPQ"), ("B", "APQ")):
        for to in others:
            east, north, up = np.subtract(place[to], place[at]).tolist()
            h, z = math.atan2(east, north) % TURN, math.atan2(math.hypot(east, north), up)
            for face in (1, 2):
                a, b = rng.normal(0, SEC, 2)
                circle = (h + a + (0.0001 if face == 1 else math.pi - 0.0001)) % TURN
                vertical = (z if face == 1 else TURN - z) + 0.0002 + b
                length = math.hypot(east, north, up) + float(rng.normal(0, 0.001))
                rows.append(f"{at},{to},1,{face},{format_angle(circle, 'dms')},{format_angle(vertical, 'dms')},"
                            f"{length:.4f},1.5,1.6")  # fmt: skip
    raw.mkdir()
    (raw / "job.toml").write_text(HEAD + toml + TABLE, "utf-8")
    (raw / "control.csv").write_text(control, "utf-8")
    head = "at,to,set,face,horizontal_circle,zenith_circle,slope_distance,instrument_height,target_height\n"
    (raw / "rounds.csv").write_text(head + "\n".join(rows) + "\n", "utf-8")
    job = adjust.read(raw)
    typed.mkdir()
    names = job.network.stations.names
    kinds = {"direction": ("directions", "at,to,direction"), "zenith_angle": ("zenith_angles", "from,to,zenith_angle"),
             "distance": ("distances", "from,to,distance")}  # fmt: skip
    for kind, (table, head) in kinds.items():
        one = block(job, kind)
        count = 2 if kind == "distance" else 1  # a distance was read in each face; a pointing is both
        toml += f'[[book]]\nkind = "{table}"\n' + ('surface = "slope"\n' if kind == "distance" else "")
        heights = "" if kind == "direction" else ",instrument_height,target_height"
        lines = [f"{head}{heights},count"]
        for (s, t), value in zip(one.stations, one.values[:, 0], strict=True):
            unit = "m" if kind == "distance" else "rad"
            lines.append(f"{names[s]},{names[t]},{float(value)!r} {unit}{',1.5,1.6' if heights else ''},{count}")
        (typed / f"{table}.csv").write_text("\n".join(lines) + "\n", "utf-8")
    (typed / "job.toml").write_text(HEAD + toml, "utf-8")
    (typed / "control.csv").write_text(control, "utf-8")
    one, other = adjust.solve(job), adjust.solve(adjust.read(typed))
    order = [other.names.index(n) for n in one.names]
    close(one.positions, other.positions[order], atol=1e-10)
    assert one.total.degrees_of_freedom == other.total.degrees_of_freedom > 0


@pytest.mark.parametrize(
    ("row", "words"),
    [
        ("S,A,1,1,10 00 00,274 00 00,50", 'column face: "274 00 00": a zenith circle of face 2 in a row of face 1'),
        ("S,A,1,3,10 00 00,86 00 00,50", 'column face: "3": use one of 1, 2, left, right'),
        ("S,A,1,,10 00 00,86 00 00,50", "which face?"),
        ("S,A,1,1,,,", "a row without a reading"),
        ("S,A,1,2,30 00 01,273 00 00,50", "one circle reading in two faces"),
        ("S,A,1,1,210 00 01,86 00 00,50", "the rows are of one face"),
        ("S,S,1,1,10 00 00,86 00 00,50", "must be different stations"),
        ("S,A,1,1,10.5,86 00 00,50", "column horizontal_circle"),
        ("S,A,1,1,10 00 00,86 00 00,-50", "must be above 0"),
    ],
)
def test_bad_rows(tmp_path: Path, row: str, words: str) -> None:
    head = "at,to,set,face,horizontal_circle,zenith_circle,slope_distance\nS,A,1,1,30 00 00,87 00 00,50\n"
    found = faults(tmp_path, head + row + "\n")
    assert words in found, found
    assert "rounds.csv:3" in found


def test_a_limit_is_a_plain_size(tmp_path: Path) -> None:
    toml = '[rejection]\ndirection = "6 sec*sqrt(n)"\n' + TABLE
    assert "a plain limit is meant" in faults(tmp_path, "at,to,face,horizontal_circle\nS,A,1,30 00 00\n", toml)


def test_a_lone_target_needs_no_circle(tmp_path: Path) -> None:
    """A set to one target gives zenith angle and distance where its circle is left blank; a direction is a fault."""
    head = "at,to,set,face,horizontal_circle,zenith_circle,slope_distance\n"
    whole = "S,A,1,1,10 00 00,87 00 00,50\nS,B,1,1,80 00 00,88 00 00,60\n"
    job = read(tmp_path, head + whole + "S,A,2,1,,87 00 01,50.001\nS,A,2,2,,272 59 59,50.001\n")
    assert [len(block(job, kind)) for kind in ("direction", "zenith_angle", "distance")] == [2, 3, 3]
    found = faults(tmp_path, head + whole + "S,A,2,1,40 00 00,87 00 01,50.001\nS,A,2,2,220 00 00,272 59 59,50.001\n")
    assert found.startswith('rounds.csv:4: column horizontal_circle: "40 00 00": A is the only target of set 2 at S')
    assert "\n" not in found
    left_out = "S,A,2,1,40 00 00,87 00 01,50,,\nS,B,2,1,110 00 00,88 00 00,60,no,wind\n"
    head, whole = head.replace("\n", ",use,reason\n"), whole.replace("\n", ",,\n")
    assert "A is the only target of set 2" in faults(tmp_path, head + whole + left_out)


@pytest.mark.parametrize(("face_of", "words"), [
    ("2 1 1 2 2 2", 'rounds.csv:2: column face: "2"'),
    ("1 1 1 2 1 2", 'rounds.csv:6: column face: "1"'),  # the rows beside the fifth are of face 2
    ("1 1 1 1 2 2", "correct a face in line 4 or 5"),  # the middle of the set: nothing tells
])  # fmt: skip
def test_a_mixed_up_face_in_a_single_set(tmp_path: Path, face_of: str, words: str) -> None:
    circle = ("10 00 00", "80 00 00", "150 00 00", "330 00 00", "260 00 00", "190 00 00")
    rows = [f"S,{to},{f},{h}" for to, f, h in zip("ABCCBA", face_of.split(), circle, strict=True)]
    found = faults(tmp_path, "at,to,face,horizontal_circle\n" + "\n".join(rows) + "\n")
    assert words in found, found
    assert "\n" not in found


@pytest.mark.parametrize("sets", [1, 2, 3])
@pytest.mark.parametrize("column", ["horizontal_circle", "zenith_circle"])
def test_one_minute_in_one_face_is_named_by_its_line(tmp_path: Path, sets: int, column: str) -> None:
    """Every row of a book in turn, and of the sound book nothing."""
    for k in range(0, 12 * sets + 2, 5):
        book = moved(Book(np.random.default_rng([11, k]), sets=sets), k, column, -60 * SEC)
        own = [w for w in read(tmp_path, book.csv()).warnings if f"in line {k + 2}" in w]
        assert len(own) == 1, f"row {k}"
        assert "misread?" in own[0]
        if sets > 1:
            assert "which is 1 minute" in own[0]
            assert own[0].count(" in line ") == 1
    assert read(tmp_path, Book(np.random.default_rng(12), sets=sets).csv()).warnings == ()


@pytest.mark.parametrize(
    ("sets", "words"), [(1, "two slope distances differ by 1.00"), (2, "m longer than the middle")]
)
def test_a_metre_misread_in_a_distance(tmp_path: Path, sets: int, words: str) -> None:
    book = Book(np.random.default_rng(13), sets=sets, reopen=False)
    book.rows[2]["slope_distance"] = f"{float(book.rows[2]['slope_distance']) + 1:.4f}"
    (told,) = read(tmp_path, book.csv()).warnings
    assert words in told
    assert "in line 4" in told
