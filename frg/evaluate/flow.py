"""`Flow`: the flow of a truncation as functions of a vector of unknowns, ready to be compiled.

All orders of a study share one program: unknowns are padded to the largest order and masked.
"""

from __future__ import annotations

from dataclasses import dataclass
from functools import cached_property
from typing import Any, NamedTuple

import numpy as np

from frg.derive import symbols
from frg.derive.equations import FlowEquations, Loop
from frg.evaluate.discretisation import AbstractDiscretisation
from frg.evaluate.jaxload import load
from frg.evaluate.series import Series, series_arithmetic
from frg.evaluate.slopes import LocalSlopes, has_slopes
from frg.language.program import Program, compile_expressions


class Rule(NamedTuple):
    """A regulator's quadrature as arrays (see `frg.regulator.base.LoopRule`)."""

    y: Any
    weight: Any
    s: Any
    surface_y: Any
    surface_weight: Any
    surface_s: Any


class Arguments(NamedTuple):
    """Everything that may change without a new compilation: parameter values by name (vd included),
    the quadrature, the size of the box of a grid, and the scale of every unknown."""

    parameters: dict[str, Any]
    rule: Rule | None
    box: Any
    scale: Any


@dataclass(frozen=True, kw_only=True, eq=False)
class Flow:
    """b(g) and M(g) of M(g) dg/dt = b(g) for the unknowns of one truncation.

    Unknowns: those of `block` (running functions), then the couplings with a flow of their own, then
    (where eta is read at a minimum that is not itself an unknown) the position of that minimum, which has
    no t-derivative in the equations: an algebraic unknown. All public methods are pure jax functions of
    the *scaled* unknowns c, g = scale * c, except where they say so."""

    equations: FlowEquations
    block: AbstractDiscretisation | None
    couplings: tuple[str, ...]
    minimum_function: str | None
    rhs: Program
    rhs_names: tuple[str, ...]
    subtract: bool

    @cached_property
    def names(self) -> tuple[str, ...]:
        own = self.block.names if self.block else ()
        return own + self.couplings + (("minimum{}",) if self.minimum_function else ())

    @property
    def size(self) -> int:
        return len(self.names)

    @cached_property
    def algebraic(self) -> np.ndarray:
        """(size,) which unknowns are fixed by a condition instead of a flow."""
        return np.array([name == "minimum{}" for name in self.names])

    def active(self, order: int | None) -> np.ndarray:
        """(size,) which unknowns exist at an order of the study."""
        own = self.block.active(order) if self.block else np.zeros(0, dtype=bool)
        return np.concatenate([own, np.ones(self.size - len(own), dtype=bool)])

    @cached_property
    def _loops(self) -> dict[str, tuple[Loop, Program]]:
        return {
            loop.symbol: (loop, compile_expressions([loop.integrand])) for loop in self.equations.loops
        }

    @cached_property
    def _anomalous(self) -> Program:
        return compile_expressions([a.rhs for a in self.equations.anomalous])

    @cached_property
    def slopes(self) -> LocalSlopes | None:
        """The flow with its derivatives in closed form, where it has them."""
        if not has_slopes(self.equations, self.block):
            return None
        return LocalSlopes(equations=self.equations, block=self.block)  # type: ignore[arg-type]

    @cached_property
    def implicit(self) -> bool:
        """True where d_t of a function stands on the right too: M(g) is then part of the flow."""
        return any(f.rates for f in self.equations.functions)

    @cached_property
    def _masses(self) -> Program:
        return compile_expressions(list(self.equations.positivity))

    @cached_property
    def _signs(self) -> Program:
        return compile_expressions([e for e, _ in self.equations.signs])

    # ---- evaluation in reported unknowns -------------------------------------------------------

    def _split(self, g: Any) -> tuple[Any, dict[str, Any], Any]:
        count = self.block.size if self.block else 0
        coupled = {name: g[count + i] for i, name in enumerate(self.couplings)}
        return g[:count], coupled, (g[-1] if self.minimum_function else None)

    def _with_loops(self, program: Program, env: dict[str, Any], rule: Rule | None) -> list[Any]:
        env = dict(env)
        for symbol in sorted(program.symbols):
            if symbol in self._loops:
                if rule is None:
                    raise AssertionError("a flow with loop integrals needs a quadrature rule")
                loop, integrand = self._loops[symbol]
                env[symbol] = integrate(integrand, env, rule, surface=loop.surface, subtract=self.subtract)
        return program.run(env, series_arithmetic())

    def anomalous_dimensions(self, g: Any, args: Arguments) -> dict[str, Any]:
        """eta by symbol name, from equations linear in eta, read at the point they name."""
        equations = self.equations.anomalous
        if not equations:
            return {}
        block_g, coupled, minimum = self._split(g)
        assert self.block is not None
        found: dict[str, Any] = {}
        for equation in equations:
            x = self._reading_point(equation.at, block_g, minimum, args)
            env = {**args.parameters, **coupled}
            function = self.equations.functions[0]
            env[function.coordinates[0]] = x
            for orders in equation.jets:
                name = f"{equation.function}{{{','.join(map(str, orders))}}}"
                env[name] = self.block.jets_at(block_g, x, equation.function, orders, args.box)
            at = [
                self._with_loops(self._anomalous, env | {equation.symbol: value}, args.rule)[0]
                for value in (0.0, 1.0)
            ]
            found[equation.symbol] = at[0] / (1 - (at[1] - at[0]))
        return found

    def _reading_point(self, at: Any, block_g: Any, minimum: Any, args: Arguments) -> Any:
        if isinstance(at, str):
            assert self.block is not None
            return minimum if minimum is not None else self.block.expansion_point(block_g)
        (value,) = compile_expressions([at]).run(args.parameters, series_arithmetic())
        return value

    def environment(self, g: Any, args: Arguments, moving: Any = None) -> dict[str, Any]:
        """Values of everything that can occur in a right-hand side; `moving` (size,) are dg/dt on the right of an
        implicit flow, zero by default."""
        jnp = load().numpy
        block_g, coupled, _ = self._split(g)
        env = {**args.parameters, **coupled, **self.anomalous_dimensions(g, args)}
        if self.block is not None:
            env |= self.block.numbers(block_g, args.box)
            if self.implicit:
                rates = self.block.numbers(jnp.zeros_like(block_g) if moving is None else moving, args.box)
                for f in self.equations.functions:
                    for orders in f.rates:
                        env[symbols.rate(f.name, orders).name] = rates[symbols.jet(f.name, orders).name]
        return env

    def right_side(self, g: Any, args: Arguments, moving: Any = None) -> Any:
        """(size,) b(g) in reported normalisation, conditions included; with `moving`, b(g) - M(g) moving."""
        jnp = load().numpy
        block_g, _, minimum = self._split(g)
        env = self.environment(g, args, moving)
        values = dict(zip(self.rhs_names, self._with_loops(self.rhs, env, args.rule), strict=True))
        parts = []
        if self.block is not None:
            parts.append(self.block.rows(block_g, values))
        parts += [jnp.reshape(jnp.asarray(values[c], dtype=g.dtype), (1,)) for c in self.couplings]
        if self.minimum_function:
            slope = self.block.jets_at(block_g, minimum, self.minimum_function, (1,), args.box)  # type: ignore[union-attr]
            parts.append(jnp.reshape(slope, (1,)))
        return jnp.concatenate(parts)

    def mass_matrix(self, g: Any, args: Arguments) -> Any:
        """(size, size) M(g) in reported normalisation; rows of conditions are zero."""
        jax, jnp, _ = load()
        if self.implicit:
            return -jax.jacfwd(lambda rate: self.right_side(g, args, rate))(jnp.zeros_like(g))
        block_g, _, _ = self._split(g)
        count = self.block.size if self.block else 0
        full = jnp.diag(jnp.where(self.algebraic, 0.0, 1.0))
        if self.block is not None:
            full = full.at[:count, :count].set(self.block.mass(block_g, args.box))
        return full

    # ---- scaled, masked: what searches see -----------------------------------------------------

    def residual(self, c: Any, active: Any, args: Arguments) -> Any:
        """(size,) search form of b, scaled and with the inactive part replaced by c itself."""
        jnp = load().numpy
        g = jnp.where(active, c * args.scale, 0.0)
        b = self.right_side(g, args)
        if self.block is not None:
            own = self.block.size
            b = jnp.concatenate([self.block.search_rows(g[:own], b[:own]), b[own:]])
        return jnp.where(active, b / self._row_scale(args), c)

    def linearised_residual(self, c: Any, active: Any, args: Arguments) -> tuple[Any, Any]:
        """(residual, its derivative by c): (size,), (size, size)."""
        jax, jnp, _ = load()
        if self.slopes is None:
            return self.residual(c, active, args), jax.jacfwd(lambda c: self.residual(c, active, args))(c)
        g = jnp.where(active, c * args.scale, 0.0)
        b, slope, _ = self.slopes.evaluate(g, args.parameters, args.box)
        rows = self._row_scale(args)
        scaled = slope * args.scale[None, :] / rows[:, None]
        inside = active[:, None] & active[None, :]
        return jnp.where(active, b / rows, c), jnp.where(inside, scaled, jnp.eye(self.size))

    def _row_scale(self, args: Arguments) -> Any:
        """Rows in the scale of their unknown; a condition U'(x) = 0 in the scale of U/x."""
        jnp = load().numpy
        if not self.minimum_function:
            return args.scale
        scale = jnp.asarray(args.scale)
        return scale.at[-1].set(scale[0] / scale[-1])

    def system(self, c: Any, args: Arguments) -> tuple[Any, Any, Any]:
        """(b, db/dc, M) scaled, for all unknowns; select the active block outside."""
        jax, jnp, _ = load()
        rows = self._row_scale(args)
        if self.slopes is not None:
            b, slope, mass = self.slopes.evaluate(c * args.scale, args.parameters, args.box)
            ratio = args.scale[None, :] / rows[:, None]
            return b / rows, slope * ratio, mass * ratio

        def scaled(c: Any) -> Any:
            return self.right_side(c * args.scale, args) / rows

        mass = self.mass_matrix(c * args.scale, args) * args.scale[None, :] / rows[:, None]
        return scaled(c), jax.jacfwd(scaled)(c), mass

    def masses(self, g: Any, x: Any, args: Arguments) -> Any:
        """(k,) the masses w of the regulated propagators 1/(P + w) at the point x of the coordinate."""
        jnp = load().numpy
        block_g, coupled, _ = self._split(g)
        env = {**args.parameters, **coupled}
        if self.block is not None and self.equations.functions:
            env[self.equations.functions[0].coordinates[0]] = x
            for function in self.equations.functions:
                for orders in function.jets:
                    name = f"{function.name}{{{','.join(map(str, orders))}}}"
                    env[name] = self.block.jets_at(block_g, x, function.name, orders, args.box)
        return jnp.stack([jnp.asarray(v) for v in self._masses.run(env, series_arithmetic())])


def sign_values(flow: Flow, g: Any, args: Arguments) -> Any:
    """(k,) values at the point of expansion of the expressions that must be positive."""
    jnp = load().numpy
    values = flow._signs.run(flow.environment(g, args), series_arithmetic())
    return jnp.stack([v.coefficients[0] if isinstance(v, Series) else jnp.asarray(v) for v in values])


def masses_at_centre(flow: Flow, g: Any, args: Arguments) -> Any:
    """(k,) the masses of `Flow.masses` at the point of expansion, for any number of coordinates."""
    jnp = load().numpy
    values = flow._masses.run(flow.environment(g, args), series_arithmetic())
    return jnp.stack([v.coefficients[0] if isinstance(v, Series) else jnp.asarray(v) for v in values])


def integrate(
    integrand: Program, env: dict[str, Any], rule: Rule, *, surface: bool, subtract: bool
) -> Any:
    """Quadrature of a loop integrand whose jets are numbers (plain, arrays over points, or series)."""
    regular = _weighted(integrand, env, rule.y, rule.weight, rule.s)
    if subtract:
        vacuum = {k: (0.0 if "{" in k else v) for k, v in env.items()}
        regular = regular - _weighted(integrand, vacuum, rule.y, rule.weight, rule.s)
    if not surface or rule.surface_y.shape[0] == 0:
        return regular
    without = rule.surface_s.at[2].set(0.0)
    on = _weighted(integrand, env, rule.surface_y, rule.surface_weight, rule.surface_s)
    off = _weighted(integrand, env, rule.surface_y, rule.surface_weight, without)
    return regular + on - off


def _weighted(integrand: Program, env: dict[str, Any], y: Any, weight: Any, s: Any) -> Any:
    """sum_q weight_q integrand(y_q): vectorised over nodes whatever the number system of the jets."""
    jax, jnp, _ = load()
    arithmetic = series_arithmetic()
    algebras = [v.algebra for v in env.values() if isinstance(v, Series)]

    def at_node(y: Any, weight: Any, s: Any) -> Any:
        nodes = {"y{}": y, **{f"s{{{k}}}": s[k] for k in range(s.shape[0])}}
        (value,) = integrand.run({**env, **nodes}, arithmetic)
        return weight * (value.coefficients if isinstance(value, Series) else value)

    probe = integrand.symbols
    total = jnp.sum(jax.vmap(at_node)(y, weight, s.T), axis=0)
    is_series = any(isinstance(env.get(name), Series) for name in probe)
    return Series(algebras[0], total) if is_series else total
