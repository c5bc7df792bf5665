"""Do the whole job on a shipped example, an invented pair, into a new folder: read the list, find
the orbit, keep it, predict positions, weigh the pair, draw it. Says what it made and where.
"""

from __future__ import annotations

import argparse
import contextlib
import io
import shlex
from pathlib import Path

from relorbit.errors import InputError

EXAMPLE = """  relorbit demo
  relorbit demo --into my_demo
"""
# the example's made-up identity, as its README gives it
WHO = (
    "--name", "Tarn 31", "--ra", "231.55", "--dec", "41.22", "--pm-ra", "212", "--pm-dec=-164",
    "--parallax", "95.0", "--parallax-err", "0.4", "--magnitude-primary", "5.9",
    "--magnitude-secondary", "7.1", "--spectral-primary", "G1V", "--spectral-secondary", "K0V",
)  # fmt: skip


def configure(parser: argparse.ArgumentParser) -> None:
    parser.add_argument(
        "--into", default="relorbit_demo", metavar="FOLDER", help="default: relorbit_demo"
    )


def run(options: argparse.Namespace) -> None:
    from relorbit.measures.files import write_text_atomically

    folder = Path(options.into)
    try:
        folder.mkdir(parents=True, exist_ok=True)
    except OSError as error:
        raise InputError(f"cannot make the folder: {error.strerror}", path=folder) from None
    pair = folder / "tarn_31.ecsv"
    pair.unlink(missing_ok=True)
    steps = [
        ("intake", [str(example("tarn_31.csv")), "--into", str(pair), *WHO], None),
        ("solve", [str(pair), "--record", "demo orbit"], "solution.txt"),
        ("ephemeris", [str(pair), "--from", "2027", "--to", "2037"], "ephemeris.txt"),
        ("residuals", [str(pair)], "residuals.txt"),
        ("weigh", [str(pair)], "mass.txt"),
        ("draw", [str(pair), "--out", str(folder / "orbit.png"), "--years", "10"], None),
        ("draw", [str(pair), "--figure", "time", "--out", str(folder / "time.png")], None),
        (
            "draw",
            [str(pair), "--figure", "residuals", "--out", str(folder / "residuals.png")],
            None,
        ),
        ("draw", [str(pair), "--figure", "sheet", "--out", str(folder / "sheet.pdf")], None),
    ]
    print("The pair Tarn 31 is invented: made-up elements, generated measures.\n")
    for verb, words, output in steps:
        print(f"$ relorbit {verb} {shlex.join(words)}")
        text = _output_of(verb, words)
        if output is None or verb == "solve":
            print(text)
        if output is not None:
            write_text_atomically(folder / output, text)
            print(f"written: {folder / output}\n")
    print(f"\nAll of it is in {folder}:")
    for path in sorted(folder.iterdir()):
        print(f"  {path.name}")


def _output_of(verb: str, words: list[str]) -> str:
    """What a verb prints; its errors are raised."""
    from importlib import import_module

    module = import_module(f"relorbit.cli.{verb}")
    parser = argparse.ArgumentParser(prog=f"relorbit {verb}")
    module.configure(parser)
    with contextlib.redirect_stdout(io.StringIO()) as caught:
        module.run(parser.parse_args(words))
    return caught.getvalue()


def example(name: str) -> Path:
    """A shipped example: inside the installed package, or beside it in a checkout."""
    package = Path(__file__).parents[1]
    for folder in (package / "example_measures", package.parent / "example_measures"):
        if (folder / name).is_file():
            return folder / name
    raise InputError(f"the example {name} is not installed; install relorbit anew")
