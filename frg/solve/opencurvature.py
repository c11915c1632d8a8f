"""Functions of the curvature with a shape other than the flat one: low orders only, and refused beyond."""

from __future__ import annotations

import dataclasses
from dataclasses import dataclass
from functools import cached_property

import numpy as np

from frg.derive.equations import FlowEquations
from frg.errors import InputError, Place
from frg.evaluate.jaxload import load
from frg.evaluate.taylor import Taylor
from frg.records import FixedPoint
from frg.solve.curvaturesearch import COMPLETE, LEADING, LOWEST, STARTS, CurvatureSearch, Point, smoothest_chain
from frg.solve.newton import BatchNewton
from frg.solve.search import Warm, ranked
from frg.solve.shapeguard import denominator_zeros

EXCESS = 10.0  # a term this much larger than the leading ones ends the expansion
DISC = 0.82  # radius of the expansion in R, in units of k^2


@dataclass(frozen=True, kw_only=True, eq=False)
class OpenCurvatureSearch(CurvatureSearch):
    """Starts are the fixed points of the flat shape at the same order (`reference`), and multiples of them: another
    shape shifts the scale k."""

    reference: FlowEquations

    @cached_property
    def _flat(self) -> CurvatureSearch:
        """The flat shape at all powers of R up to the largest needed, or `COMPLETE`."""
        import sympy

        (flow,) = self.reference.functions
        symbol = sympy.Symbol(self.reference.truncation.study.order)
        declared = dataclasses.replace(flow.declared, order=symbol)
        plain = dataclasses.replace(self.reference, functions=(dataclasses.replace(flow, declared=declared),))
        last = max(COMPLETE, *(self._power(n) for n in self.orders))
        return CurvatureSearch(equations=plain, orders=tuple(range(1, last + 1)), settings=self.settings)

    def _power(self, order: int) -> int:
        """The highest power of R kept at a value of the order symbol."""
        block = self.flow.block
        assert isinstance(block, Taylor)
        return block.functions[0].degree_at[order]

    @cached_property
    def _newton(self) -> BatchNewton:
        return BatchNewton(flow=self.flow, newton=self.settings.newton, batch=STARTS, known=1)

    def refuse_meaningless(self, power: int) -> None:
        """Raise InputError where the highest power of R asked for lies beyond what the shape allows; see `shapeguard`."""
        limit = self.equations.highest_order
        point = self._reference_point(max(self.orders))
        highest, growth = self._highest(point)
        if power <= highest:
            return
        reason = ""
        if highest < min(power, limit or power):
            values = {name: point[name] for name in self.flow.names if name in point}
            zeros = denominator_zeros(self.equations, values)
            pole = f" (at R = 0 for y = {zeros.pole:.3g})" if zeros.pole is not None else ""
            reason = (
                ": at the fixed point of the flat shape a denominator of the traces vanishes at |R| = "
                f"{zeros.nearest:.2g}{pole}, inside the expansion disc and depending on y, so that the terms of the expansion "
                f"grow {growth:.2g}-fold with every order"
            )
        raise InputError(
            f"a variation of the shape ({self.equations.regulator.name}) is not meaningful beyond order {highest}, and order "
            f"{power} is asked for{reason}",
            remedy='vary the endomorphism instead ([gravity] endomorphism = "1/12" with the flat shape), or lower the order',
            place=Place(source=self.equations.truncation.source),
        )

    def _reference_point(self, order: int) -> Point:
        """The fixed point of the flat shape on the smoothest chain through the orders, at the highest power of R kept
        or at three where that is lower."""
        power = max(self._power(order), LOWEST)
        last = max(power, COMPLETE)
        chain = smoothest_chain(self._flat.history_below(last + 1), self.flow.names[:LEADING])
        return chain[power - last - 1]

    def _highest(self, point: Point) -> tuple[int, float]:
        """(last order at which the terms of the flow stay of the size of the leading ones, their growth an order), at a
        fixed point of the flat shape, where only the change of shape drives the flow."""
        b = np.abs(np.asarray(load().jax.jit(self.flow.right_side)(self._vector(point), self.args)))
        terms = b * DISC ** np.arange(len(b))
        beyond = np.flatnonzero(terms > EXCESS * np.max(terms[:2]))
        growth = float((terms[-1] / np.max(terms[:2])) ** (1 / max(len(b) - 2, 1)))
        return (int(beyond[0]) - 1 if len(beyond) else len(b) - 1), growth

    def find(self, order: int | None, warm: Warm) -> tuple[list[FixedPoint], dict[str, int], tuple[str, ...]]:
        assert order is not None
        active, scale = self.flow.active(order), np.asarray(self.args.scale)
        references = [p for p in self._flat.find(self._power(order), Warm())[0] if p.kind == "physical"]
        points = [dict(zip(p.names, map(float, p.couplings), strict=True)) for p in references] + list(warm.points)
        rows = np.array([self._vector(p) / scale for p in points]).reshape(-1, self.flow.size)
        powers = np.arange(self.flow.size)
        starts = [rows * m ** (2.0 - powers) for m in np.geomspace(0.4, 2.5, 9)]
        rng = np.random.default_rng([self.settings.stream, order])
        starts += [rows * np.exp(rng.uniform(-1.2, 1.2, rows.shape)) for _ in range(16)]
        batch = np.where(active, np.concatenate(starts), 0.0)
        landing = self._newton.run(batch, active, self.args, np.zeros((0, self.flow.size)))
        good = np.isfinite(landing.unknowns).all(axis=1) & (landing.step < 1e-7)
        counts = {"starts": len(batch), "converged": int(good.sum())}
        measured = self._measured(landing.unknowns[good], active, counts)
        return ranked([self._record(m, order) for m in measured]), counts, ("started from the flat shape",)

