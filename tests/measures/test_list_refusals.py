"""Bad lists: each refused in one line that names the file, the line and the column."""

import pytest

from relorbit.errors import InputError
from relorbit.measures.intake import read_list
from relorbit.measures.store import read_pair

RANGE = "; give the position angle in degrees, from 0 up to but not including 360"
TECHNIQUES = "eyepiece, plate, camera, interferometer, space, unknown"

CASES = {
    "empty": (b"", ": the file is empty; it needs a header line and measures"),
    "blanks": (b"\n  \n", ": the file is empty; it needs a header line and measures"),
    "only comments": (b"# a\n", ": no header line and no measures; the file holds only blanks or "
                      "comments"),
    "header only": (b"epoch,theta,rho\n", ": a header but no measures; add a line for each "
                    "measure"),
    "binary": (b"\x89PNG\r\n\x1a\n\x00\x00", ": is a binary file, not a text; save the table as "
               "text (CSV) first"),
    "latin-1": ("epoch,theta,obs\n2000,1,M\u00fcller\n".encode("latin-1"),
                ", line 2: byte 0xfc is not UTF-8; save the file as UTF-8"),
    "utf-16 without mark": ("epoch,theta\n2000,1\n".encode("utf-16-le"),
                            ": is a binary file, not a text; save the table as text (CSV) first"),
    "no epoch column": (b"theta,rho\n1,2\n", ": no column for the epoch; name it epoch, date, JD "
                        "or MJD; the columns are theta, rho"),
    "no measured column": (b"epoch,n\n2000,2\n", ": no column for the position angle (theta) nor "
                           "the separation (rho); the columns are epoch, n"),
    "no header": (b"2000.5,10,1.0\n2001.5,11,1.0\n", ", line 1: no header line; put one above the "
                  "measures that names the columns, such as epoch,theta,rho"),
    "word for theta": (b"epoch,PA,sep\n2000,1,2\n2001,north,2\n", ", line 3, column PA: 'north' "
                       "is not a number; write one such as 1.23"),
    "word for rho": (b"epoch;PA;sep\n2000;1;wide\n", ", line 2, column sep: 'wide' is not a "
                     "number; write one such as 1.23"),
    "word for epoch": (b"epoch,PA\nsoon,1\n", ", line 2, column epoch: 'soon' is not an epoch; "
                       "write a year such as 1998.345, or a date such as 1998-05-06.4"),
    "theta 360": (b"epoch,PA\n2000,360\n",
                  ", line 2, column PA: 360 is outside [0, 360)" + RANGE),
    "theta negative": (b"epoch,PA\n2000,-1.5\n",
                       ", line 2, column PA: -1.5 is outside [0, 360)" + RANGE),
    "rho negative": (b"# c\n\nepoch,PA,sep [mas]\n2000,1,-120\n", ", line 4, column sep [mas]: "
                     "-0.12 is negative; a separation is 0 or more"),
    "nan": (b"epoch,theta,rho\n2000,NaN,1\n", ", line 2, column theta: 'NaN' is not a number; "
            "leave the cell empty where nothing is known"),
    "inf": (b"epoch,theta,rho\n2000,1,-inf\n", ", line 2, column rho: '-inf' is not a number; "
            "leave the cell empty where nothing is known"),
    "overflow": (b"epoch,theta,rho\n2000,1,1e999\n", ", line 2, column rho: inf is not a finite "
                 "number"),
    "zero error": (b"epoch,theta,rho_err\n2000,1,0\n", ", line 2, column rho_err: 0 is not a "
                   "standard deviation; give one above 0 or leave it out"),
    "negative error": (b"epoch,theta,e_theta\n2000,1,-0.5\n", ", line 2, column e_theta: -0.5 is "
                       "not a standard deviation; give one above 0 or leave it out"),
    "too early": (b"epoch,theta\n1599.5,1\n", ", line 2, column epoch: 1599.5 is before 1600 or "
                  "after 2200; correct it, or allow any epoch"),
    "too late": (b"epoch,theta\n2000,1\n2201,1\n", ", line 3, column epoch: 2201 is before 1600 "
                 "or after 2200; correct it, or allow any epoch"),
    "no epoch": (b"epoch,theta\n,1\n", ", line 2: no epoch; every measure needs one"),
    "technique": (b"epoch,theta,tech\n2000,1,guess\n", ", line 2, column tech: 'guess' is not a "
                  f"technique; use one of {TECHNIQUES}"),
    "equinox": (b"epoch,theta,equinox\n2000,1,soon\n", ", line 2, column equinox: 'soon' is not "
                "an equinox; use J2000, date, or a year such as 1950.0"),
    "thousands": (b'epoch;rho\n2000;"1,234.5"\n', ", line 2, column rho: '1,234.5' has a comma "
                  "and a point; write it without thousands marks"),
    "commas in a csv": (b"epoch,theta,rho\n2000,5,10,2,1,25\n", ", line 2: 6 cells where the "
                        "header names 3 columns; if these are decimal commas, separate the "
                        "columns with semicolons"),
    "short row": (b"epoch theta rho\n2000 5\n", ", line 2: 2 cells where the header names 3 "
                  "columns; write - where a value is missing"),
    "long row": (b"epoch;theta\n2000;5;6\n", ", line 2: 3 cells where the header names 2 columns; "
                 "leave no delimiter inside a cell, or put the cell in quotation marks"),
    "open quote": (b'epoch,theta,note\n2000,1,"a\n2001,2,b\n', ", line 2: a quotation mark is "
                   "opened and never closed; close it or take it out"),
    "twice": (b"epoch,theta,PA\n2000,1,2\n", ", column PA: means theta, as theta does; keep one "
              "of them"),
    "unit": (b"epoch,theta,rho [pc]\n2000,1,2\n", ", column rho [pc]: unit 'pc' is not one of "
             "arcsec, mas, uas, arcmin, deg, rad"),
    "either date": (b"date,theta\n03/04/2001,1\n", ", line 2, column date: '03/04/2001' may be "
                    "day and month or month and day; write 2019-03-12, or name the pattern in a "
                    "layout"),
    "Julian Date": (b"epoch,theta\n2451545.5,1\n", ", line 2, column epoch: '2451545.5' looks "
                    "like a Julian Date; head the column JD"),
    "flag": (b"epoch,theta,use\n2000,1,perhaps\n", ", line 2, column use: 'perhaps' is not yes or "
             "no; write True or False"),
    "underscore": (b"epoch,theta\n2000,1_0\n", ", line 2, column theta: '1_0' is not a number; "
                   "write one such as 1.23"),
    "foreign digits": ("epoch,theta\n2000,\u0661\n".encode(), ", line 2, column theta: '\u0661' "
                       "is not a number; write one such as 1.23"),
}  # fmt: skip


@pytest.mark.parametrize("case", CASES)
@pytest.mark.parametrize("reader", [read_list, read_pair])
def test_refused_in_one_line(tmp_path, case, reader):
    content, message = CASES[case]
    path = tmp_path / "list.csv"
    path.write_bytes(content)
    with pytest.raises(InputError) as caught:
        reader(path)
    assert str(caught.value) == f"{path}{message}"
    assert caught.value.path == str(path)
    assert path.read_bytes() == content and len(list(tmp_path.iterdir())) == 1


@pytest.mark.parametrize("reader", [read_list, read_pair])
def test_no_such_file_and_a_directory(tmp_path, reader):
    with pytest.raises(InputError) as caught:
        reader(tmp_path / "none.csv")
    assert str(caught.value) == (
        f"{tmp_path / 'none.csv'}: no such file; check the name and the folder"
    )
    with pytest.raises(InputError) as caught:
        reader(tmp_path)
    assert str(caught.value) == f"{tmp_path}: is a directory; name a file in it"
    with pytest.raises(InputError, match="cannot be read: embedded null byte"):
        reader("a\0b")


def test_a_row_with_nothing_measured(tmp_path):
    path = tmp_path / "list.csv"
    path.write_text("epoch,theta,rho\n2000,1,2\n2001,,\n")
    assert read_list(path).skipped == ((3, "neither theta nor rho"),)
    with pytest.raises(InputError) as caught:
        read_pair(path)
    assert str(caught.value) == (
        f"{path}, line 3: neither theta nor rho; a measure needs at least one of them"
    )


def test_any_epoch_when_allowed(tmp_path):
    path = tmp_path / "list.csv"
    path.write_text("epoch,theta\n1500.5,1\n")
    assert read_pair(path, allow_any_epoch=True).measures.epoch[0] == 1500.5
    assert read_list(path, allow_any_epoch=True).measures.epoch[0] == 1500.5
