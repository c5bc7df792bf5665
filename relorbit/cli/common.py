"""What several verbs share: options, reading the pair, printing."""

from __future__ import annotations

import argparse
import json
import sys
import threading
from collections.abc import Iterator, Sequence
from contextlib import contextmanager
from typing import TYPE_CHECKING, Any

from relorbit.errors import InputError

if TYPE_CHECKING:
    from relorbit.derive.ephemeris import AnyOrbit
    from relorbit.errors import Undetermined
    from relorbit.measures.pair import Pair
    from relorbit.orbit.elements import Elements


DEFAULT_ERRORS = "from-residuals"


def add_pair(parser: argparse.ArgumentParser, optional: bool = False) -> None:
    """The pair that a verb works on."""
    parser.add_argument(
        "pair",
        metavar="PAIR",
        nargs="?" if optional else None,
        help="a pair file (ECSV), or a plain list with a header line",
    )
    parser.add_argument(
        "--any-epoch", action="store_true", help="also take epochs before 1600 or after 2200"
    )


def add_json(parser: argparse.ArgumentParser) -> None:
    """The choice of JSON for programs."""
    parser.add_argument("--json", action="store_true", help="print JSON instead of a table")


def add_fit(parser: argparse.ArgumentParser) -> None:
    """Options of a fit, for every verb that may make one."""
    parser.add_argument(
        "--hold",
        action="append",
        default=[],
        metavar="ELEMENT=VALUE",
        help="keep an element at a value, such as e=0 or P=41.6; may be given several times",
    )
    parser.add_argument(
        "--epoch-range", metavar="FIRST:LAST", help="fit only measures of these years"
    )
    parser.add_argument(
        "--period-range", metavar="SHORTEST:LONGEST", help="search only these periods, in years"
    )
    add_errors(parser)
    parser.add_argument(
        "--passage-near", metavar="EPOCH", help="give T as the passage nearest to this epoch"
    )


def add_errors(parser: argparse.ArgumentParser, usual: str = DEFAULT_ERRORS) -> None:
    """Where the errors of the measures come from; `usual` where nothing is said.

    Samples take the errors given: they are there for few measures too, whose residuals say nothing.
    """
    parser.set_defaults(usual_errors=usual)
    parser.add_argument(
        "--errors",
        choices=("from-residuals", "as-given"),
        default=None,
        help="estimate the error of each group of measures with the orbit, slips down-weighted, or "
        f"take the errors given (default: {usual})",
    )
    parser.add_argument(
        "--group-by",
        metavar="WORDS",
        help="what makes a group: technique, observer, aperture, era (or era:1950/1980), with "
        "commas between (default: technique,observer)",
    )
    parser.add_argument(
        "--offsets",
        action="append",
        default=[],
        metavar="GROUP",
        help="also fit the zero point of this group, or of all; may be given several times",
    )


def add_orbit(parser: argparse.ArgumentParser) -> None:
    """Which orbit a verb works with."""
    parser.add_argument(
        "--orbit", metavar="NAME", help="the orbit on record of this name (default: the last)"
    )
    parser.add_argument(
        "--fresh", action="store_true", help="solve anew even where an orbit is on record"
    )
    add_fit(parser)


def add_companion(parser: argparse.ArgumentParser) -> None:
    """Options of a look for a companion in the residuals."""
    parser.add_argument(
        "--companion", action="store_true", help="look for what the residuals still hide"
    )
    parser.add_argument(
        "--companion-periods", metavar="SHORTEST:LONGEST", help="look at these periods, in years"
    )
    parser.add_argument(
        "--level", type=float, default=0.01, metavar="SHARE",
        help="false-alarm probability below which a signal is worth following (default 0.01)",
    )  # fmt: skip
    parser.add_argument(
        "--permutations", type=int, default=999, metavar="N",
        help="how often the residuals are shuffled (default 999)",
    )  # fmt: skip
    parser.add_argument(
        "--seed", type=int, default=0, metavar="N", help="of the shuffling (default 0)"
    )


def companion(pair: Pair, orbit: AnyOrbit, options: argparse.Namespace) -> Any:
    """What the residuals of an orbit hide, by the options of `add_companion`."""
    from relorbit.derive.companion import search_companion

    return search_companion(
        as_solution(pair, orbit),
        period_range=range_of(options.companion_periods, "--companion-periods"),
        level=options.level,
        permutations=options.permutations,
        seed=options.seed,
    )


def read(options: argparse.Namespace) -> Pair:
    """The pair that was named."""
    from relorbit.measures.store import read_pair

    return read_pair(options.pair, allow_any_epoch=options.any_epoch)


def solve(pair: Pair, options: argparse.Namespace) -> Any:
    """A fresh solution by the options of `add_fit`."""
    from relorbit.derive.epochs import epoch_from_text
    from relorbit.solve.solver import solve

    near = options.passage_near
    held = assignments(options.hold, "--hold")
    said = {
        "period_range": range_of(options.period_range, "--period-range"),
        "passage_near": None if near is None else epoch_from_text(near),
        **measured(options),
    }
    with waiting("solving"):
        return solve(pair, held, **said)


def measured(options: argparse.Namespace) -> dict[str, Any]:
    """Which measures, with which errors: what `solve`, `sample` and `kind` take alike."""
    return {
        "epoch_range": range_of(options.epoch_range, "--epoch-range"),
        "errors": errors(options),
        "group_by": options.group_by,
        "offsets": options.offsets or None,
    }


def errors(options: argparse.Namespace) -> str:
    """Where errors come from: asked for, or needed by groups and zero points, or the default."""
    if options.errors is None and (options.group_by or options.offsets):
        return "from-residuals"
    return options.errors or options.usual_errors


def short_arc(pair: Pair, options: argparse.Namespace, error: Undetermined) -> Undetermined:
    """A refusal of `solve`, with what the measures do say."""
    from relorbit.solve.short_arc import short_arc_answer

    return short_arc_answer(pair, error, **measured(options))


def orbit(pair: Pair, options: argparse.Namespace) -> AnyOrbit:
    """The orbit on record, or a fresh solution where there is none or it is asked for."""
    changed = options.hold or options.epoch_range or options.period_range or options.errors
    changed = changed or options.group_by or options.offsets
    if options.orbit is not None:
        return pair.orbit(options.orbit)
    if options.fresh or changed or not pair.orbits:
        return solve(pair, options)
    return pair.orbit()


def as_solution(pair: Pair, orbit: AnyOrbit) -> Any:
    """A Solution: the orbit itself, or what an orbit on record says of the measures."""
    from relorbit.measures.pair import RecordedOrbit
    from relorbit.solve.solver import recorded_solution

    return recorded_solution(pair, orbit) if isinstance(orbit, RecordedOrbit) else orbit


def assignments(texts: Sequence[str], option: str) -> dict[str, float]:
    """``["P=41.6,e=0", "a=1"]`` as a dict.

    Raises InputError naming the option and the word that is wrong.
    """
    values: dict[str, float] = {}
    for text in [part for whole in texts for part in whole.split(",")]:
        name, equals, value = (word.strip() for word in text.partition("="))
        if not equals:
            raise InputError(f"{option}: {text!r} is not ELEMENT=VALUE, such as e=0.3")
        if name in values:
            raise InputError(f"{option}: {name} is given twice")
        try:
            values[name] = float(value)
        except ValueError:
            raise InputError(f"{option}: {value!r} is not a number for {name}") from None
    return values


def elements(text: str) -> Elements:
    """Elements from ``P=..,T=..,e=..,a=..,i=..,node=..,omega=..``."""
    from relorbit.orbit.elements import NAMES, Elements

    values = assignments([text], "--elements")
    missing = [name for name in NAMES if name not in values]
    unknown = [name for name in values if name not in NAMES]
    if unknown:
        raise InputError(f"--elements: {unknown[0]} is not an element; use {', '.join(NAMES)}")
    if missing:
        raise InputError(
            f"--elements: {', '.join(missing)} missing; give all of {', '.join(NAMES)}"
        )
    try:
        return Elements(**values)
    except ValueError as error:
        raise InputError(f"--elements: {error}") from None


def range_of(text: str | None, option: str) -> tuple[float, float] | None:
    """Two numbers, the lower first, from ``1900:2000``; None where nothing was said."""
    if text is None:
        return None
    first, colon, last = text.partition(":")
    try:
        if not colon:
            raise ValueError
        low, high = float(first), float(last)
    except ValueError:
        raise InputError(
            f"{option}: {text!r} is not a range; write two numbers as 1950:2020"
        ) from None
    if not low < high:
        raise InputError(f"{option}: {text!r} is empty; write the smaller number first")
    return low, high


def value_and_error(text: str, option: str) -> tuple[float, float]:
    """Two numbers from ``2.1:0.2``; InputError naming the option otherwise."""
    value, colon, error = text.partition(":")
    try:
        if not colon:
            raise ValueError
        return float(value), float(error)
    except ValueError:
        raise InputError(f"{option}: {text!r} is not VALUE:ERROR, such as 2.1:0.2") from None


def print_json(content: Any) -> None:
    """Print what a program will read."""
    json.dump(content, sys.stdout, indent=2, allow_nan=False)
    sys.stdout.write("\n")


def today() -> float:
    """Now, as a Julian year to the day: the command line is where the clock is looked at."""
    from datetime import UTC, datetime

    from relorbit.derive.epochs import epoch_from_text

    return epoch_from_text(datetime.now(UTC).date().isoformat())


@contextmanager
def waiting(what: str) -> Iterator[None]:
    """Show on a terminal how long a step has taken, once it takes over a second."""
    if not sys.stderr.isatty():
        yield
        return
    done = threading.Event()
    ticker = threading.Thread(target=_tick, args=(what, done), daemon=True)
    ticker.start()
    try:
        yield
    finally:
        done.set()
        ticker.join()


def _tick(what: str, done: threading.Event) -> None:
    seconds = 0
    while not done.wait(1.0):
        seconds += 1
        print(f"\r{what} ... {seconds} s", end="", file=sys.stderr, flush=True)
    if seconds:
        print("\r\033[K", end="", file=sys.stderr, flush=True)


@contextmanager
def progress(what: str) -> Iterator[Any]:
    """A callable for the share done, which shows a bar on a terminal once it takes a second."""
    if not sys.stderr.isatty():
        yield None
        return
    from tqdm import tqdm

    look = "{desc} {bar} {n:.0f} %"
    with tqdm(total=100, desc=what, delay=1.0, leave=False, bar_format=look) as bar:
        yield lambda share: bar.update(max(0.0, 100.0 * share - bar.n))
