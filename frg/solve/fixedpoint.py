"""From a root of the search to a `FixedPoint` record: polish, re-measure, spectrum, label, profile."""

from __future__ import annotations

from dataclasses import dataclass
from functools import cached_property
from typing import Any

import numpy as np

from frg.evaluate.build import natural_units, stretched_scale
from frg.evaluate.fieldpolynomial import FieldPolynomial
from frg.evaluate.flow import Arguments, Flow, masses_at_centre, sign_values
from frg.evaluate.grid import ChebyshevGrid
from frg.evaluate.jaxload import load
from frg.evaluate.odd import odd_active, odd_operator, odd_scale
from frg.evaluate.taylor import Taylor
from frg.records import FixedPoint, Profile
from frg.solve.spectrum import Spectrum, count_directions, sort_order, spectrum

AT_BOUNDARY = 1e-6  # fixed points may sit on the boundary of the domain (the mass regulator's do)
SLOWEST = 0.35  # least ratio of neighbouring Chebyshev coefficients allowed for in eigenvectors
PROFILE_POINTS = 121
PROFILE_DIRECTIONS = 4


@dataclass(frozen=True, kw_only=True)
class Judgement:
    """Tolerances that decide physics: |Re theta| below `marginal` is marginal; a residual above `residual` is
    not a fixed point; couplings below `gaussian` (natural units) are zero."""

    marginal: float
    residual: float
    gaussian: float


@dataclass(frozen=True, kw_only=True, eq=False)
class Measured:
    """A root measured afresh: reported unknowns g (all, padded), scaled system of the active ones."""

    g: np.ndarray
    active: np.ndarray
    scale: np.ndarray
    beta: np.ndarray
    spectrum: Spectrum
    step: float

    @property
    def residual(self) -> float:
        return float(np.max(np.abs(self.beta))) if self.beta.size else 0.0


@dataclass(frozen=True, kw_only=True, eq=False)
class Examiner:
    """Compiled measurements of one flow."""

    flow: Flow
    lowest: float

    @cached_property
    def _system(self) -> Any:
        return load().jax.jit(self.flow.system)

    @cached_property
    def _masses(self) -> Any:
        jax = load().jax
        return jax.jit(jax.vmap(self.flow.masses, in_axes=(None, 0, None)))

    @cached_property
    def _signs(self) -> Any:
        return load().jax.jit(lambda g, args: sign_values(self.flow, g, args))

    def signs(self, g: np.ndarray, args: Arguments) -> np.ndarray:
        """(k,) values of the expressions that must be positive."""
        return np.asarray(self._signs(g, args))

    @cached_property
    def _eta(self) -> Any:
        return load().jax.jit(self.flow.anomalous_dimensions)

    @cached_property
    def _odd(self) -> Any:
        flow = self.flow
        return load().jax.jit(lambda g, args: odd_operator(flow, g, args)[0])  # type: ignore[index]

    @cached_property
    def _curves(self) -> Any:
        jax = load().jax
        flow, block = self.flow, self.flow.block
        name = flow.equations.functions[0].name

        def values(g: Any, x: Any, order: tuple[int, ...], args: Arguments) -> Any:
            own = g[: block.size]  # type: ignore[union-attr]
            return jax.vmap(lambda one: block.jets_at(own, one, name, order, args.box))(x)  # type: ignore[union-attr]

        def curves(g: Any, x: Any, args: Arguments) -> Any:
            response = jax.jacfwd(lambda g: values(g, x, (0,), args))(g)
            return values(g, x, (0,), args), values(g, x, (1,), args), response

        return jax.jit(curves)

    def measure(self, g: np.ndarray, active: np.ndarray, args: Arguments, polish: int) -> Measured:
        """Newton-polish in better-fitting units with LAPACK, then evaluate beta and the pencil once more."""
        scale = self.fitting_scale(g, np.asarray(args.scale))
        args = args._replace(scale=load().numpy.asarray(scale))
        c, step = np.where(active, g / scale, 0.0), 0.0
        for _ in range(polish):
            b, J, _ = (np.asarray(v) for v in self._system(c, args))
            J, b = J[np.ix_(active, active)], b[active]
            if not (np.isfinite(J).all() and np.isfinite(b).all()):
                break
            p = np.linalg.lstsq(J, -b, rcond=1e-13)[0]
            trial = c.copy()
            trial[active] += p
            value = np.asarray(self._system(trial, args)[0])[active]
            step = float(np.max(np.abs(p)) / max(1e-6, np.max(np.abs(c[active]))))
            if not np.max(np.abs(value)) < np.max(np.abs(b)):
                break
            c = trial
        b, J, M = (np.asarray(v) for v in self._system(c, args))
        J, M = J[np.ix_(active, active)], M[np.ix_(active, active)]
        algebraic = self.flow.algebraic[active]
        if not (np.isfinite(J).all() and np.isfinite(M).all()):
            nothing = np.zeros((int(active.sum()), 0), dtype=complex)
            return Measured(g=np.where(active, c * scale, 0.0), active=active, scale=scale, beta=np.full(len(J), np.nan),
                            spectrum=Spectrum(np.zeros(0, dtype=complex), nothing, nothing, np.inf), step=np.inf)
        found = spectrum(J, M, scale[active], algebraic, self._columns(c)[active])
        beta = _beta(b[active], M, algebraic)
        return Measured(g=np.where(active, c * scale, 0.0), active=active, scale=scale, beta=beta,
                        spectrum=found, step=step)

    def fitting_scale(self, g: np.ndarray, scale: np.ndarray) -> np.ndarray:
        """Stretch the unit of the coordinate so that high Taylor coefficients stay of order one."""
        block = self.flow.block
        if not isinstance(block, Taylor):
            return scale
        degrees = np.array([block.algebra.degrees[k] for _, k in block.layout], dtype=float)
        c = np.abs(g[: block.size] / scale[: block.size])
        use = (degrees >= 2) & (c > 0) & np.isfinite(c)
        if len(np.unique(degrees[use])) < 3:
            return scale
        rate = np.polyfit(degrees[use], np.log(c[use]), 1)[0]
        stretched = scale.copy()
        factor = float(np.exp(-np.clip(rate, -5, 5)))
        stretched[: block.size] = stretched_scale(block, scale[: block.size], factor)
        return stretched

    def _columns(self, c: np.ndarray) -> np.ndarray:
        """Sizes expected in eigenvectors: those of the solution's own Chebyshev coefficients on a grid, which may fall
        faster than those of the eigenvectors (a potential can be a polynomial)."""
        block, columns = self.flow.block, np.ones(len(c))
        if isinstance(block, ChebyshevGrid):
            for f in range(len(block.functions)):
                own = np.abs(c[f * block.points : (f + 1) * block.points])
                envelope = np.maximum.accumulate(own[::-1])[::-1]
                if block.points > 1 and envelope[1] > 1e-6 * envelope[0]:
                    least = np.maximum(SLOWEST ** np.arange(block.points), 1e-13)
                    columns[f * block.points : (f + 1) * block.points] = np.maximum(envelope / envelope[0], least)
        return columns

    def masses(self, g: np.ndarray, x: np.ndarray, args: Arguments) -> np.ndarray:
        """(m, k) masses of the regulated propagators at the points x."""
        return np.asarray(self._masses(g, x, args))

    def etas(self, g: np.ndarray, args: Arguments) -> dict[str, float]:
        """eta by field name."""
        if not self.flow.equations.anomalous:
            return {}
        values = self._eta(g, args)
        return {a.field: float(values[a.symbol]) for a in self.flow.equations.anomalous}

    def odd_exponents(
        self, g: np.ndarray, order: int | None, args: Arguments, coordinate: float
    ) -> np.ndarray:
        """theta of the odd sector, sorted; empty where there is none."""
        import scipy.linalg

        if self.flow.equations.odd is None or not isinstance(self.flow.block, Taylor | ChebyshevGrid):
            return np.zeros(0, dtype=complex)
        J = np.asarray(self._odd(g, args))
        block = self.flow.block
        mass = np.eye(len(J)) if isinstance(block, Taylor) else block.evaluation(0)
        active, scale = odd_active(self.flow, order), odd_scale(self.flow, coordinate)
        J = (J * scale[None, :] / scale[:, None])[np.ix_(active, active)]
        mass = (mass * scale[None, :] / scale[:, None])[np.ix_(active, active)]
        values = scipy.linalg.eigvals(J, mass)
        theta = -values[np.isfinite(values)]
        return theta[sort_order(theta)].astype(complex)

    def profile(self, measured: Measured, right: np.ndarray, upto: float, args: Arguments) -> Profile | None:
        """Potential, slope and leading eigenfunctions on [0, upto] for one function of one coordinate."""
        functions = self.flow.equations.functions
        if len(functions) != 1 or len(functions[0].coordinates) != 1 or not upto > 0:
            return None
        x = np.linspace(0.0, upto, PROFILE_POINTS)
        u, slope, response = (np.asarray(v) for v in self._curves(measured.g, x, args))
        moving = measured.active & ~self.flow.algebraic
        shapes = (response[:, moving] @ right[:, :PROFILE_DIRECTIONS]).T.real
        size = np.max(np.abs(shapes), axis=1, keepdims=True)
        shapes = shapes / np.where(size > 0, size, 1.0)
        if not (np.isfinite(u).all() and np.isfinite(shapes).all()):
            return None
        label = functions[0].coordinates[0]
        return Profile(x_label=label, x=x, potential=u - u[0], slope=slope, eigenfunctions=shapes)


def _beta(b: np.ndarray, M: np.ndarray, algebraic: np.ndarray) -> np.ndarray:
    """beta = M^-1 b in natural units; conditions contribute their own violation."""
    moving = ~algebraic
    try:
        flow = np.linalg.solve(M[np.ix_(moving, moving)], b[moving])
    except np.linalg.LinAlgError:
        flow = b[moving]
    return np.concatenate([flow, b[algebraic]])


def coordinate_unit(flow: Flow, args: Arguments) -> float:
    """Natural size of the coordinates of the potential."""
    return natural_units(flow, args)[0]


def is_gaussian(flow: Flow, g: np.ndarray, args: Arguments, tolerance: float) -> bool:
    """All couplings vanish in natural units; on a grid, the potential is constant."""
    block = flow.block
    scale = np.asarray(args.scale)
    if isinstance(block, ChebyshevGrid):
        c = (g / scale)[: block.size].reshape(len(block.functions), block.points)
        return bool(np.max(np.abs(c[:, 1:])) < tolerance)
    if isinstance(block, Taylor) and block.moving:
        return False
    return bool(np.max(np.abs(g / scale)) < tolerance)


def domain_points(flow: Flow, g: np.ndarray, args: Arguments, unit: float) -> np.ndarray:
    """Where the positivity of propagators is judged: from 0 to the minimum for a running minimum, the whole
    box of a grid, from 0 to the first minimum (or the natural unit) about a number."""
    block = flow.block
    if isinstance(block, ChebyshevGrid):
        return np.linspace(0.0, float(args.box), 41)
    if isinstance(block, Taylor) and block.moving:
        return np.linspace(0.0, max(float(block.expansion_point(g[: block.size])), 0.0), 21)
    return np.linspace(0.0, unit / 2, 11)


def build_record(
    examiner: Examiner, measured: Measured, judgement: Judgement, args: Arguments, *,
    label: str, order: int | None, keep: np.ndarray | None = None, odd: np.ndarray | None = None,
    notes: tuple[str, ...] = (), spurious: str | None = None, landmarks: dict[str, float] | None = None,
) -> FixedPoint:
    """The record of a measured root. `keep` selects the directions that are not artefacts of a grid."""
    flow, found = examiner.flow, measured.spectrum
    keep = np.ones(len(found.theta), dtype=bool) if keep is None else keep
    theta, right, left = found.theta[keep], found.right[:, keep], found.left[:, keep]
    moving = measured.active & ~flow.algebraic
    names = tuple(n for n, on in zip(flow.names, moving, strict=True) if on)
    unit = coordinate_unit(flow, args)
    gaussian = is_gaussian(flow, measured.g, args, judgement.gaussian)
    reasons = list(notes)
    if spurious is None and not gaussian:
        spurious = _outside_domain(examiner, measured, args, unit)
    if spurious:
        reasons.append(spurious)
    relevant, marginal = count_directions(theta, judgement.marginal)
    if odd is None:
        odd = examiner.odd_exponents(measured.g, order, args, unit)
    return FixedPoint(
        label=label, kind="gaussian" if gaussian else ("spurious" if spurious else "physical"),
        names=names, couplings=measured.g[moving], eta=examiner.etas(measured.g, args),
        theta=theta, right=right, left=left, theta_odd=odd, residual=measured.residual,
        condition=found.condition, relevant=relevant, marginal=marginal, notes=tuple(reasons),
        profile=examiner.profile(measured, right, _profile_reach(flow, measured.g, args, unit), args),
        landmarks=landmarks or {},
    )


def _profile_reach(flow: Flow, g: np.ndarray, args: Arguments, unit: float) -> float:
    block = flow.block
    if isinstance(block, ChebyshevGrid):
        return float(args.box)
    if isinstance(block, Taylor) and block.moving:
        return 2 * float(block.expansion_point(g[: block.size]))
    if flow.equations.truncation.gravity is not None:
        return unit  # about the radius of convergence of functions of the curvature
    return 2 * unit if isinstance(block, Taylor) else 0.0


def _outside_domain(examiner: Examiner, measured: Measured, args: Arguments, unit: float) -> str | None:
    """Why a root cannot be a physical fixed point, or None."""
    flow, g, block = examiner.flow, measured.g, examiner.flow.block
    if isinstance(block, Taylor) and block.moving:
        minimum = float(block.expansion_point(g[: block.size]))
        if minimum < -1e-9 * unit:
            return "the minimum lies at a negative value of the coordinate"
        if g[block.layout.index((0, 2))] < 0:
            return "the expansion point is a maximum of the potential"
    if flow.equations.signs:
        signs = examiner.signs(g, args)
        broken = [text for v, (_, text) in zip(signs, flow.equations.signs, strict=True) if not v > 0]
        if broken:
            return broken[0]
    if not flow.equations.positivity:
        return None
    if not isinstance(block, FieldPolynomial) and not flow.equations.functions:
        masses = examiner.masses(g, np.zeros(1), args)
        return _not_positive(masses, examiner.lowest)
    if isinstance(block, FieldPolynomial) or len(flow.equations.functions[0].coordinates) > 1:
        masses = np.asarray(masses_at_centre(flow, g, args))
    else:
        masses = examiner.masses(g, domain_points(flow, g, args, unit), args)
    return _not_positive(masses, examiner.lowest)


def _not_positive(masses: np.ndarray, lowest: float) -> str | None:
    if np.isfinite(masses).all() and np.min(masses) >= -lowest * (1 + AT_BOUNDARY):
        return None
    return (
        f"a regulated propagator is not positive: the smallest mass is {np.min(masses):.6g}, "
        f"the bound is {-lowest:.6g}"
    )
