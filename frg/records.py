"""Frozen results with plain arrays: what the search hands to stores, tables and plots.

Nothing here computes physics. Conventions everywhere: t = ln k; theta = -(eigenvalue of the
stability matrix d beta_i / d g_j); a direction is relevant when Re theta > 0. Couplings are
dimensionless, in units of the scale k.
"""

from __future__ import annotations

from dataclasses import dataclass, field

import numpy as np

from frg.errors import Outcome


@dataclass(frozen=True, kw_only=True, eq=False)
class Profile:
    """Curves of a fixed point over one coordinate (for example rho), for plots.

    `x` has shape (m,); `potential` and `slope` (its first derivative) have shape (m,);
    `eigenfunctions` has shape (k, m), one row per direction in the order of `theta`, each scaled
    to a largest absolute value of 1. `x_label` names the coordinate."""

    x_label: str
    x: np.ndarray
    potential: np.ndarray
    slope: np.ndarray
    eigenfunctions: np.ndarray


@dataclass(frozen=True, kw_only=True, eq=False)
class FixedPoint:
    """One fixed point of one truncation at one order.

    `couplings` (n,) float64 in the order of `names`; `theta` (n,) complex128 sorted by falling
    real part; columns of `right` (n, n) and of `left` (n, n) are the eigenvectors belonging to
    `theta`, in coupling space, with left[:, i].conj() @ right[:, j] = delta_ij.
    `theta_odd` holds the exponents of the perturbations odd in the field (empty when not asked).
    `kind` is "gaussian", "physical" or "spurious" (a regulated propagator is not positive there, or
    the truncation's own artefact as told in `notes`). `residual` is max |beta| re-measured after the
    search; `condition` is the condition number of the scaled Jacobian. `certified` is None when
    no proof was asked for. `landmarks` are derived numbers under plain names (for example the position of a minimum, the
    slope of the potential at zero, the size of a grid's box)."""

    label: str
    kind: str
    names: tuple[str, ...]
    couplings: np.ndarray
    eta: dict[str, float]
    theta: np.ndarray
    right: np.ndarray
    left: np.ndarray
    theta_odd: np.ndarray
    residual: float
    condition: float
    relevant: int
    marginal: int
    certified: bool | None = None
    notes: tuple[str, ...] = ()
    profile: Profile | None = None
    landmarks: dict[str, float] = field(default_factory=dict)

    @property
    def gaussian(self) -> bool:
        return self.kind == "gaussian"


@dataclass(frozen=True, kw_only=True, eq=False)
class Step:
    """All that was found at one order. `order` maps the order symbol to its value, for example
    {"n": 4}. `search` counts what was tried: starts, converged, duplicates, failed, ..."""

    order: dict[str, int]
    outcome: Outcome
    fixed_points: tuple[FixedPoint, ...] = ()
    search: dict[str, int] = field(default_factory=dict)
    seconds: float = 0.0
    notes: tuple[str, ...] = ()


@dataclass(frozen=True, kw_only=True, eq=False)
class Track:
    """One fixed point followed through the steps of a study.

    `steps` (k,) int indices of the steps, `points` (k,) int indices of the fixed point within
    each step; `theta` (k, m) complex128, the exponents of followed directions, NaN where a
    direction does not exist yet, column j being the j-th direction; `distance` (k,) the distance between the
    chosen root and the prediction, `next_distance` (k,) that of the next-nearest root (inf when
    there is no other); `rule` states in words how the branch was chosen."""

    label: str
    rule: str
    steps: np.ndarray
    points: np.ndarray
    theta: np.ndarray
    distance: np.ndarray
    next_distance: np.ndarray
    notes: tuple[str, ...] = ()


@dataclass(frozen=True, kw_only=True, eq=False)
class Extrapolation:
    """A tracked exponent carried to infinite order: value (complex), error (absolute, estimated
    by the scatter of the accelerated sequence), and the last value of the raw sequence."""

    value: complex
    error: float
    last: complex


@dataclass(frozen=True, kw_only=True, eq=False)
class Growth:
    """Newly entering exponents against the canonical dimensions of the operators that enter:
    least-squares line  -Re theta_new = offset + slope * (-theta_canonical), with the scatter (rms
    of the residuals). `canonical` and `entering` (k,) are the data."""

    canonical: np.ndarray
    entering: np.ndarray
    slope: float
    offset: float
    scatter: float


@dataclass(frozen=True, kw_only=True, eq=False)
class Verdict:
    """Evidence on whether the number of relevant directions stays finite; never a proof.

    `finite` is "supported", "not supported" or "undecided"; `counts` the relevant directions by
    step of the tracked fixed point (-1 where it was not found); `settled_from` the order from
    which on the count is constant (None if it never settles); `relevant` that count."""

    counts: tuple[int, ...]
    settled_from: int | None
    relevant: int | None
    finite: str
    reasons: tuple[str, ...]
    exponents: tuple[Extrapolation, ...]
    growth: Growth | None = None


@dataclass(frozen=True, kw_only=True, eq=False)
class Inputs:
    """All that a run can be repeated from, and what it was made with.

    `truncation_text` is the truncation file verbatim; `parameters` the values in force (overrides
    included); `equations` and `latex` the derived flow; `regulator` a name with `regulator_parameters`;
    `settings` every further choice that can change a number (search settings, tolerances, orders).
    `signature` is sha256 over the canonical text of all of these."""

    title: str
    truncation_text: str
    parameters: dict[str, str]
    equations: str
    latex: str
    regulator: str
    regulator_parameters: dict[str, float]
    settings: dict[str, object]
    signature: str


@dataclass(frozen=True, kw_only=True, eq=False)
class Run:
    """One run as stored. `status` is "running", "complete", "interrupted" or "failed"."""

    inputs: Inputs
    command: str
    created_utc: str
    frg_version: str
    packages: dict[str, str]
    status: str
    steps: tuple[Step, ...] = ()
    tracks: tuple[Track, ...] = ()
    verdict: Verdict | None = None


def counted(number: int, noun: str) -> str:
    """'1 relevant direction', '3 relevant directions'."""
    return f"{number} {noun}{'' if number == 1 else 's'}"
