"""Layouts: fixed columns, delimited lists without known words, and layouts that cannot be."""

import pytest

from relorbit.errors import InputError
from relorbit.measures.intake import read_list
from relorbit.measures.layout import read_layout

FIXED = """
form = "fixed"
skip = 2
comment = ["*"]
decimal = ","
missing = ["99,99"]
encoding = "latin-1"
[columns.epoch]
start = 1
end = 8
kind = "besselian"
offset = 1800
[columns.theta]
width = 7
missing = ["400,0"]
[columns.rho]
start = 17
end = 22
unit = "mas"
factor = 10
[columns.technique]
width = 3
[columns.observer]
width = 3
[columns.nights]
width = 3
[columns.note]
width = 30
[constants]
aperture_m = 0.25
equinox = "1900.0"
[techniques]
Mi = "eyepiece"
[observers]
AM = "A. M\u00fcller"
"""
FIXED_LIST = """\
A list of an invented pair
in fixed columns
  28,500  123,4    125 Mi AM  3 first
* a comment
  29,250  400,0    130 Mi XY  - sch\u00f6n
  30,000   12,5  99,99    AM
\t\t\t\t\t\t\t
"""
DELIMITED = """
form = "delimited"
delimiter = "semicolon"
[columns.epoch]
header = "Tag"
kind = "date"
pattern = "DD/MM/YYYY"
[columns.theta]
header = "winkel"
[columns.rho]
header = "Abstand"
unit = "mas"
"""


@pytest.fixture
def read(tmp_path):
    def read(layout, text, encoding="utf-8", **ways):
        (tmp_path / "layout.toml").write_text(layout, encoding="utf-8")
        (tmp_path / "list.txt").write_bytes(text.encode(encoding))
        return read_list(tmp_path / "list.txt", tmp_path / "layout.toml", **ways)

    return read


def test_fixed_columns(read):
    from astropy.time import Time

    intake = read(FIXED, FIXED_LIST, "latin-1")
    m = intake.measures
    assert intake.lines.tolist() == [3, 5, 6]
    truth = Time([1828.5, 1829.25, 1830.0], format="byear").jyear
    assert m.epoch == pytest.approx(truth, abs=1e-9)
    assert m.epoch_obs.tolist() == ["28,500", "29,250", "30,000"]
    assert m.theta[[0, 2]].tolist() == [123.4, 12.5] and not m.has_theta[1]
    assert m.rho[:2].tolist() == [1.25, 1.3] and not m.has_rho[2]
    assert m.technique.tolist() == ["eyepiece", "eyepiece", "unknown"]
    assert m.observer.tolist() == ["A. M\u00fcller", "XY", "A. M\u00fcller"]
    assert m.nights[0] == 3 and m.note.tolist() == ["first", "sch\u00f6n", ""]
    assert m.aperture_m.tolist() == [0.25] * 3 and m.equinox.tolist() == ["1900.0"] * 3


def test_an_error_in_fixed_columns_names_its_place(read, tmp_path):
    with pytest.raises(InputError) as caught:
        read(FIXED, FIXED_LIST.replace(" 12,5 ", " 1x,5 "), "latin-1")
    assert str(caught.value) == (
        f"{tmp_path / 'list.txt'}, line 6, column theta: '1x,5' is not a number; write one such "
        "as 1.23"
    )
    with pytest.raises(InputError) as caught:
        read(FIXED, FIXED_LIST.replace(" 12,5 ", " 12.5 "), "latin-1")
    assert str(caught.value) == (
        f"{tmp_path / 'list.txt'}, line 6, column theta: '12.5' has no decimal ',' as the layout "
        "says; correct either"
    )


def test_delimited_with_headings_of_its_own(read, tmp_path):
    measures = read(DELIMITED, "Tag;x;Winkel;Abstand\n03/04/2001;9;10,5;250\n").measures
    assert measures.theta[0] == 10.5 and measures.rho[0] == 0.25
    plain = tmp_path / "plain.csv"
    plain.write_text("date,PA\n2001-04-03,10.5\n")
    assert read_list(plain).measures.epoch[0] == measures.epoch[0]
    with pytest.raises(InputError) as caught:
        read(DELIMITED, "Tag;Winkel\n03/04/2001;1\n")
    assert str(caught.value) == (
        f"{tmp_path / 'list.txt'}, column Abstand: the layout names this column, the list has "
        "only Tag, Winkel"
    )
    with pytest.raises(InputError) as caught:
        read(DELIMITED, "Tag;Winkel;Abstand\n2001-04-03;1;2\n")
    assert str(caught.value) == (
        f"{tmp_path / 'list.txt'}, line 2, column Tag: '2001-04-03' does not have the pattern of "
        "dates that the layout gives"
    )


def test_delimited_without_header(read):
    layout = """
    form = "delimited"
    header = false
    [columns.rho]
    place = 3
    [columns.epoch]
    place = 1
    """
    measures = read(layout, "2000.5,x,1.25\n2001.5,y,1.5\n").measures
    assert measures.rho.tolist() == [1.25, 1.5] and measures.epoch[0] == 2000.5


def test_a_layout_of_codes_alone_leaves_the_header_words(read):
    layout = 'form = "delimited"\nskip = 1\n[techniques]\nC = "camera"\n'
    measures = read(layout, "title, of the list\nepoch,PA,tech\n2000,1,C\n2001,2,plate\n").measures
    assert measures.technique.tolist() == ["camera", "plate"]


def test_options_go_before_the_constants_of_a_layout(read):
    layout = 'form = "delimited"\n[constants]\ntechnique = "plate"\nequinox = "1900.0"\n'
    measures = read(layout, "epoch,PA\n2000,1\n", technique="camera").measures
    assert measures.technique[0] == "camera" and measures.equinox[0] == "1900.0"


BAD = [
    ("form = ", "not a TOML file: Invalid value (at end of document)"),
    ("skip = 1", 'key form: missing; write form = "fixed" or form = "delimited"'),
    ('form = "round"', "key form: 'round' is not one of fixed, delimited"),
    ('form = "fixed"', "key columns: missing; name the columns, such as [columns.theta]"),
    ('form = "fixed"\nskip = "two"', "key skip: must be a whole number"),
    ('form = "fixed"\nskip = true', "key skip: must be a whole number"),
    ('form = "fixed"\nskip = -1', "key skip: -1 is below 0"),
    ('form = "fixed"\ncolour = 1', "key colour: not known here; known are form, skip, comment, "
     "decimal, missing, encoding, delimiter, header, columns, constants, techniques, observers"),
    ('form = "fixed"\nmissing = [9]', "key missing: must be a list of texts, none of them empty"),
    ('form = "fixed"\ndecimal = "x"', "key decimal: 'x' is not one of ,, ."),
    ('form = "delimited"\ndelimiter = "x"', "key delimiter: 'x' is not one of comma, semicolon, "
     "tab, bar, space"),
    ('form = "delimited"\n[techniques]\nM = "magic"', "key techniques.M: 'magic' is not a "
     "technique; use one of eyepiece, plate, camera, interferometer, space, unknown"),
    ('form = "delimited"\n[constants]\ntheta = 1', "key constants.theta: not a column; known are "
     "theta_err, rho_err, weight, aperture_m, nights, theta_obs, rho_obs, technique, observer, "
     "reason, note, equinox, epoch_obs, vetted, use, flip"),
    ('form = "delimited"\n[observers]\nM = 1', "key observers.M: must be a text in quotation "
     "marks"),
    ('form = "fixed"\n[columns.theta]\nwidth = 3', "key columns.epoch: missing; every measure "
     "needs an epoch"),
    ('form = "fixed"\n[columns.epoch]\nwidth = 3', "key columns.theta: missing; name theta, rho "
     "or both"),
    ('form = "fixed"\n[columns.epoch]\nstart = 3', "key columns.epoch.end: give either end or "
     "width"),
    ('form = "fixed"\n[columns.epoch]\nstart = 3\nend = 2', "key columns.epoch.end: 2 is below 3"),
    ('form = "fixed"\n[columns.epoch]\nwidth = 0', "key columns.epoch.width: 0 is below 1"),
    ('form = "fixed"\n[columns.epoch]\nwidth = 3\nkind = "lunar"', "key columns.epoch.kind: "
     "'lunar' is not one of auto, julian, besselian, jd, mjd, date"),
    ('form = "fixed"\n[columns.epoch]\nwidth = 3\npattern = "YYYY"', "key columns.epoch.pattern: "
     "'YYYY' needs YYYY, DD and one of MM and Mon, each once, such as DD.MM.YYYY"),
    ('form = "fixed"\n[columns.theta]\nwidth = 3\nunit = "mas"', "key columns.theta.unit: 'mas' "
     "is not a unit here; use one of deg, rad, arcmin"),
    ('form = "fixed"\n[columns.colour]\nwidth = 3', "key columns.colour: not a column; known are "
     "epoch, theta, rho, theta_err, rho_err, weight, aperture_m, nights, theta_obs, rho_obs, "
     "technique, observer, reason, note, equinox, epoch_obs, vetted, use, flip, year, month, day"),
    ('form = "delimited"\n[columns.epoch]\nkind = "jd"', "key columns.epoch.header: missing; give "
     "the heading in the list"),
    ('form = "delimited"\nheader = false\n[columns.epoch]\nkind = "jd"', "key "
     "columns.epoch.place: missing; say which cell it is, from 1"),
]  # fmt: skip


@pytest.mark.parametrize(("text", "message"), BAD)
def test_layouts_that_cannot_be(tmp_path, text, message):
    path = tmp_path / "layout.toml"
    path.write_text(text)
    with pytest.raises(InputError) as caught:
        read_layout(path)
    assert str(caught.value) == f"{path}: {message}"


def test_layout_that_is_not_there_or_names_no_encoding(tmp_path):
    with pytest.raises(InputError, match=r"none\.toml: no such file; check the name"):
        read_list(tmp_path / "list.txt", tmp_path / "none.toml")
    layout, text = tmp_path / "layout.toml", tmp_path / "list.txt"
    layout.write_text('form = "delimited"\nencoding = "latin-99"\n')
    text.write_text("epoch,PA\n2000,1\n")
    with pytest.raises(InputError, match="'latin-99' is not an encoding; write utf-8, latin-1"):
        read_list(text, layout)
