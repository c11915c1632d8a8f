"""Threshold functions as numbers, for checks and for people."""

from __future__ import annotations

import math

import numpy as np

from frg.errors import InputError
from frg.regulator.base import AbstractRegulator


def threshold(regulator: AbstractRegulator, n: int, w: float, dimension: float, eta: float = 0.0) -> float:
    """l_n^d(w; eta) = (n + delta_n0)/2 * integral_0^inf dy y^(d/2-1) [(2-eta) s - 2 y s'] / (P+w)^(n+1).

    Normalisation of J. Berges, N. Tetradis, C. Wetterich, Phys. Rept. 363 (2002) 223, hep-ph/0005122;
    l_(n+1) = -(1/(n + delta_n0)) dl_n/dw. Where the loop converges only up to a constant (see
    LoopRule.subtract), l_0(w) - l_0(0) is returned. Raises InputError where it diverges."""
    if regulator.closed_form:
        if eta:
            raise InputError("the sharp cutoff has no threshold functions with eta", remedy="use eta = 0")
        return -math.log1p(w) if n == 0 else (1 + w) ** (-n)
    rule = regulator.rule(dimension, derivatives=1, decay=n + 1)
    insertion = (2 - eta) * rule.s[0] - 2 * rule.y * rule.s[1]
    P = rule.y + rule.s[0]
    values = insertion / (P + w) ** (n + 1)
    if rule.subtract:
        values = values - insertion / P ** (n + 1)
    return float(max(n, 1) / 2 * np.sum(rule.weight * values))
