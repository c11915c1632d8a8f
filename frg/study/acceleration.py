"""Limits of exponent sequences, with an error that says how far to trust them."""

from __future__ import annotations

import numpy as np

from frg.records import Extrapolation

WINDOW = 9  # latest terms used: older ones belong to other error terms


def wynn_epsilon(sequence: np.ndarray) -> list[complex]:
    """Even columns' last entries of the epsilon table, from the plain sequence on.

    P. Wynn, Math. Tables Aids Comput. 10 (1956) 91. A column is dropped once differences vanish."""
    previous = np.zeros(len(sequence) + 1, dtype=complex)
    current = np.asarray(sequence, dtype=complex)
    found = [complex(current[-1])]
    order = 0
    while len(current) > 1:
        difference = np.diff(current)
        if np.min(np.abs(difference)) < 1e-300:
            break
        previous, current = current, previous[1:-1] + 1 / difference
        order += 1
        if order % 2 == 0 and len(current):
            found.append(complex(current[-1]))
    return found


def extrapolate(values: np.ndarray) -> Extrapolation:
    """Limit of a sequence (NaN entries at its start are ignored). Fewer than four terms say nothing of their limit:
    the last one is returned, with an infinite error.

    Accelerated estimates are formed from the sequence and from the sequence without its last one and two terms;
    the column of the epsilon table whose three estimates scatter least is taken. The error is the
    larger of twice that scatter and the distance of the estimate from the last term: acceleration may
    improve the value, but is never allowed to claim more than the sequence itself has shown. Not derived
    from first principles; its coverage on sequences with known limits is tested."""
    terms = np.asarray(values, dtype=complex)
    terms = terms[np.isfinite(terms)]
    if len(terms) == 0:
        return Extrapolation(value=complex(np.nan), error=float("inf"), last=complex(np.nan))
    last = complex(terms[-1])
    if len(terms) < 4:
        return Extrapolation(value=last, error=float("inf"), last=last)
    terms = terms[-WINDOW:]
    tables = [wynn_epsilon(terms[: len(terms) - cut]) for cut in range(3)]
    depth = min(len(t) for t in tables)
    best, scatter = last, float("inf")
    for column in range(1 if depth > 1 else 0, depth):
        estimates = np.array([t[column] for t in tables])
        spread = float(np.max(np.abs(estimates - estimates[0])))
        if spread < scatter:
            best, scatter = complex(estimates[0]), spread
    step = float(np.abs(terms[-1] - terms[-2]))
    if not abs(best - last) <= 10 * max(step, float(np.abs(terms[-2] - terms[-3]))):
        best, scatter = last, step
    error = max(2 * scatter, abs(best - last))
    return Extrapolation(value=best, error=max(error, 4e-16 * abs(best)), last=last)
