"""Finding every global fixed-point potential of one coordinate by shooting from x = 0.

A regular solution of the fixed-point equation F(x, u, u', u'') = 0 is fixed by sigma = u'(0). Only isolated
values of sigma belong to solutions for all x (T. R. Morris, Phys. Lett. B 334 (1994) 355, hep-th/9405190).
On one side of such a value the mass u' + 2 x u'' runs to plus infinity at a finite x, on the other it is driven
to the boundary where the regulated propagator diverges; so the fixed points are where the sign of the
mass at the end of the integration changes, and bisection finds them. The scan needs no guess; it
resolves fixed points whose sigma differ by more than the spacing of its grid.
"""

from __future__ import annotations

import dataclasses
from dataclasses import dataclass
from functools import cached_property
from typing import Any

import numpy as np

from frg.derive import symbols
from frg.derive.equations import FlowEquations
from frg.evaluate.build import build_flow, natural_units
from frg.evaluate.flow import Arguments, Flow, integrate
from frg.evaluate.jaxload import load
from frg.evaluate.series import series_arithmetic
from frg.language.program import Program, compile_expressions
from frg.solve.ladder import Ladder, LadderScan, sigma_grid

START_ORDER = 10  # of the Taylor solution that carries the integration away from the regular singularity x = 0


@dataclass(frozen=True, kw_only=True)
class ShootingScan:
    """Region of sigma (in reported units) and number of grid points, integration lengths in
    sqrt(x) (x in natural units; far beyond the singularity of one side the other side can turn too, hence
    several), steps, rounds of refinement."""

    low: float
    high: float
    points: int
    reaches: tuple[float, ...]
    steps: int
    rounds: int


@dataclass(frozen=True, kw_only=True, eq=False)
class Shot:
    """A candidate: the solution with sigma as far as it was followed, x (m,), u, u', in reported units."""

    sigma: float
    x: np.ndarray
    u: np.ndarray
    slope: np.ndarray


def companion(equations: FlowEquations) -> FlowEquations:
    """The same potential expanded about 0 to a low order, without anomalous dimension."""
    import sympy

    (flow,) = equations.functions
    zero = {sympy.Symbol(a.symbol): sympy.Integer(0) for a in equations.anomalous}
    declared = dataclasses.replace(
        flow.declared, about=sympy.Integer(0), order=sympy.Integer(START_ORDER), grid=None,
        coefficients="derivative",
    )
    loops = tuple(dataclasses.replace(x, integrand=x.integrand.subs(zero)) for x in equations.loops)
    return dataclasses.replace(
        equations, anomalous=(), odd=None, loops=loops,
        functions=(dataclasses.replace(flow, rhs=flow.rhs.subs(zero), declared=declared),),
    )


def can_shoot(equations: FlowEquations) -> bool:
    """One function of one coordinate whose flow has at most two derivatives, nothing else running."""
    return (
        len(equations.functions) == 1 and not equations.couplings
        and len(equations.functions[0].coordinates) == 1
        and all(o[0] <= 2 for o in equations.functions[0].jets)
    )


@dataclass(frozen=True, kw_only=True, eq=False)
class Shooting:
    """Integrator of u''' = -(F_x + F_u u' + F_u' u'')/F_u'' for many sigma at once."""

    equations: FlowEquations  # a `companion`

    @cached_property
    def flow(self) -> Flow:
        return build_flow(self.equations, ())

    @cached_property
    def ladder(self) -> Ladder:
        return Ladder(flow=self.flow)

    @cached_property
    def _programs(self) -> dict[str, Any]:
        """F's partial derivatives; those of loop integrals are loops over derived integrands."""
        import sympy

        (flow,) = self.equations.functions
        jets = [symbols.jet(flow.name, (k,)) for k in range(3)]
        by = [sympy.Symbol(flow.coordinates[0]), *jets]
        outer = {v.name: compile_expressions([flow.rhs.diff(v)]) for v in by}
        inner: dict[tuple[str, str], Program] = {}
        weights: dict[str, Program] = {}
        for loop in self.equations.loops:
            weights[loop.symbol] = compile_expressions([flow.rhs.diff(sympy.Symbol(loop.symbol))])
            for v in by:
                inner[loop.symbol, v.name] = compile_expressions([loop.integrand.diff(v)])
        return {"by": [v.name for v in by], "outer": outer, "inner": inner, "weights": weights}

    def _third(self, x: Any, jets: tuple[Any, Any, Any], args: Arguments) -> Any:
        (flow,) = self.equations.functions
        programs, arithmetic, rule = self._programs, series_arithmetic(), args.rule
        assert rule is not None or not self.equations.loops
        env = {**args.parameters, flow.coordinates[0]: x}
        env |= {symbols.jet(flow.name, (k,)).name: jets[k] for k in range(3)}
        for loop in self.equations.loops:
            symbol = loop.symbol
            env[symbol] = integrate(self.flow._loops[symbol][1], env, rule, surface=False,  # type: ignore[arg-type]
                                    subtract=self.flow.subtract)
        partial = []
        for name in programs["by"]:
            total = programs["outer"][name].run(env, arithmetic)[0]
            for symbol, weight in programs["weights"].items():
                inner = programs["inner"][symbol, name]
                slope = integrate(inner, env, rule, surface=False, subtract=False)  # type: ignore[arg-type]
                total = total + weight.run(env, arithmetic)[0] * slope
            partial.append(total)
        F_x, F_0, F_1, F_2 = partial
        return -(F_x + F_0 * jets[1] + F_1 * jets[2]) / F_2

    @cached_property
    def _compiled(self) -> Any:
        jax, jnp, lax = load()

        def shoot(c: Any, args: Arguments, z: Any) -> Any:
            """Runge-Kutta of fourth order in z = sqrt(x) from z[0] on; stops at a singularity."""
            g, block = c * args.scale, self.flow.block
            name = self.equations.functions[0].name
            start = tuple(block.jets_at(g, z[0] ** 2, name, (k,), args.box) for k in range(3))  # type: ignore[union-attr]

            def slope(z: Any, u: Any) -> Any:
                return tuple(2 * z * v for v in (u[1], u[2], self._third(z * z, u, args)))

            def moved(u: Any, k: Any, h: Any) -> Any:
                return tuple(a + h * b for a, b in zip(u, k, strict=True))

            def step(state: Any, ends: Any) -> Any:
                u, alive = state
                z0, h = ends[0], ends[1] - ends[0]
                k1 = slope(z0, u)
                k2 = slope(z0 + h / 2, moved(u, k1, h / 2))
                k3 = slope(z0 + h / 2, moved(u, k2, h / 2))
                k4 = slope(z0 + h, moved(u, k3, h))
                new = tuple(a + h / 6 * (p + 2 * q + 2 * r + s)
                            for a, p, q, r, s in zip(u, k1, k2, k3, k4, strict=True))
                mass = new[1] + 2 * ends[1] ** 2 * new[2]
                before = u[1] + 2 * z0**2 * u[2]
                # a jump within one step is a pole that was stepped over
                jump = jnp.abs(mass - before) > 0.5 * (1 + jnp.abs(before))
                fine = alive & ~jump & jnp.isfinite(mass)
                u = tuple(jnp.where(fine, a, b) for a, b in zip(new, u, strict=True))
                return (u, fine), (u[0], u[1], u[1] + 2 * ends[1] ** 2 * u[2], fine)

            ends = jnp.stack([z[:-1], z[1:]], axis=1)
            _, (u, first, mass, alive) = lax.scan(step, (start, jnp.asarray(True)), ends)
            return jnp.sum(alive), u, first, mass

        return jax.jit(jax.vmap(shoot, in_axes=(0, None, None)))

    def scan(
        self, settings: ShootingScan, args: Arguments, lowest: float, most: int
    ) -> tuple[list[Shot], int]:
        """(all sign changes, refined, by rising sigma; how many were left out because there were more than
        `most` at one integration length). `lowest` bounds sigma > -lowest."""
        unit = float(args.scale[0])
        low = max(settings.low, -0.999 * lowest) / unit
        region = LadderScan(low=low, high=settings.high / unit, points=settings.points, halvings=0)
        sigma = sigma_grid(region)
        size, _ = natural_units(self.flow, args)
        z = np.sqrt(size) * np.linspace(0.1, max(settings.reaches), settings.steps + 1)
        mass = self._fire(sigma, args, z)[3]
        stops, ends, dropped = [], [], 0
        for reach in settings.reaches:
            stop = int(np.searchsorted(z[1:], np.sqrt(size) * reach * (1 - 1e-9)))
            sign = np.sign(mass[:, stop])
            changes = np.flatnonzero(sign[:-1] * sign[1:] <= 0)
            if len(changes) > most:
                dropped += len(changes)
                continue
            stops += [stop] * len(changes)
            ends += [(sigma[k], sigma[k + 1]) for k in changes]
        if not ends:
            return [], dropped
        refined = self._refine(np.array(ends), np.array(stops), settings.rounds, args, z)
        return self._shots(_merged(refined), args, z, unit), dropped

    def _fire(self, sigma: np.ndarray, args: Arguments, z: np.ndarray) -> list[np.ndarray]:
        """[steps survived, u, u', mass] for every sigma, in batches of fixed size; after a singularity the
        last values stay."""
        jnp = load().numpy
        found = []
        for first in range(0, len(sigma), BATCH):
            piece = sigma[first : first + BATCH]
            padded = np.concatenate([piece, np.repeat(piece[:1], BATCH - len(piece))])
            _, c = self.ladder.climb(padded, self.flow.size, args)
            out = self._compiled(jnp.asarray(c), args, jnp.asarray(z))
            found.append([np.asarray(v)[: len(piece)] for v in out])
        return [np.concatenate(v) for v in zip(*found, strict=True)]

    def _refine(
        self, ends: np.ndarray, stops: np.ndarray, rounds: int, args: Arguments, z: np.ndarray
    ) -> np.ndarray:
        """Cut every bracket (K, 2) at `inside` points and keep the first piece in which the mass at the step `stops`
        (K,) changes sign; all brackets in one batch a round."""
        inside = 12
        rows = np.arange(len(ends))
        for _ in range(rounds):
            grids = np.linspace(ends[:, 0], ends[:, 1], inside + 2, axis=1)
            mass = self._fire(grids.ravel(), args, z)[3].reshape(*grids.shape, -1)
            sign = np.sign(mass[rows, :, stops])
            first = np.argmax(sign[:, :-1] * sign[:, 1:] <= 0, axis=1)
            ends = np.stack([grids[rows, first], grids[rows, first + 1]], axis=1)
        return ends

    def _shots(
        self, ends: list[tuple[float, float]], args: Arguments, z: np.ndarray, unit: float
    ) -> list[Shot]:
        """The common part of the two solutions that enclose each fixed point, by rising sigma."""
        life, u, slope, _ = self._fire(np.array(ends).ravel(), args, z)
        found = []
        for k, (low, high) in enumerate(ends):
            a, b = 2 * k, 2 * k + 1
            gap = np.abs(slope[a] - slope[b])
            apart = gap > 1e-2 * (np.abs(slope[a]) + np.abs(slope[b]) + 1e-12 * unit)
            together = int(np.argmax(apart)) if apart.any() else len(apart)
            kept = max(min(together, int(min(life[a], life[b]))), 3)
            found.append(
                Shot(sigma=(low + high) / 2 * unit, x=z[1 : kept + 1] ** 2, u=u[a][:kept], slope=slope[a][:kept])
            )
        return found


BATCH = 256  # starts a compiled call


def _merged(ends: np.ndarray) -> list[tuple[float, float]]:
    """Brackets without those that refine to the same point."""
    found: list[tuple[float, float]] = []
    for low, high in sorted((float(a), float(b)) for a, b in ends):
        if not found or low > found[-1][1] + 1e-12:
            found.append((low, high))
    return found
