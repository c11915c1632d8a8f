"""Numbers as people write them: values with errors, lists of exponents."""

from __future__ import annotations

import math
from collections.abc import Iterable

REAL = 1e-9  # imaginary parts below this fraction of the value are rounding
HIDDEN = 1e-16  # relative errors below this are beyond the digits of a double


def value_with_error(value: complex, error: float) -> str:
    """0.64956177(3): the error in units of the last digit, rounded up to one digit (two below 2).

    Without a finite error, or with an error of the size of the value, the two are written apart. Of a complex value
    (one of a conjugate pair) both parts carry the error, which bounds the modulus: -3.625(2)±1.270(2)i."""
    number, error = complex(value), float(error)
    if not is_finite(number):
        return "undefined"
    if abs(number.imag) <= REAL * max(1.0, abs(number)):
        return _real_with_error(number.real, error)
    if not math.isfinite(error) or error < 0:
        return f"{format_complex(number)} (error unknown)"
    if error > 0 and (error >= 0.1 * min(abs(number.real), abs(number.imag)) or error >= 1):
        return f"{format_complex(number, 3)} (error {error:.2g})"
    return f"{_real_with_error(number.real, error)}±{_real_with_error(abs(number.imag), error)}i"


def _real_with_error(value: float, error: float) -> str:
    if not math.isfinite(error) or error < 0:
        return f"{value:.6g} (error unknown)"
    if error == 0:
        return repr(value)
    if error < HIDDEN * abs(value):
        return f"{value:.16g}"
    if error >= abs(value):
        return f"{value:.3g} ± {error:.2g}"
    if 1e-4 <= abs(value) < 1e6:
        return _compact(value, error) if error < 1 else f"{value:.0f} ± {error:.2g}"
    power = math.floor(math.log10(abs(value)))
    if _scaled(error, -power) >= 1:
        return f"{value:.3g} ± {error:.2g}"
    return f"{_compact(_scaled(value, -power), _scaled(error, -power))}e{power:+03d}"


def _compact(value: float, error: float) -> str:
    """Digits of the value down to those of its error, for 0 < error < 1."""
    exponent = math.floor(math.log10(error))
    scaled = _scaled(error, -exponent)
    more = 1 if scaled < 2 else 0
    return f"{value:.{more - exponent}f}({math.ceil(scaled * 10**more - 1e-9)})"


def _scaled(value: float, power: int) -> float:
    """value * 10^power; in two factors, because 10^power alone may overflow."""
    half = power // 2
    return value * 10.0**half * 10.0 ** (power - half)


def is_finite(value: complex) -> bool:
    """Whether both parts are finite."""
    return math.isfinite(value.real) and math.isfinite(value.imag)


def format_complex(value: complex, digits: int = 6) -> str:
    """A real number plainly, a pair as re±|im|i."""
    if not is_finite(value):
        return "-"
    real = f"{value.real + 0.0:.{digits}g}"  # + 0.0: no sign before a zero
    if abs(value.imag) <= REAL * max(1.0, abs(value)):
        return real
    return f"{real}±{abs(value.imag):.{digits}g}i"


def format_exponents(theta: Iterable[complex], most: int, digits: int = 6) -> str:
    """The leading exponents, at most `most` entries with conjugate pairs merged into one; at the end the number of
    exponents left out."""
    shown: list[str] = []
    left = 0
    waiting: list[complex] = []  # shown members of pairs whose partner has not come yet
    for value in (complex(t) for t in theta):
        size = max(1.0, abs(value))
        partner = next((w for w in waiting if abs(value - w.conjugate()) < 1e-6 * size), None)
        if partner is not None:
            waiting.remove(partner)
        elif len(shown) < most:
            shown.append(format_complex(value, digits))
            if abs(value.imag) > REAL * size:
                waiting.append(value)
        else:
            left += 1
    return ", ".join(shown) + (f", … +{left}" if left else "")


def correlation_exponent(theta: complex) -> float | None:
    """nu = 1/theta_1, where theta_1 is real and positive."""
    if not is_finite(theta) or abs(theta.imag) > REAL * max(1.0, abs(theta)) or not theta.real > 1e-9:
        return None
    return 1 / theta.real


def harmless(text: str) -> str:
    """The text with control characters spelled out: titles and notes of a foreign run file must not steer a terminal."""
    return "".join(c if c.isprintable() else c.encode("unicode_escape").decode("ascii") for c in text)
