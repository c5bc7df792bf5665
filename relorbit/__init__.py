"""relorbit: orbits of visual double stars from position angles and separations.

>>> import relorbit
>>> pair = relorbit.read("measures.csv")                     # doctest: +SKIP
>>> solution = relorbit.solve(pair)                          # doctest: +SKIP
>>> relorbit.ephemeris(solution, [2027.0, 2028.0]).theta     # doctest: +SKIP

The names below are stable, and are imported when they are first used.
"""

from __future__ import annotations

from importlib import import_module
from typing import TYPE_CHECKING, Any

__version__ = "0.1.0"

if TYPE_CHECKING:
    from relorbit.batch import solve_many
    from relorbit.derive.companion import CompanionSearch, search_companion
    from relorbit.derive.ephemeris import Ephemeris, ephemeris, turning_points
    from relorbit.derive.judge import Judgement, judge
    from relorbit.derive.posterior import sampled_ephemeris
    from relorbit.errors import InputError, RelorbitError, Undetermined
    from relorbit.measures.between import Place, PlaceMeasure, between
    from relorbit.measures.pair import Pair, RecordedOrbit
    from relorbit.measures.store import read_pair as read
    from relorbit.measures.table import Measures
    from relorbit.measures.vetting import Finding, applied, undone
    from relorbit.orbit.elements import Elements
    from relorbit.solve.kind import kind
    from relorbit.solve.posterior import Posterior
    from relorbit.solve.prior import Prior
    from relorbit.solve.quadrants import joint_quadrants
    from relorbit.solve.sample import sample
    from relorbit.solve.saved_samples import read_samples
    from relorbit.solve.solution import Solution
    from relorbit.solve.solver import solve
    from relorbit.solve.vetted import vet
    from relorbit.solve.weighing import NoiseGroup

_HOMES = {
    "CompanionSearch": "relorbit.derive.companion",
    "Elements": "relorbit.orbit.elements",
    "Ephemeris": "relorbit.derive.ephemeris",
    "Finding": "relorbit.measures.vetting",
    "InputError": "relorbit.errors",
    "Judgement": "relorbit.derive.judge",
    "Measures": "relorbit.measures.table",
    "NoiseGroup": "relorbit.solve.weighing",
    "Pair": "relorbit.measures.pair",
    "Place": "relorbit.measures.between",
    "PlaceMeasure": "relorbit.measures.between",
    "RecordedOrbit": "relorbit.measures.pair",
    "RelorbitError": "relorbit.errors",
    "Solution": "relorbit.solve.solution",
    "Undetermined": "relorbit.errors",
    "Posterior": "relorbit.solve.posterior",
    "Prior": "relorbit.solve.prior",
    "applied": "relorbit.measures.vetting",
    "between": "relorbit.measures.between",
    "ephemeris": "relorbit.derive.ephemeris",
    "joint_quadrants": "relorbit.solve.quadrants",
    "judge": "relorbit.derive.judge",
    "kind": "relorbit.solve.kind",
    "read": "relorbit.measures.store",
    "read_samples": "relorbit.solve.saved_samples",
    "sample": "relorbit.solve.sample",
    "sampled_ephemeris": "relorbit.derive.posterior",
    "search_companion": "relorbit.derive.companion",
    "solve": "relorbit.solve",
    "solve_many": "relorbit.batch",
    "turning_points": "relorbit.derive.ephemeris",
    "undone": "relorbit.measures.vetting",
    "vet": "relorbit.solve.vetted",
}
__all__ = [
    "CompanionSearch",
    "Elements",
    "Ephemeris",
    "Finding",
    "InputError",
    "Judgement",
    "Measures",
    "NoiseGroup",
    "Pair",
    "Place",
    "PlaceMeasure",
    "Posterior",
    "Prior",
    "RecordedOrbit",
    "RelorbitError",
    "Solution",
    "Undetermined",
    "__version__",
    "applied",
    "between",
    "ephemeris",
    "joint_quadrants",
    "judge",
    "kind",
    "read",
    "read_samples",
    "sample",
    "sampled_ephemeris",
    "search_companion",
    "solve",
    "solve_many",
    "turning_points",
    "undone",
    "vet",
]


def __getattr__(name: str) -> Any:
    if name not in _HOMES:
        raise AttributeError(f"module 'relorbit' has no attribute {name!r}")
    home = import_module(_HOMES[name])
    if name == "solve":
        # the room is callable, so that `relorbit.solve` is both it and its function
        return home
    return getattr(home, {"read": "read_pair"}.get(name, name))


def __dir__() -> list[str]:
    return list(__all__)
