"""The shipped examples are what their generator makes."""

from __future__ import annotations

import sys
from pathlib import Path

import pytest

sys.path.insert(0, str(Path(__file__).parent))
import make_examples

EXAMPLES = Path(__file__).parents[1] / "example_measures"


def test_examples_are_made_again_the_same(tmp_path):
    make_examples.main(tmp_path)
    made = {path.name: path.read_text(encoding="utf-8") for path in tmp_path.iterdir()}
    kept = {path.name: path.read_text(encoding="utf-8") for path in EXAMPLES.iterdir()}
    assert made == kept


@pytest.mark.parametrize("path", sorted(EXAMPLES.glob("*.ecsv")), ids=lambda path: path.stem)
def test_pair_files_open_with_astropy_alone(path):
    from astropy.table import Table

    table = Table.read(path, format="ascii.ecsv")
    assert {"epoch", "theta", "rho"} <= set(table.colnames)
    assert "nvented" in table.meta["relorbit"]["pair"]["note"]
    assert str(table["rho"].unit) == "arcsec"
