"""Catalogue positions as words and as files."""

import pytest

from relorbit.errors import InputError
from relorbit.measures.places import read_places

TABLE = """# invented
star;RA [h];Dec (deg);e_RA;e_Dec [uas];epoch;pmRA (arcsec/yr);pmDE
A;15.5;-0,5;0,03;40;2016,0;0.2;-164
B;15 30 00.1;-0 30 00.5;-;;2016.0;;
"""


def test_words_with_units():
    (place,) = read_places(
        "RA=15h 23m 12.31s, dec=-00 17 16.2; epoch=2016.0 ra_err=0.02 arcsec dec_err=40uas "
        "corr=-0.25 pm_ra=-0.12arcsec/yr pm_dec=150 mas/yr name=Tarn 31 A"
    )
    assert place.ra_deg == pytest.approx(15.0 * (15 + 23 / 60 + 12.31 / 3600))
    assert place.dec_deg == pytest.approx(-(17 / 60 + 16.2 / 3600))
    assert (place.ra_err_mas, place.dec_err_mas, place.correlation) == (20.0, 0.04, -0.25)
    assert (place.pm_ra_mas_yr, place.pm_dec_mas_yr) == (-120.0, 150.0)
    assert (place.epoch, place.name) == (2016.0, "Tarn 31 A")
    (tiny,) = read_places("ra=1 dec=2 ra_err=1e-1 dec_err=2.5E-2 epoch=2016-01-01")
    assert (tiny.ra_err_mas, tiny.dec_err_mas) == (0.1, 0.025)
    assert tiny.epoch == pytest.approx(2016.0, abs=0.002)


def test_a_file_of_two_stars(tmp_path):
    file = tmp_path / "stars.txt"
    file.write_text(TABLE)
    a, b = read_places(str(file))
    assert (a.ra_deg, a.dec_deg, a.ra_err_mas, a.dec_err_mas) == (232.5, -0.5, 0.03, 0.04)
    assert (a.pm_ra_mas_yr, a.pm_dec_mas_yr, a.epoch) == (200.0, -164.0, 2016.0)
    assert b.ra_deg == pytest.approx(232.5 + 0.1 / 240.0)
    assert b.dec_deg == pytest.approx(-0.5 - 0.5 / 3600.0)
    assert b.ra_err_mas is None and not b.moves and b.name == "B"


def test_an_ecsv_file_says_units_in_its_header(tmp_path):
    from astropy import units as u
    from astropy.table import QTable

    table = QTable({
        "ra": [15.5] * u.hourangle, "dec": [2.0] * u.deg, "ra_error": [0.05] * u.arcsec,
        "dec_error": [0.05] * u.arcsec, "ref_epoch": [2016.0] * u.yr,
        "pmra": [1.5] * u.mas / u.yr, "pmdec": [-2.5] * u.mas / u.yr,
    })  # fmt: skip
    table.write(tmp_path / "one.ecsv")
    (place,) = read_places(str(tmp_path / "one.ecsv"))
    assert (place.ra_deg, place.dec_deg, place.ra_err_mas) == (232.5, 2.0, 50.0)
    assert (place.pm_ra_mas_yr, place.pm_dec_mas_yr, place.epoch) == (1.5, -2.5, 2016.0)


@pytest.mark.parametrize(
    ("text", "told"),
    [
        ("ra=x dec=3", "ra: 'x' is not a number"),
        ("ra=1", "no dec; a place needs ra and dec"),
        ("foo=3 ra=1 dec=1", "'foo' is not a word of a place; use ra, dec"),
        ("ra=1 dec=2 ra=3", "ra is given twice"),
        ("ra=1 dec=2 ra_err=3 parsec dec_err=2", "unit 'parsec' is not one of mas"),
        ("ra=1 dec=2 ra_err=3 mas/yr dec_err=2", "unit 'mas/yr' is not one of mas"),
        ("ra=1 dec=2 h", "unit 'h' is not one of degrees"),
        ("1 ra=3", "'1' is not WORD=VALUE"),
        ("ra= dec=3", "ra: is empty"),
        ("ra=nan dec=3", "'nan' is not a number"),
        ("ra=25 61 00 dec=3", "is not a right ascension"),
        ("nowhere.csv", "nowhere.csv: no such file"),
    ],
)
def test_bad_words_are_named(text, told, tmp_path, monkeypatch):
    monkeypatch.chdir(tmp_path)
    with pytest.raises(InputError) as refused:
        read_places(text)
    assert told in str(refused.value)


@pytest.mark.parametrize(
    ("text", "told"),
    [
        ("ra,dec,epoch\n1.0,x,2016\n", "line 2, column dec: 'x' is not a number"),
        ("ra,dec,epoch\n1.0,95,2016\n", "line 2: position 1, 95 is not on the sky"),
        ("ra,epoch\n1.0,2016\n", "no columns for ra and dec; the columns are ra, epoch"),
        ("ra,dec,alpha\n1,2,3\n", "two columns mean ra"),
        ("ra,dec,ra_err [s]\n1,2,3\n", "column ra_err [s]: unit 's' is not one of mas"),
        ("ra,dec\n", "a header but no places"),
        ("ra,dec,epoch\n1.0,2.0,soon\n", "line 2: epoch"),
    ],
)
def test_bad_files_are_named_with_line_and_column(text, told, tmp_path):
    file = tmp_path / "bad.csv"
    file.write_text(text)
    with pytest.raises(InputError) as refused:
        read_places(str(file))
    assert str(refused.value).startswith(f"{file}")
    assert told in str(refused.value)
