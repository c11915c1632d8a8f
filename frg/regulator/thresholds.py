"""Threshold functions as numbers, for checks and for people."""

from __future__ import annotations

import math
from functools import lru_cache

import numpy as np

from frg.errors import InputError, Place
from frg.regulator.base import AbstractRegulator, LoopRule


def threshold(regulator: AbstractRegulator, n: int, w: float, dimension: float, eta: float = 0.0) -> float:
    """l_n^d(w; eta) = (n + delta_n0)/2 * integral_0^inf dy y^(d/2-1) [(2-eta) s - 2 y s'] / (P+w)^(n+1).

    Normalisation of J. Berges, N. Tetradis, C. Wetterich, Phys. Rept. 363 (2002) 223, hep-ph/0005122;
    l_(n+1) = -(1/(n + delta_n0)) dl_n/dw. Where the loop converges only up to a constant (see
    LoopRule.subtract), l_0(w) - l_0(0) is returned. Raises InputError where the integral diverges, at
    w = -min P and below, where a propagator has a pole, and for n < 0."""
    if n < 0:
        raise InputError(f"there is no threshold function l_{n}", remedy="use n = 0, 1, 2, ...")
    if regulator.closed_form:
        if eta:
            raise InputError("the sharp cutoff has no threshold functions with eta", remedy="use eta = 0")
        _above_pole(w, 1.0)
        return -math.log1p(w) if n == 0 else (1 + w) ** (-n)
    rule = _rule(regulator, dimension, n + 1)
    _above_pole(w, rule.lowest)
    insertion = (2 - eta) * rule.s[0] - 2 * rule.y * rule.s[1]
    P = rule.y + rule.s[0]
    if rule.subtract:
        values = -w * insertion / (P * (P + w))  # 1/(P+w) - 1/P without cancellation; n = 0
    else:
        values = insertion / (P + w) ** (n + 1)
    return float(max(n, 1) / 2 * np.sum(rule.weight * values))


@lru_cache(maxsize=32)
def _rule(regulator: AbstractRegulator, dimension: float, decay: int) -> LoopRule:
    """Regulators are frozen values, so that their rules can be kept."""
    return regulator.rule(dimension, derivatives=1, decay=decay)


def _above_pole(w: float, lowest: float) -> None:
    if not w > -lowest:
        raise InputError(
            f"the regulated propagator 1/(P + w) has a pole at w = {w:g}", remedy=f"use w > {-lowest:g}",
            place=Place(text=f"w = {w:g}"),
        )
