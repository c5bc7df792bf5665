"""From measures to an orbit.

The package is callable: ``relorbit.solve(pair)`` is `relorbit.solve.solver.solve`, so that the
function and the room that holds it can share a name.
"""

from __future__ import annotations

import sys
from types import ModuleType
from typing import Any


class _CallablePackage(ModuleType):
    def __call__(self, *args: Any, **kwargs: Any) -> Any:
        """See `relorbit.solve.solver.solve`."""
        from relorbit.solve.solver import solve

        return solve(*args, **kwargs)


sys.modules[__name__].__class__ = _CallablePackage
