"""Other people's lists: delimiters, header words, units, decimal commas, doubled rows."""

import codecs

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from relorbit.measures.headers import understand
from relorbit.measures.intake import IN_PAIR_FILE, merge, read_list
from relorbit.measures.pair import Pair
from relorbit.measures.reduction import reduce_to_j2000


def meaning(*names):
    found = understand(names, lambda name, what: LookupError(f"{name}: {what}"))
    return [(h.column, h.unit) for h in found]


@pytest.fixture
def read(tmp_path):
    def read(text, encoding="utf-8", **ways):
        path = tmp_path / "list.txt"
        path.write_bytes(text if isinstance(text, bytes) else text.encode(encoding))
        return read_list(path, **ways)

    return read


@pytest.mark.parametrize(
    ("name", "column", "unit"),
    [
        ("Epoch", "epoch", ""), ("DATE (UT)", "epoch", ""), ("Julian Year", "epoch", ""),
        ("JD", "epoch", ""), ("date_mjd", "epoch", ""), ("Year", "epoch", ""),
        ("PA", "theta", ""), ("P.A. [deg]", "theta", "deg"), ("Pos. angle", "theta", ""),
        ("theta_rad", "theta", "rad"), ("\u03b8 (\u00b0)", "theta", "deg"),
        ("sep_mas", "rho", "mas"), ("rho [mas]", "rho", "mas"), ("Separation (arcsec)", "rho",
         "arcsec"), ('sep"', "rho", "arcsec"), ("dist ('')", "rho", "arcsec"),
        ("\u03c1", "rho", ""), ("e_theta", "theta_err", ""), ("sigma_theta", "theta_err", ""),
        ("theta_err", "theta_err", ""), ("dtheta", "theta_err", ""), ("err PA", "theta_err", ""),
        ("pa_err", "theta_err", ""), ("Error in PA (deg)", "theta_err", "deg"),
        ("e_rho", "rho_err", ""), ("Sep err [mas]", "rho_err", "mas"), ("\u03c3\u03c1", "rho_err",
         ""), ("rho_err_mas", "rho_err", "mas"), ("wt", "weight", ""), ("Obs.", "observer", ""),
        ("Method", "technique", ""), ("Aperture [cm]", "aperture_m", "cm"),
        ("aperture_in", "aperture_m", "in"), ("aperture_m", "aperture_m", "m"),
        ("N", "nights", ""), ("Remarks", "note", ""), ("Equinox", "equinox", ""),
        ("flip", "flip", ""), ("use", "use", ""), ("seeing", "", ""), ("", "", ""),
        ("theta_obs", "theta_obs", ""),
    ],
)  # fmt: skip
def test_header_words(name, column, unit):
    assert meaning(name) == [(column, unit)]


def test_a_bare_error_belongs_to_the_column_before_it():
    columns = [c for c, _ in meaning("date", "PA", "+/-", "sep", "err [mas]", "n")]
    assert columns == ["epoch", "theta", "theta_err", "rho", "rho_err", "nights"]
    assert meaning("err") == [("", "")]


def test_the_surest_epoch_is_read():
    assert [c for c, _ in meaning("date", "epoch", "JD", "PA")] == ["", "", "epoch", "theta"]
    assert [c for c, _ in meaning("Year", "Month", "Day", "PA")] == [
        "year", "month", "day", "theta"
    ]  # fmt: skip
    with pytest.raises(LookupError, match="theta: means theta, as PA does; keep one of them"):
        meaning("PA", "theta")
    with pytest.raises(LookupError, match="unit 'mas' is not one of deg, rad, arcmin"):
        meaning("PA err [mas]")
    with pytest.raises(LookupError, match="unit 'parsec' is not one of arcsec, mas"):
        meaning("sep [parsec]")


ROWS = [["1998.5", "123.4", "1.25"], ["2003.25", "130", "1.3"]]


@pytest.mark.parametrize("delimiter", [",", ";", "\t", " ", "   ", "|", ", ", " ; "])
@pytest.mark.parametrize("end", ["\n", "\r\n", "\r"])
@pytest.mark.parametrize("mark", [b"", codecs.BOM_UTF8])
def test_delimiters_line_ends_and_byte_order_marks(read, delimiter, end, mark):
    text = end.join(delimiter.join(row) for row in [["epoch", "PA", "sep"], *ROWS]) + end
    measures = read(mark + text.encode()).measures
    assert measures.epoch.tolist() == [1998.5, 2003.25]
    assert measures.theta.tolist() == [123.4, 130.0] and measures.rho.tolist() == [1.25, 1.3]


@pytest.mark.parametrize("encoding", ["utf-16", "utf-16-le", "utf-16-be"])
def test_utf_16_with_a_mark(read, encoding):
    text = "epoch,theta,rho,obs\n2000,1,2,M\u00fcller\n".encode(encoding)
    marks = {"utf-16-le": codecs.BOM_UTF16_LE, "utf-16-be": codecs.BOM_UTF16_BE}
    assert read(marks.get(encoding, b"") + text).measures.observer[0] == "M\u00fcller"


MESSY = """\
# Measures of an invented pair, as they came by mail
! second comment
Datum is not read;Date;PA (deg);err;sep [mas];err [mas];tech;obs;n;note
a;12.03.2001;123,4;0,5;1250;10;micrometer;A. M.;3;"one; two"

% comment
b;B1950,5;12,0\u00b0;--;...;;CCD;;-;
c;2019 Mar 12,4;;;500,5;;speckle;X;2;
Datum is not read;Date;PA (deg);err;sep [mas];err [mas];tech;obs;n;note
d;2019 Mar 12,4;;;500,5;;Speckle interferometry;X;2;
e;2020.5;n/a;;;;space;;;
f;2021,5;10;;\u2014;;space;;;
"""


def test_a_messy_list(read):
    intake = read(MESSY)
    m = intake.measures
    assert intake.lines.tolist() == [4, 7, 8, 10, 12]
    assert intake.skipped == ((9, "the header line again"), (11, "neither theta nor rho"))
    assert intake.doubled == ((10, 8),)
    assert m.rho[[0, 2]].tolist() == [1.25, 0.5005] and m.rho_err[0] == 0.01
    assert m.theta[[0, 1, 4]].tolist() == [123.4, 12.0, 10.0] and m.theta_err[0] == 0.5
    assert np.isnan(m.rho[1]) and np.isnan(m.theta[2])
    assert m.technique.tolist() == [
        "eyepiece", "camera", "interferometer", "interferometer", "space"
    ]  # fmt: skip
    assert m.equinox.tolist() == ["date"] * 4 + ["J2000"]
    assert m.observer.tolist() == ["A. M.", "", "X", "X", ""]
    assert m.note[0] == "one; two" and m.nights[0] == 3.0
    assert m.epoch_obs.tolist()[:2] == ["12.03.2001", "B1950,5"]
    assert intake.columns["sep [mas]"] == "rho, in mas"
    assert intake.columns["Datum is not read"] == ""


def test_decimal_commas_in_quotation_marks_in_a_csv(read):
    assert read('epoch,theta,rho\n"1998,5","123,4","1,25"\n').measures.rho[0] == 1.25


def test_white_space_with_words_in_the_header_and_a_note_at_the_end(read):
    text = "Epoch  Pos. angle  Sep [mas]  Note\n1998.5  10 250 poor seeing, low\n2000 1 2 -\n"
    measures = read(text).measures
    assert measures.rho.tolist() == [0.25, 0.002] and measures.note[0] == "poor seeing, low"


def test_header_in_a_comment(read):
    assert read("# made up\n# epoch  theta  rho [mas]\n2000 10 250\n").measures.rho[0] == 0.25
    assert read("# epoch,theta,rho\n2000,10,0.25\n").measures.rho[0] == 0.25


def test_year_month_and_day_in_columns_of_their_own(read):
    measures = read("Year,Month,Day,PA\n2000,1,1.5,10\n").measures
    assert measures.epoch[0] == 2000.0 and measures.epoch_obs[0] == "2000-1-1.5"


def test_quoted_cell_over_two_lines(read):
    intake = read('epoch,theta,note\n2000,10,"first\nsecond"\n2001,20,\n')
    assert intake.measures.note.tolist() == ["first second", ""]
    assert intake.lines.tolist() == [2, 4]


def test_units_of_apertures(read):
    assert read("epoch,theta,aperture [cm]\n2000,1,60\n").measures.aperture_m[0] == 0.6
    assert read("epoch,theta,aperture_inch\n2000,1,10\n").measures.aperture_m[0] == (
        pytest.approx(0.254)
    )


def test_units_of_another_ecsv_file_are_kept(tmp_path):
    from astropy import units as u
    from astropy.table import Table

    table = Table({"MJD": [51544.5], "PA": [1.0] * u.rad, "sep": [250.0] * u.mas, "x": ["-"]})
    table.write(tmp_path / "t.ecsv", format="ascii.ecsv")
    intake = read_list(tmp_path / "t.ecsv")
    assert intake.measures.epoch[0] == 2000.0 and intake.measures.rho[0] == 0.25
    assert intake.measures.theta[0] == np.rad2deg(1.0) and intake.columns["x"] == ""


def test_what_holds_for_the_rows_that_do_not_say(read):
    text = "epoch,theta,technique,observer,equinox\n2000,1,,A,\n2000,2,plate,,1950.0\n"
    measures = read(text, technique="camera", observer="B", equinox="J2000").measures
    assert measures.technique.tolist() == ["camera", "plate"]
    assert measures.observer.tolist() == ["A", "B"]
    assert measures.equinox.tolist() == ["J2000", "1950.0"]
    assert read("epoch,theta\n2000,1\n", technique="space").measures.equinox[0] == "J2000"


@settings(deadline=None, max_examples=60)
@given(
    st.lists(
        st.tuples(
            st.floats(1600, 2200), st.floats(0, 360, exclude_max=True), st.floats(0, 100)
        ),
        min_size=1,
        max_size=5,
    ),
    st.sampled_from([",", ";", "\t", " "]),
    st.booleans(),
)
def test_every_number_comes_back_exactly(tmp_path_factory, rows, delimiter, commas):
    path = tmp_path_factory.mktemp("list") / "list.txt"
    text = [[format(v, ".17g") for v in row] for row in rows]
    if commas:
        text = [[f'"{v}"' if delimiter == "," else v for v in row] for row in text]
        text = [[v.replace(".", ",") for v in row] for row in text]
    lines = [delimiter.join(row) for row in [["epoch", "theta", "rho"], *text]]
    path.write_text("\n".join(lines))
    measures = read_list(path).measures
    read = list(zip(measures.epoch, measures.theta, measures.rho, strict=True))
    assert read == rows


def test_merging_reports_what_the_pair_has_already(read):
    text = "date,PA,sep,obs\n2001-03-12,10,1.0,A\n2002-03-12,20,1.1,A\n"
    pair, report = merge(Pair.from_arrays([], [], [], name="new"), read(text))
    assert (report.read, report.appended, report.doubled) == (2, 2, ())
    pair = pair.with_measures(reduce_to_j2000(pair.measures, 230.8, 30.3))
    assert pair.measures.theta[0] != 10.0
    more = text + "2001-03-12,10,1.0,B\n2001-03-12,10.2,1.0,A\n2002.19,20,1.1,A\n"
    again, report = merge(pair, read(more))
    assert (report.read, report.appended) == (5, 3)
    assert report.doubled == ((2, IN_PAIR_FILE), (3, IN_PAIR_FILE))
    assert len(again.measures) == 5
    near = text + "2001-03-12.1,10,1.0,A\n2001-03-12.3,10,1.0,A\n"
    assert read(near).doubled == ((4, 2),), "0.1 d is within 0.0005 yr, 0.3 d is not"
