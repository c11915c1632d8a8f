"""The derived equations as LaTeX and as plain text, to compare with a paper."""

from __future__ import annotations

import re
from collections.abc import Callable
from typing import TYPE_CHECKING

from frg.derive import symbols
from frg.derive.equations import FlowEquations
from frg.derive.flat.lagrangian import HALF_SQUARE

if TYPE_CHECKING:
    import sympy

Renaming = Callable[[str], str]


def equations_text(equations: FlowEquations) -> str:
    """One line an equation, in the names of the truncation file; primes are derivatives by the coordinate."""
    return "\n".join(f"{left} = {right}" for left, right in _rows(equations, _plain, str))


def equations_latex(equations: FlowEquations) -> str:
    """The same as LaTeX, one equation a line, without environment."""
    import sympy

    return "\n".join(f"{left} = {right}" for left, right in _rows(equations, _latex_name, sympy.latex))


def _rows(
    equations: FlowEquations, rename: Renaming, show: Callable[[sympy.Expr], str]
) -> list[tuple[str, str]]:
    latex = rename is _latex_name
    rate = r"\partial_t " if latex else "d_t "
    rows = []

    def shown(e: sympy.Expr) -> str:
        return _renamed(e, rename, show)

    for flow in equations.functions:
        arguments = ", ".join(rename(c) for c in flow.coordinates)
        # an implicit flow is an expression that vanishes: d_t of the function stands in it
        rows.append(("0" if flow.rates else f"{rate}{rename(flow.name)}({arguments})", shown(flow.rhs)))
    if equations.potential is not None:
        rows.append((f"{rate}{rename(equations.potential.name)}", shown(equations.potential.rhs)))
        rows += _coefficients(equations, rename, show)
    for coupling in equations.couplings:
        rows.append((f"{rate}{rename(coupling.name)}", shown(coupling.rhs)))
    for eta in equations.anomalous:
        where = "at the minimum" if eta.at == "minimum" else f"at {eta.at}"
        note = rf" \quad\text{{({where})}}" if latex else f"    ({where})"
        rows.append((rename(eta.symbol), shown(eta.rhs) + note))
    for loop in equations.loops:
        body = shown(loop.integrand)
        d = rename("d") if latex else str(equations.truncation.dimension)
        if latex:
            d = show(equations.truncation.dimension)
            rows.append((rename(loop.symbol), rf"\int_0^\infty dy\, y^{{{d}/2-1}} \left[{body}\right]"))
        else:
            rows.append((rename(loop.symbol), f"integral_0^inf dy y^(({d})/2 - 1) [{body}]"))
    if equations.odd is not None:
        rows.append((f"{rate}{rename(equations.odd.name)}", shown(equations.odd.rhs)))
    return rows


def _coefficients(
    equations: FlowEquations, rename: Renaming, show: Callable[[sympy.Expr], str]
) -> list[tuple[str, str]]:
    """The potential itself, in couplings or in invariants."""
    import sympy

    potential = equations.potential
    assert potential is not None
    name = rename(potential.name)
    fields = [sympy.Symbol(c) for c in potential.coordinates]
    if potential.terms:
        value = sympy.Add(*(
            c * sympy.Mul(*(f**p for f, p in zip(fields, powers, strict=True)))
            for powers, c in potential.terms.items()
        ))
        return [(name, _renamed(value, rename, show))]
    assert equations.invariants is not None
    return [
        (rename(coordinate), _renamed(value, rename, show))
        for coordinate, value in zip(
            equations.invariants.function.of, equations.invariants.invariants, strict=True
        )
    ]


def _renamed(e: sympy.Expr, rename: Renaming, show: Callable[[sympy.Expr], str]) -> str:
    import sympy

    table = {s: sympy.Symbol(rename(s.name), positive=s.is_positive) for s in e.free_symbols}
    text = show(e.xreplace(table))
    return text.replace("**", "^") if show is str else text


_JET = re.compile(r"^(?P<name>.*)\{(?P<orders>[\d,]+)\}$")


def _split(name: str) -> tuple[str, list[int]] | None:
    match = _JET.match(name)
    return (match["name"], [int(k) for k in match["orders"].split(",")]) if match else None


def _plain(name: str) -> str:
    if name.endswith(HALF_SQUARE):
        return f"({name.removesuffix(HALF_SQUARE)}^2/2)"
    special = {"y{}": "y", "h{}": "h", "V{}": "V", "vd": "v_d", "P{}": "P"}
    if name in special:
        return special[name]
    if name.startswith("eta{"):
        return f"eta_{name[4:-1]}"
    parts = _split(name)
    if parts is None:
        return name
    base, orders = parts
    if base == "loop":
        return f"L{orders[0] + 1}"
    base = special.get(base, base)
    if len(orders) == 1:
        if base == "s" or orders[0] <= 3:
            return base + "'" * orders[0]
        return f"{base}^({orders[0]})"
    return base if not any(orders) else f"{base}_({','.join(map(str, orders))})"


def _latex_name(name: str) -> str:
    if name.endswith(HALF_SQUARE):
        return rf"\tfrac{{{_latex_plain(name.removesuffix(HALF_SQUARE))}^2}}{{2}}"
    special = {"y{}": "y", "h{}": "h", "V{}": "V", "vd": "v_d", "P{}": "P"}
    if name in special:
        return special[name]
    if name.startswith("eta{"):
        return rf"\eta_{{{_latex_name(name[4:-1])}}}"
    parts = _split(name)
    if parts is None:
        return _latex_plain(name)
    base, orders = parts
    if base == "loop":
        return rf"\ell_{{{orders[0] + 1}}}"
    if base.startswith(symbols.RATE):
        return rf"{{\partial_t {_latex_name(symbols.jet(base.removeprefix(symbols.RATE), orders).name)}}}"
    base = special.get(base, _latex_plain(base))
    if len(orders) == 1:
        primes = "'" * orders[0]
        return f"{base}{primes}" if orders[0] <= 3 else rf"{base}^{{({orders[0]})}}"
    return base if not any(orders) else rf"{base}^{{({','.join(map(str, orders))})}}"


_GREEK = frozenset(
    "alpha beta gamma delta epsilon zeta eta theta iota kappa lambda mu nu xi pi rho sigma tau upsilon "
    "phi chi psi omega Gamma Delta Theta Lambda Xi Pi Sigma Phi Psi Omega".split()
)


def _latex_plain(name: str) -> str:
    """Greek names as letters, trailing digits as indices."""
    match = re.match(r"^([A-Za-z]+?)_?(\d*)$", name)
    if match is None:
        return rf"\mathrm{{{name.replace('_', chr(92) + '_')}}}"
    letters, digits = match.groups()
    if letters in _GREEK:
        body = rf"\{letters}"
    elif letters == "lam":
        body = r"\lambda"
    else:
        body = letters if len(letters) == 1 else rf"\mathrm{{{letters}}}"
    return f"{body}_{{{digits}}}" if digits else body
