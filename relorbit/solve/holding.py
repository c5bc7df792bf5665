"""Elements that keep given values during a fit."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field, replace

import numpy as np

from relorbit.orbit.elements import NAMES, Elements
from relorbit.orbit.kepler import TWO_PI, FloatArray
from relorbit.orbit.regular import (
    SIZE,
    campbell_jacobian,
    elements_from_regular,
    regular_from_elements,
)


@dataclass(frozen=True)
class Holding:
    """Elements that keep given values during a fit.

    Attributes
    ----------
    values : dict
        Any of P, T, e, a, i, node, omega, in the units of `Elements`.
    """

    values: Mapping[str, float] = field(default_factory=dict)

    def __post_init__(self) -> None:
        unknown = set(self.values) - set(NAMES)
        if unknown:
            raise ValueError(f"no element is called {sorted(unknown)[0]}; use {', '.join(NAMES)}")

    @property
    def free(self) -> int:
        """Number of unknowns left."""
        held = set(self.values)
        # a circle has no periastron and a face-on orbit no node: one unknown less each, and the
        # places that are counted from there bind something only when all of them are held
        counted: set[str] = set()
        if self._circular:
            counted |= {"T", "omega"}
        if self._face_on:
            counted |= {"node", "omega"}
        bound = len(held - counted) + self._circular + self._face_on
        return SIZE - bound - bool(counted and counted <= held)

    @property
    def _circular(self) -> bool:
        return self.values.get("e") == 0.0

    @property
    def _face_on(self) -> bool:
        return self.values.get("i") in (0.0, 180.0)

    def put_back(self, u: FloatArray, reference_epoch: float) -> FloatArray:
        """u, shape (c, 7), with the held elements at their values."""
        if not self.values:
            return u
        out = np.empty_like(u)
        for row, one in enumerate(u):
            elements = elements_from_regular(one, reference_epoch)
            out[row] = regular_from_elements(self.on(elements), reference_epoch)
        return out

    def on(self, elements: Elements) -> Elements:
        """`elements` with the held ones at their values."""
        changed = dict(self.values)
        # the fit names a node in [0, 180); what is held may be meant from the other one
        free_omega = self._circular and "T" not in changed
        turned = [name for name in ("node", "omega") if name in changed]
        if any(
            _apart(getattr(elements, name), changed[name]) > 90.0
            for name in turned
            if not (name == "omega" and free_omega)
        ):
            elements = replace(elements, node=elements.node + 180.0, omega=elements.omega + 180.0)
        if self._face_on:
            elements = self._counted_from_node(elements)
        if self._circular:
            elements = self._counted_from_periastron(elements)
        return replace(elements, **changed)

    def _counted_from_node(self, elements: Elements) -> Elements:
        """The same place on a face-on orbit, the held angle (or else node = 0) at its value."""
        # only the sum (i = 0) or the difference (i = 180) of the two angles exists
        sign = 1.0 if self.values["i"] == 0.0 else -1.0
        if "omega" in self.values and "node" not in self.values:
            turn = self.values["omega"] - elements.omega
        else:
            turn = -sign * (self.values.get("node", 0.0) - elements.node)
        return replace(elements, omega=elements.omega + turn, node=elements.node - sign * turn)

    def _counted_from_periastron(self, elements: Elements) -> Elements:
        """The same place on a circle, the held T (or else omega, or omega = 0) at its value."""
        if "T" in self.values and "omega" not in self.values:
            turns = (self.values["T"] - elements.T) / elements.P
        else:
            turns = (self.values.get("omega", 0.0) - elements.omega) / 360.0
        T, omega = elements.T + turns * elements.P, elements.omega + 360.0 * turns
        return replace(elements, T=T, omega=omega)

    def directions(self, u: FloatArray, reference_epoch: float) -> FloatArray | None:
        """Orthonormal directions, shape (c, 7, free), along which no held element changes."""
        if not self.values:
            return None
        return np.stack([self._directions(one, reference_epoch) for one in u])

    def _directions(self, u: FloatArray, reference_epoch: float) -> FloatArray:
        by_u = campbell_jacobian(u, reference_epoch)
        values = self.values
        if "T" in values:
            # T of the Jacobian is the passage nearest the reference epoch
            elements = elements_from_regular(u, reference_epoch)
            by_u[1, 0] += elements.P * np.rint((values["T"] - elements.T) / elements.P)
        rows = []
        for name in values:
            if name == "e" and self._circular:
                rows.extend(np.eye(SIZE)[1:3])
            elif name == "i" and self._face_on:
                rows.extend(np.eye(SIZE)[5:7] if values["i"] == 0.0 else np.eye(SIZE)[3:5])
            elif name == "omega" and self._circular and "T" in values:
                rows.append(self._place_on_circle(u, reference_epoch))
            elif np.all(np.isfinite(by_u[NAMES.index(name)])):
                rows.append(by_u[NAMES.index(name)])
        if not rows:
            return np.eye(SIZE)
        constraints = np.nan_to_num(np.array(rows))
        constraints /= np.maximum(np.linalg.norm(constraints, axis=1, keepdims=True), 1e-300)
        return np.linalg.qr(constraints.T, mode="complete")[0][:, len(rows) :]

    def _place_on_circle(self, u: FloatArray, reference_epoch: float) -> FloatArray:
        """Gradient by u of where the companion stands, counted from the node, at the held T."""
        out = np.zeros(SIZE)
        out[0] = -TWO_PI * (self.values["T"] - reference_epoch) * np.exp(-u[0])
        for first, share in ((3, 0.5), (5, -0.5)):
            x, y = u[first : first + 2]
            square = x * x + y * y
            if square > 0.0:
                out[first : first + 2] = -share * y / square, share * x / square
        return out


def _apart(one: float, other: float) -> float:
    """How far two directions are apart, degrees in [0, 180]."""
    return abs((one - other + 180.0) % 360.0 - 180.0)
