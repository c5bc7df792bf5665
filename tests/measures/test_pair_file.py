"""The pair file: exact round trips, plain lists, damaged and newer files."""

import subprocess
import sys

import numpy as np
import pytest
from hypothesis import HealthCheck, given, settings
from hypothesis import strategies as st

from relorbit.errors import InputError
from relorbit.measures.pair import Pair, RecordedOrbit
from relorbit.measures.store import read_pair, write_pair
from relorbit.measures.table import TECHNIQUES
from relorbit.orbit.elements import Elements

WORDS = st.text(st.characters(exclude_categories=("Cs", "Cc")), max_size=20)


def numbers(low, high, **ways):
    return st.floats(low, high, allow_nan=False, **ways)


ROW = st.fixed_dictionaries(
    {
        "epoch": numbers(1600.0, 2200.0),
        "theta": numbers(0.0, 360.0, exclude_max=True),
        "rho": st.none() | numbers(0.0, 1e3),
        "theta_err": st.none() | numbers(1e-9, 90.0),
        "rho_err": st.none() | numbers(1e-9, 9.0),
        "weight": st.none() | numbers(0.0, 1e3),
        "technique": st.sampled_from(TECHNIQUES),
        "observer": WORDS,
        "aperture_m": st.none() | numbers(0.01, 40.0),
        "nights": st.none() | numbers(1.0, 99.0),
        "use": st.booleans(),
        "flip": st.booleans(),
        "reason": WORDS,
        "note": WORDS,
        "equinox": st.sampled_from(["J2000", "date", "1950.0", "B1950.0"]),
        "theta_obs": st.none() | numbers(0.0, 360.0, exclude_max=True),
        "epoch_obs": WORDS,
        "rho_obs": st.none() | numbers(0.0, 1e3),
        "vetted": WORDS,
    }
)
ELEMENTS = st.builds(
    Elements,
    P=numbers(0.1, 1e4), T=numbers(1000.0, 3000.0), e=numbers(0.0, 0.99), a=numbers(1e-3, 1e2),
    i=numbers(0.0, 180.0), node=numbers(0.0, 179.0), omega=numbers(0.0, 359.0),
)  # fmt: skip
MATRIX = st.none() | st.lists(numbers(-1e9, 1e9), min_size=49, max_size=49).map(
    lambda values: np.reshape(values, (7, 7))
)
ORBIT = st.builds(
    RecordedOrbit,
    WORDS, ELEMENTS,
    st.none() | st.dictionaries(st.sampled_from(list("PTea")), st.none() | numbers(0.0, 10.0)),
    st.none() | numbers(1600.0, 2200.0), MATRIX, st.none() | numbers(0.0, 1e6),
    st.none() | st.integers(0, 10**6), st.just("2020-01-02"), WORDS, WORDS,
)  # fmt: skip


def pair_of(rows, orbits=(), **who):
    columns = {name: [row[name] for row in rows] for name in rows[0]}
    note = columns.pop("note")
    pair = Pair.from_arrays(
        columns.pop("epoch"), columns.pop("theta"), columns.pop("rho"), **columns, **who
    )
    from dataclasses import fields, replace

    from relorbit.measures.table import Measures

    every = {f.name: getattr(pair.measures, f.name) for f in fields(Measures)}
    measures = Measures.from_columns({**every, "note": note})
    return replace(pair, measures=measures, orbits=tuple(orbits))


@settings(
    deadline=None, max_examples=60, suppress_health_check=[HealthCheck.function_scoped_fixture]
)
@given(
    rows=st.lists(ROW, min_size=1, max_size=6),
    orbits=st.lists(ORBIT, max_size=2),
    name=WORDS,
    names=st.lists(WORDS, max_size=3),
    parallax=st.none() | numbers(-5.0, 800.0),
)
def test_round_trip_is_exact(tmp_path, rows, orbits, name, names, parallax):
    pair = pair_of(rows, orbits, name=name, designations=names, parallax=parallax)
    write_pair(pair, tmp_path / "p.ecsv")
    back = read_pair(tmp_path / "p.ecsv")
    assert back == pair or name == ""
    assert back.measures == pair.measures
    for mine, theirs in zip(back.orbits, pair.orbits, strict=True):
        assert mine == theirs
        assert np.array_equal(mine.covariance, theirs.covariance) or mine.covariance is None


@pytest.fixture
def pair():
    return Pair.from_arrays(
        [1990.5, 1995.25, 2001.0], [10.0, 20.0, np.nan], [1.0, np.nan, 0.5], [0.5, 0.5, None],
        technique="camera", observer=["A, B", 'The "C"', ""], name="Invented 1",
        ra="15 23 12", dec="-30 17 16", parallax=25.0, magnitude_primary=5.5,
    )  # fmt: skip


def test_opens_with_astropy(pair, tmp_path):
    from astropy import units as u
    from astropy.table import Table

    pair.write(tmp_path / "p.ecsv")
    table = Table.read(tmp_path / "p.ecsv")
    assert table["rho"].unit == u.arcsec and table["rho"].mask.tolist() == [False, True, False]
    assert table["observer"].tolist() == ["A, B", 'The "C"', None]
    assert table.meta["relorbit"]["format"] == 1
    assert "flip" not in table.colnames and "weight" not in table.colnames


def test_last_version_is_kept(pair, tmp_path):
    path = tmp_path / "p.ecsv"
    pair.write(path)
    first = path.read_bytes()
    assert sorted(p.name for p in tmp_path.iterdir()) == ["p.ecsv"]
    pair.with_measures(pair.measures.select([0])).write(path)
    assert (tmp_path / "p.ecsv.previous").read_bytes() == first
    assert len(read_pair(path).measures) == 1
    assert sorted(p.name for p in tmp_path.iterdir()) == ["p.ecsv", "p.ecsv.previous"]


def test_rows_added_by_hand(pair, tmp_path):
    path = tmp_path / "p.ecsv"
    pair.write(path)
    header = path.read_text().splitlines()[-4].split(",")
    assert header[:3] == ["epoch", "theta", "rho"]
    row = {"epoch": "2010.5", "theta": "33", "rho": "0,75", "technique": "micrometer"}
    with path.open("a") as file:
        file.write(",".join(f'"{row[n]}"' if n in row else "" for n in header) + "\n\n2011,5\n")
    measures = read_pair(path).measures
    assert measures.epoch[-2:].tolist() == [2010.5, 2011.0]
    assert measures.rho[-2] == 0.75 and measures.technique[-2] == "eyepiece"
    assert measures.use.all() and measures.equinox[-1] == "J2000"


def test_saved_again_by_a_spreadsheet(pair, tmp_path):
    """Header lines cut at commas and put in quotation marks, TRUE for True, as spreadsheets do."""
    path = tmp_path / "p.ecsv"
    pair.write(path)
    lines = path.read_text().splitlines()
    width = lines[-4].count(",")
    changed = [
        '"' + line.replace('"', '""') + '"' + "," * width if line[0] == "#" and "," in line
        else line + "," * width if line[0] == "#" else line.replace("True", "TRUE")
        for line in lines
    ]  # fmt: skip
    assert changed != lines
    path.write_bytes("\r\n".join(changed).encode("utf-8-sig"))
    assert read_pair(path) == pair


def test_pair_without_measures(tmp_path):
    pair = Pair.from_arrays([], [], [], name="Nobody yet")
    pair.write(tmp_path / "p.ecsv")
    assert read_pair(tmp_path / "p.ecsv") == pair


def test_plain_csv_is_a_pair_named_after_the_file(tmp_path):
    path = tmp_path / "my star.csv"
    path.write_text("epoch,theta,rho,theta_err,rho_err\n1990.5,10.2,1.25,0.5,0.01\n1995,3,,,\n")
    pair = read_pair(path)
    assert pair.name == "my star" and pair.ra_deg is None and pair.measures.use.all()
    assert pair.measures.equinox.tolist() == ["J2000", "J2000"]
    assert pair.measures.rho_err[0] == 0.01 and not pair.measures.has_rho[1]
    path.write_text("epoch,theta,rho,equinox\n1990.5,10.2,1.25,date\n")
    assert read_pair(path).measures.equinox.tolist() == ["date"]


def test_plain_csv_imports_no_astropy(tmp_path):
    path = tmp_path / "p.csv"
    path.write_text("epoch,theta,rho,theta_err,rho_err\n1990.5,10.2,1.25,0.5,0.01\n")
    code = (
        "import sys; from relorbit.measures.store import read_pair; "
        f"p = read_pair({str(path)!r}); assert len(p.measures) == 1; "
        "bad = {'astropy', 'scipy', 'matplotlib'} & set(sys.modules); print(sorted(bad))"
    )
    done = subprocess.run([sys.executable, "-c", code], capture_output=True, text=True, check=True)
    assert done.stdout.strip() == "[]"


def test_twenty_thousand_rows(tmp_path):
    rng = np.random.default_rng(1)
    count = 20_000
    values = (rng.uniform(1800, 2020, count), rng.uniform(0, 360, count), rng.uniform(0, 9, count))
    pair = Pair.from_arrays(*values, name="many", observer="A. Muster")
    pair.write(tmp_path / "p.ecsv")
    assert read_pair(tmp_path / "p.ecsv") == pair
    table = np.column_stack(values).tolist()
    text = "\n".join(",".join(map(repr, row)) for row in table)
    (tmp_path / "p.csv").write_text(f"epoch,theta,rho\n{text}\n")
    plain = read_pair(tmp_path / "p.csv").measures
    assert np.array_equal(plain.theta, values[1]) and np.array_equal(plain.epoch, values[0])


def changed(pair, path, old, new):
    pair.write(path)
    text = path.read_text()
    assert old in text
    path.write_text(text.replace(old, new, 1))
    with pytest.raises(InputError) as caught:
        read_pair(path)
    message = str(caught.value)
    assert "\n" not in message
    return message.replace(str(path), "p.ecsv")


def test_bad_pair_files_are_refused(pair, tmp_path):
    path = tmp_path / "p.ecsv"
    line = len(pair_lines(pair, path)) - 2
    assert changed(pair, path, "format: 1", "format: 2") == (
        "p.ecsv: written by a newer relorbit (format 2); this one reads up to 1; install a newer "
        "one"
    )
    assert changed(pair, path, "format: 1", "formal: 1") == (
        "p.ecsv: the header names no format of a pair file; it must say format: 1"
    )
    assert changed(pair, path, "1990.5,10.0", "1990.5,370.0") == (
        f"p.ecsv, line {line}, column theta: 370 is outside [0, 360); give the position angle in "
        "degrees, from 0 up to but not including 360"
    )
    assert changed(pair, path, "1990.5,10.0", "1990.5,ten") == (
        f"p.ecsv, line {line}, column theta: 'ten' is not a number; write one such as 1.23"
    )
    assert changed(pair, path, "1990.5,10.0", "1990.5,nan") == (
        f"p.ecsv, line {line}, column theta: 'nan' is not a number; leave the cell empty where "
        "nothing is known"
    )
    assert changed(pair, path, "1990.5,10.0,1.0", "1990.5,,") == (
        f"p.ecsv, line {line}: neither theta nor rho; a measure needs at least one of them"
    )
    assert changed(pair, path, "# meta:", "# meta: {[") .startswith(
        "p.ecsv: the header of the file (lines with #) is damaged: "
    )  # fmt: skip
    assert changed(pair, path, "ra_deg: ", "ra_deg: 9") == (
        "p.ecsv: the header's pair: right ascension 9230.8 is outside [0, 360) degrees"
    )
    assert changed(pair, path, "ra_deg: ", "colour: ").startswith(
        "p.ecsv: the header's pair has colour; it may have dec_deg, designations, "
    )
    assert changed(pair, path, "epoch,theta,rho,theta_err", "epoch,theta,rho,seeing") == (
        "p.ecsv, column seeing: not a column of a pair file, and would be lost in saving; move it "
        "into note"
    )


def pair_lines(pair, path):
    pair.write(path)
    return path.read_text().splitlines()
