"""Numbers as people write them: values with errors, lists of exponents."""

from __future__ import annotations

import math
from collections.abc import Iterable


def value_with_error(value: float, error: float) -> str:
    """0.64956177(3): the error in units of the last digit, rounded up to one digit (two below 2).

    Without a finite error, or with an error of the size of the value, the two are written apart."""
    if not math.isfinite(value):
        return "undefined"
    if not math.isfinite(error) or error < 0:
        return f"{value:.6g} (error unknown)"
    if error == 0:
        return repr(value)
    exponent = math.floor(math.log10(error))
    digits = -exponent
    scaled = error / 10.0**exponent
    shown = math.ceil(scaled - 1e-9)
    if scaled < 2:
        digits += 1
        shown = math.ceil(scaled * 10 - 1e-9)
    if digits > 16:
        return f"{value:.15g}"
    if digits <= 0 or error >= max(abs(value), 1e-300):
        return f"{value:.3g} ± {error:.2g}"
    return f"{value:.{digits}f}({shown})"


def format_complex(value: complex, digits: int = 6) -> str:
    """A real number plainly, a pair as re±|im|i."""
    if not (math.isfinite(value.real) and math.isfinite(value.imag)):
        return "-"
    real = f"{value.real:.{digits}g}"
    if abs(value.imag) <= 1e-9 * max(1.0, abs(value)):
        return real
    return f"{real}±{abs(value.imag):.{digits}g}i"


def format_exponents(theta: Iterable[complex], most: int, digits: int = 6) -> str:
    """The leading exponents, conjugate pairs merged, the number of those left out at the end."""
    shown: list[str] = []
    left = 0
    previous: complex | None = None
    for value in (complex(t) for t in theta):
        pair = (
            previous is not None and abs(value.imag) > 1e-9 * max(1.0, abs(value))
            and abs(value - previous.conjugate()) < 1e-6 * max(1.0, abs(value))
        )
        if pair:
            previous = None
            continue
        previous = value
        if len(shown) < most:
            shown.append(format_complex(value, digits))
        else:
            left += 1
    return ", ".join(shown) + (f", … +{left}" if left else "")


def correlation_exponent(theta: complex) -> float | None:
    """nu = 1/theta_1, where theta_1 is real and positive."""
    if abs(theta.imag) > 1e-9 * max(1.0, abs(theta)) or not theta.real > 1e-9:
        return None
    return 1 / theta.real
