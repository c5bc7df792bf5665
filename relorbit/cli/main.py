"""``relorbit VERB ...``: find the verb, run it, turn what goes wrong into one line and a status."""

from __future__ import annotations

import argparse
import os
import re
import sys
import tempfile
import traceback
from collections.abc import Sequence
from importlib import import_module
from typing import NoReturn

from relorbit import __version__
from relorbit.errors import InputError, Undetermined

# verb -> what it does; its module, of the same name in this package, has `configure` and `run`
VERBS = {
    "intake": "read lists of measures into a pair file",
    "solve": "find the orbit of a pair, with its errors and the total mass",
    "sample": "all orbits that fit, with their probability: short arcs too",
    "kind": "is it a pair at all: at rest, straight motion or orbit, with the odds",
    "ephemeris": "positions at future or past dates, with errors",
    "residuals": "observed minus computed, for every measure",
    "judge": "new measures against the orbit on record, and the orbit against them",
    "vet": "slips among the measures: found, put right, taken back",
    "between": "a measure from two catalogue positions",
    "weigh": "the total mass and what its error is made of",
    "draw": "figures: the apparent orbit, the motion in time, the residuals, a sheet to print",
    "demo": "do the whole job on a shipped example",
    "desk": "a window to work on a pair by eye and hand",
}
# verbs whose module is in a room above this one
ELSEWHERE = {"desk": "relorbit.desk.verb"}
FAULT, BAD_INPUT, NOT_DETERMINED, INTERRUPTED = 1, 2, 3, 130
_OPTION, _NEGATIVE = re.compile(r"--[a-z][a-z-]*"), re.compile(r"-[.0-9]")
CAUTION = (
    "Orbits from short arcs are provisional. Never point a telescope near the Sun: without a full\n"
    "solar filter over the aperture an eye is blinded at once."
)


class OneLineParser(argparse.ArgumentParser):
    """A parser whose complaint is one line."""

    def error(self, message: str) -> NoReturn:
        self.exit(BAD_INPUT, f"{self.prog}: {message} (see {self.prog} --help)\n")


def parser_of_verbs() -> argparse.ArgumentParser:
    """The parser that only knows the names of the verbs: cheap enough for --help."""
    width = max(map(len, VERBS))
    listing = "\n".join(f"  {verb:<{width}}  {what}" for verb, what in VERBS.items())
    parser = OneLineParser(
        prog="relorbit",
        formatter_class=argparse.RawDescriptionHelpFormatter,
        usage="relorbit VERB [...]   (relorbit VERB --help explains a verb)",
        description="Orbits of visual double stars from position angles and separations.",
        epilog=f"verbs:\n{listing}\n\nstart with:\n  relorbit demo\n\n{CAUTION}",
        add_help=True,
    )
    parser.add_argument("--version", action="version", version=f"relorbit {__version__}")
    parser.add_argument("verb", choices=VERBS, metavar="VERB", help=argparse.SUPPRESS)
    return parser


def main(arguments: Sequence[str] | None = None) -> int:
    """Run one verb.

    Returns
    -------
    int
        0 done; 1 a fault of relorbit's own; 2 something given is wrong; 3 the measures do not
        determine what was asked; 130 interrupted.
    """
    words = list(sys.argv[1:] if arguments is None else arguments)
    verbs = parser_of_verbs()
    if not words:
        verbs.print_help()
        return BAD_INPUT
    try:
        verb = verbs.parse_args(words[:1]).verb
        module = import_module(ELSEWHERE.get(verb, f"relorbit.cli.{verb}"))
        parser = OneLineParser(
            prog=f"relorbit {verb}",
            formatter_class=argparse.RawDescriptionHelpFormatter,
            description=module.__doc__,
            epilog=f"example:\n{module.EXAMPLE}",
        )
        module.configure(parser)
        return _run(module, parser.parse_args(_joined(words[1:])))
    except SystemExit as leaving:
        return int(leaving.code or 0)


def _joined(words: Sequence[str]) -> list[str]:
    """The words with ``--dec -30:17:16`` made ``--dec=-30:17:16``, which argparse understands."""
    joined: list[str] = []
    for word in words:
        if joined and _OPTION.fullmatch(joined[-1]) and _NEGATIVE.match(word):
            joined[-1] += f"={word}"
        else:
            joined.append(word)
    return joined


def _run(module: object, options: argparse.Namespace) -> int:
    try:
        status = module.run(options)  # type: ignore[attr-defined]
        sys.stdout.flush()
        return status or 0
    except InputError as error:
        return _complain(str(error), BAD_INPUT)
    except Undetermined as error:
        return _complain(f"not determined: {error.reason}", NOT_DETERMINED)
    except KeyboardInterrupt:
        return _complain("stopped; nothing was left half written", INTERRUPTED)
    except BrokenPipeError:
        # the reader of our output has gone: not our fault, and nothing to tell it
        os.dup2(os.open(os.devnull, os.O_WRONLY), sys.stdout.fileno())
        return 0
    except Exception:
        return _complain(report_fault(), FAULT)


def _complain(message: str, status: int) -> int:
    print(f"relorbit: {' '.join(message.split())}", file=sys.stderr)
    return status


def report_fault() -> str:
    """Write the details of an internal fault to a file and say where."""
    with tempfile.NamedTemporaryFile(
        "w", prefix="relorbit-fault-", suffix=".txt", delete=False, encoding="utf-8"
    ) as file:
        file.write(f"relorbit {__version__}, Python {sys.version}\n{' '.join(sys.argv)}\n\n")
        file.write(traceback.format_exc())
    return f"a fault of relorbit's own, not of your data; the details are in {file.name}"


if __name__ == "__main__":
    sys.exit(main())
