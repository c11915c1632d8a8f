"""A small made-up study for the views: numbers without physical meaning, easy to recognise in a picture or a page."""

from __future__ import annotations

from dataclasses import replace

import numpy as np

from frg.errors import Outcome
from frg.records import Extrapolation, FixedPoint, Growth, Inputs, Profile, Run, Step, Track, Verdict

ORDERS = (2, 3, 4, 5)
LATEX = (
    r"\partial_t U(\rho) = - U d + U' \rho \left(d - 2\right) + \frac{4 v_{d}}{d \left(U' + 2 U'' \rho + 1\right)}"
    "\n"
    r"\eta_{Z} = \int_0^\infty \tfrac{1}{2} U''^{2} \quad\text{(at the minimum)}"
)
EQUATIONS = (
    "d_t U(rho) = -U*d + U'*rho*(d - 2) + 4*v_d/(d*(U' + 2*U''*rho + 1))\n"
    "eta_Z = int_0^oo 1/2*U''^2    (at the minimum)"
)
TRUNCATION = 'title = "made up"\n[running]\n# a comment with <angle> & "quotes"\nU = { kind = "function", of = "rho" }\n'


def inputs(*, title: str = "Made up", truncation_text: str = TRUNCATION, equations: str = EQUATIONS,
           latex: str = LATEX) -> Inputs:
    return Inputs(
        title=title, truncation_text=truncation_text, parameters={"d": "3", "N": "1/2"}, equations=equations,
        latex=latex, regulator="exponential", regulator_parameters={"alpha": 2.0, "s": 1.0},
        settings={"orders": list(ORDERS), "starts": 321}, signature="ab" * 32,
    )


def profile(x_label: str = "rho") -> Profile:
    x = np.linspace(0.0, 0.5, 11)
    return Profile(x_label=x_label, x=x, potential=7.0 + x**2 - 0.25 * x, slope=2 * x - 0.25,
                   eigenfunctions=np.stack([np.cos(x), np.sin(2 * x)]))


def point(label: str, kind: str, first: float, theta: list[complex], *, curves: Profile | None = None) -> FixedPoint:
    n = len(theta)
    return FixedPoint(
        label=label, kind=kind, names=tuple(f"U{i + 1}" for i in range(n)), couplings=first * 2.0 ** np.arange(n),
        eta={"phi": 0.0361}, theta=np.array(theta, dtype=complex), right=np.eye(n), left=np.eye(n),
        theta_odd=np.array([2.5 + 0j]), residual=2e-14, condition=31.0, relevant=sum(t.real > 0 for t in theta),
        marginal=0, notes=(f"note on {label}",), profile=curves, landmarks={"minimum": 0.0306},
    )


def steps() -> tuple[Step, ...]:
    found = []
    for n in ORDERS:
        tracked = point("A", "physical", 0.1 + 0.001 * n, [1.5 + 0.1 / n, *(complex(-0.6 - 2.0 * j) for j in range(n - 1))],
                        curves=profile())
        others = (point("G", "gaussian", 0.0, [2.0 - j for j in range(n)]),
                  point("S", "spurious", -0.3, [4.0 + n, *(-1.0 - j for j in range(n - 1))]))
        found.append(Step(order={"n": n}, outcome=Outcome.FOUND, fixed_points=(tracked, *others),
                          search={"starts": 321, "converged": 40, "failed": 17}, seconds=0.5, notes=(f"remark at {n}",)))
    return tuple(found)


def track() -> Track:
    width = max(ORDERS)
    theta = np.full((len(ORDERS), width), np.nan, dtype=complex)
    for k, step in enumerate(steps()):
        values = step.fixed_points[0].theta
        theta[k, : len(values)] = values
    return Track(label="track 1", rule="nearest root", steps=np.arange(len(ORDERS)), points=np.zeros(len(ORDERS), dtype=int),
                 theta=theta, distance=np.full(len(ORDERS), 0.01), next_distance=np.full(len(ORDERS), 0.5))


def verdict() -> Verdict:
    return Verdict(
        counts=(1, 1, 1, 1), settled_from=2, relevant=1, finite="supported",
        reasons=("1 relevant direction at each of the last 4 steps", "no order is certified"),
        exponents=(Extrapolation(value=1.53 + 0j, error=0.02, last=1.52 + 0j),
                   Extrapolation(value=-0.61 + 0j, error=0.05, last=-0.6 + 0j)),
        growth=Growth(canonical=np.array([2.0, 1.0, 0.0]), entering=np.array([1.5, -0.6, -2.6]), slope=2.05,
                      offset=2.62, scatter=0.03),
    )


def study() -> Run:
    return Run(inputs=inputs(), command="frg converge made_up.toml", created_utc="2026-12-01T06:47:09Z", frg_version="0.1.0",
               packages={"numpy": "2.4"}, status="complete", steps=steps(), tracks=(track(),), verdict=verdict())


def interrupted() -> Run:
    """Two orders committed, nothing judged."""
    return replace(study(), status="interrupted", steps=steps()[:2], tracks=(), verdict=None)


def solved() -> Run:
    """One step without an order axis, as for a grid."""
    step = replace(steps()[-1], order={})
    return replace(study(), command="frg solve made_up.toml", steps=(step,), tracks=(), verdict=None)


def rootless() -> Run:
    """One order at which nothing was found."""
    step = Step(order={"n": 2}, outcome=Outcome.NONE_FOUND, search={"starts": 9, "failed": 9}, seconds=0.1)
    return replace(study(), steps=(step,), tracks=(), verdict=None)
