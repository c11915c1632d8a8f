"""FlowEquations -> Flow: choose the discretisation the truncation asks for, and fill its arguments."""

from __future__ import annotations

import math
from functools import lru_cache
from typing import TYPE_CHECKING, Any

import numpy as np

from frg.derive import symbols
from frg.derive.equations import FlowEquations, FunctionFlow
from frg.derive.flat.lagrangian import HALF_SQUARE
from frg.errors import InputError, NotYet, Place
from frg.evaluate.discretisation import AbstractDiscretisation
from frg.evaluate.fieldpolynomial import FieldPolynomial, choose_pivots
from frg.evaluate.flow import Arguments, Flow, Rule
from frg.evaluate.grid import ChebyshevGrid
from frg.evaluate.jaxload import load
from frg.evaluate.taylor import Taylor, TaylorFunction
from frg.language.program import compile_expressions
from frg.language.truncation import RunningFunction
from frg.regulator.base import ACCURACY, AbstractRegulator, LoopRule

if TYPE_CHECKING:
    import sympy


def build_flow(equations: FlowEquations, orders: tuple[int, ...]) -> Flow:
    """The flow padded for all `orders` of the order symbol (empty where the truncation has none)."""
    block = _block(equations, orders)
    expressions = {f.name: f.rhs for f in equations.functions}
    if equations.potential is not None:
        expressions = {equations.potential.name: equations.potential.rhs}
    expressions |= {c.name: c.rhs for c in equations.couplings}
    reading_minimum = any(isinstance(a.at, str) for a in equations.anomalous)
    moving = block is not None and isinstance(block, Taylor) and block.moving
    return Flow(
        equations=equations,
        block=block,
        couplings=tuple(c.name for c in equations.couplings),
        minimum_function=equations.anomalous[0].function if reading_minimum and not moving else None,
        rhs=compile_expressions(list(expressions.values())),
        rhs_names=tuple(expressions),
        subtract=_rule_subtracts(equations),
    )


def _block(equations: FlowEquations, orders: tuple[int, ...]) -> AbstractDiscretisation | None:
    if equations.potential is not None:
        return _field_polynomial(equations, orders)
    if not equations.functions:
        return None
    grids = [f.declared.grid for f in equations.functions]
    if any(grids):
        return _grid(equations)
    return _taylor(equations, orders)


def _place(equations: FlowEquations) -> Place:
    return Place(source=equations.truncation.source)


def _grid(equations: FlowEquations) -> ChebyshevGrid:
    flows = equations.functions
    grids = {f.declared.grid for f in flows}
    if len(grids) != 1 or None in grids or any(len(f.coordinates) != 1 for f in flows):
        raise NotYet(
            "a grid in several coordinates, or different grids for different functions",
            remedy="give all functions the same grid over one coordinate",
            place=_place(equations),
        )
    (grid,) = grids
    assert grid is not None
    return ChebyshevGrid(
        coordinate=flows[0].coordinates[0], functions=tuple(f.name for f in flows), points=grid.points,
        jets={f.name: f.jets for f in flows},
    )


def degree_table(function: RunningFunction, equations: FlowEquations, orders: tuple[int, ...]) -> dict[int, int]:
    """Highest power kept, by value of the order symbol; {0: degree} where a truncation has no order axis.

    Raises InputError where an order leaves no coupling."""
    table = {n: equations.truncation.order_of(function, n) or 0 for n in orders or (0,)}
    limit = equations.highest_order
    if limit is not None and max(table.values()) > limit:
        raise InputError(
            f"the traces are derived up to order {limit} here, and order {max(table.values())} is asked for",
            remedy="lower the order, or use the flat shape in an even dimension", place=_place(equations),
        )
    return table


def _taylor(equations: FlowEquations, orders: tuple[int, ...]) -> Taylor:
    flows = equations.functions
    abouts = [f.declared.about for f in flows]
    moving = abouts[0] == "minimum"
    if any((a == "minimum") != moving for a in abouts) or len({str(a) for a in abouts}) != 1:
        raise NotYet(
            "running functions expanded about different points",
            remedy="give all functions the same about", place=_place(equations),
        )
    if moving and len(flows[0].coordinates) != 1:
        raise NotYet(
            "an expansion about the minimum in several invariants",
            remedy="use about = 0 or another number", place=_place(equations),
        )
    functions = tuple(
        TaylorFunction(
            name=f.name, degree_at=degree_table(f.declared, equations, orders),
            constant=_constant_matters(equations, f),
            derivative=f.declared.coefficients == "derivative",
        )
        for f in flows
    )
    about = None
    if not moving:
        value = equations.truncation.numeric(abouts[0])  # type: ignore[arg-type]
        about = (value,) * len(flows[0].coordinates)
    return Taylor(
        coordinates=flows[0].coordinates, functions=functions, about=about,
        jets={f.name: f.jets for f in flows},
    )


def _constant_matters(equations: FlowEquations, flow: FunctionFlow) -> bool:
    """False where the undifferentiated function occurs only as -const * U in its own flow: its constant term
    then decouples and is dropped."""
    plain = symbols.jet(flow.name, (0,) * len(flow.coordinates))
    others = [f.rhs for f in equations.functions if f is not flow]
    others += [loop.integrand for loop in equations.loops] + [c.rhs for c in equations.couplings]
    if any(e.has(plain) for e in others):
        return True
    coefficient = flow.rhs.diff(plain)
    names = {s.name for s in coefficient.free_symbols}
    return any("{" in n for n in names) or bool(names & set(flow.coordinates))


def _field_polynomial(equations: FlowEquations, orders: tuple[int, ...]) -> FieldPolynomial:
    import sympy

    potential = equations.potential
    assert potential is not None
    coordinates = [sympy.Symbol(name) for name in potential.coordinates]
    parameters = equations.truncation.parameters
    powers = tuple(2 if name.endswith(HALF_SQUARE) else 1 for name in potential.coordinates)
    limit_at: dict[int, int] = {}
    if equations.invariants is not None:
        couplings, degree_of, expression, limit_at = _expanded_invariants(equations, orders)
        terms = dict(sympy.Poly(sympy.expand(expression), *coordinates).terms())
    else:
        couplings, terms = potential.couplings, dict(potential.terms)
        degree_of = (1,) * len(couplings)
    terms = {e: c.subs(parameters) for e, c in terms.items() if any(e)}
    exponents = tuple(sorted(terms, key=lambda e: (sum(a * p for a, p in zip(e, powers, strict=True)), e)))
    matrix, field_degree = _coupling_matrix(exponents, terms, couplings, powers)
    try:
        pivots = choose_pivots(matrix, [])
    except ValueError:
        raise InputError(
            "the couplings of the potential are not independent: two of them multiply the same operators",
            remedy="remove one of them, or change the operators", place=_place(equations),
        ) from None
    return FieldPolynomial(
        name=potential.name, coordinates=potential.coordinates, powers=powers, couplings=couplings,
        degree_of=degree_of, field_degree=field_degree, limit_at=limit_at,
        degree=max(sum(e) for e in exponents), exponents=exponents,
        program=compile_expressions([terms[e] for e in exponents]), pivots=pivots, jets=potential.jets,
    )


def _expanded_invariants(
    equations: FlowEquations, orders: tuple[int, ...]
) -> tuple[tuple[str, ...], tuple[int, ...], sympy.Expr, dict[int, int]]:
    import sympy

    from frg.evaluate.series import monomials

    expansion = equations.invariants
    assert expansion is not None
    function = expansion.function
    limit_at = degree_table(function, equations, orders)
    names, degrees, total = [], [], sympy.Integer(0)
    for e in monomials(len(expansion.invariants), max(limit_at.values())):
        if not any(e):
            continue
        name = function.name + "_".join(str(i) for i in e)
        factor = math.prod(math.factorial(i) for i in e) if function.coefficients == "derivative" else 1
        total += sympy.Symbol(name) / factor * sympy.Mul(
            *(inv**i for inv, i in zip(expansion.invariants, e, strict=True))
        )
        names.append(name)
        degrees.append(sum(e))
    return tuple(names), tuple(degrees), total, limit_at


def _coupling_matrix(
    exponents: tuple[tuple[int, ...], ...], terms: dict[tuple[int, ...], sympy.Expr],
    couplings: tuple[str, ...], powers: tuple[int, ...],
) -> tuple[np.ndarray, tuple[int, ...]]:
    """dc/dg at a generic point, and the lowest number of fields that each coupling multiplies."""
    import sympy

    generic = {sympy.Symbol(n): sympy.Rational(7 + 3 * i, 5 + 2 * i) for i, n in enumerate(couplings)}
    matrix = np.array([
        [float(terms[e].diff(sympy.Symbol(n)).subs(generic)) for n in couplings] for e in exponents
    ])
    degrees = [sum(a * p for a, p in zip(e, powers, strict=True)) for e in exponents]
    lowest = tuple(
        min((degrees[i] for i in range(len(exponents)) if matrix[i, j] != 0), default=2)
        for j in range(len(couplings))
    )
    return matrix, lowest


def _rule_subtracts(equations: FlowEquations) -> bool:
    rule = loop_rule(equations)
    return rule is not None and rule.subtract


def loop_rule(equations: FlowEquations, accuracy: float = ACCURACY) -> LoopRule | None:
    """The regulator's LoopRule for the loops that are left to be done numerically, or None."""
    if not equations.loops:
        return None
    decay = min(loop.decay for loop in equations.loops)
    derivatives = 2 if any(loop.surface for loop in equations.loops) else 1
    return _rule(equations.regulator, dimension_value(equations), derivatives, decay, accuracy)


@lru_cache(maxsize=32)
def _rule(
    regulator: AbstractRegulator, dimension: float, derivatives: int, decay: int, accuracy: float
) -> LoopRule:
    """Regulators are frozen values, so that their rules can be kept: a search asks for them again and again."""
    return regulator.rule(dimension, derivatives=derivatives, decay=decay, accuracy=accuracy)


def dimension_value(equations: FlowEquations) -> float:
    """The dimension of space in force; NaN for typed-in flows that leave it out."""
    return equations.truncation.numeric(equations.truncation.dimension)


def flow_arguments(
    flow: Flow, *, box: float = 1.0, scale: np.ndarray | None = None, accuracy: float = ACCURACY
) -> Arguments:
    """Numerical values of everything but the unknowns; `scale` defaults to the natural units."""
    jnp = load().numpy
    equations = flow.equations
    d = dimension_value(equations)
    parameters = {k: equations.truncation.numeric(v) for k, v in equations.truncation.parameters.items()}
    # v_d = 1/(2^(d+1) pi^(d/2) Gamma(d/2)), Berges, Tetradis, Wetterich, Phys. Rept. 363 (2002) 223
    parameters["vd"] = 1 / (2 ** (d + 1) * math.pi ** (d / 2) * math.gamma(d / 2))
    found = loop_rule(equations, accuracy)
    rule = None
    if found is not None:
        rule = Rule(
            y=jnp.asarray(found.y), weight=jnp.asarray(found.weight), s=jnp.asarray(found.s),
            surface_y=jnp.asarray(found.surface_y), surface_weight=jnp.asarray(found.surface_weight),
            surface_s=jnp.asarray(found.surface_s),
        )
    args = Arguments(parameters=parameters, rule=rule, box=jnp.asarray(float(box)), scale=jnp.ones(flow.size))
    if scale is None:
        scale = natural_scale(flow, args)
    return args._replace(scale=jnp.asarray(scale))


def natural_units(flow: Flow, args: Arguments) -> tuple[float, float]:
    """(size of the coordinates, size of the functions): the response of the flow at vanishing couplings to
    a constant mass, summed over all modes, which is where the loops put the minimum of a potential."""
    jax, jnp, _ = load()
    equations = flow.equations
    if equations.truncation.gravity is not None:
        return SPHERE_RADIUS, (4 * math.pi) ** (-dimension_value(equations) / 2)
    source = equations.potential or (equations.functions[0] if equations.functions else None)
    if source is None:
        return 1.0, 1.0
    coordinates = source.coordinates
    program = compile_expressions([source.rhs])
    by_fields = equations.potential is not None
    powers = [1 if by_fields and not c.endswith(HALF_SQUARE) else 2 for c in coordinates]
    slots = [o for o in source.jets if sum(k * p for k, p in zip(o, powers, strict=True)) == 2 and max(o) == sum(o)]

    def respond(mass: Any) -> Any:
        env = {s: jnp.zeros(()) for s in program.symbols | {x for p in flow._loops.values() for x in p[1].symbols}}
        env |= args.parameters | {name: jnp.zeros(()) for name in coordinates}
        env |= {symbols.jet(source.name, o).name: mass for o in slots}
        return flow._with_loops(program, env, args.rule)[0]

    response = abs(float(jax.jacfwd(respond)(jnp.zeros(()))))
    unit = 4 * args.parameters["vd"] / dimension_value(equations)
    sizes = [x for x in (response, unit) if math.isfinite(x) and x > 0]
    size = max(sizes, default=1.0)
    return size, size


# functions of the curvature: their series converge for R below about k^2, and the heat kernel's prefactor is their size
SPHERE_RADIUS = 0.82
SERIES_REACH = 3.0  # potentials vary over a few natural units of the coordinate: the unit of a series' variable


def stretched_scale(block: Taylor, scale: np.ndarray, factor: float) -> np.ndarray:
    """Scale of the unknowns when the unit of the series' variable is stretched; a running minimum keeps its own."""
    stretched = scale / factor ** np.array([float(block.algebra.degrees[k]) for _, k in block.layout])
    if block.moving:
        slot = block.layout.index((0, 1))
        stretched[slot] = scale[slot]
    return stretched


def natural_scale(flow: Flow, args: Arguments) -> np.ndarray:
    """(size,) scale of every unknown from the natural units."""
    coordinate, value = natural_units(flow, args)
    own = flow.block.unit(coordinate, value) if flow.block is not None else np.zeros(0)
    if isinstance(flow.block, Taylor) and flow.equations.truncation.gravity is None:
        own = stretched_scale(flow.block, own, SERIES_REACH)
    rest = [coordinate if name == "minimum{}" else 1.0 for name in flow.names[len(own):]]
    return np.concatenate([own, rest])


