"""One expression as text in the grammar of truncation files."""

from __future__ import annotations

from typing import TYPE_CHECKING

from frg.errors import InputError
from frg.language.names import ELEMENTARY

if TYPE_CHECKING:
    import sympy


def expression_text(expression: sympy.Expr) -> str:
    """The expression in the grammar of truncation files: x^2/2 + diff(U(rho), rho).

    Raises InputError for a node that the grammar has no word for."""
    import sympy
    from sympy.printing.precedence import precedence
    from sympy.printing.str import StrPrinter

    class Printer(StrPrinter):  # sympy's own printers are made to be subclassed; sympy is imported late
        def _print_Exp1(self, e: sympy.Expr) -> str:
            return "exp(1)"

        def _print_Float(self, e: sympy.Float) -> str:
            return repr(float(e))

        def _print_Mul(self, e: sympy.Expr) -> str:
            level = precedence(sympy.Symbol("x") * sympy.Symbol("y"))
            coefficient, factors = e.as_coeff_mul(rational=True)
            ordered = sympy.Mul(*factors, evaluate=False).as_ordered_factors()
            above: list[tuple[sympy.Expr | None, str]] = []
            below: list[tuple[sympy.Expr | None, str]] = []
            for f in ordered:
                under = f.is_Pow and f.exp.is_Rational and f.exp < 0
                shown = sympy.Pow(f.base, -f.exp) if under else f
                (below if under else above).append((shown, self.parenthesize(shown, level)))
            if abs(coefficient.p) != 1 or not above:
                above.insert(0, (None, str(abs(coefficient.p))))
            if coefficient.q != 1:
                below.insert(0, (None, str(coefficient.q)))
            text = ("-" if coefficient.p < 0 else "") + "*".join(t for _, t in above)
            single = below[1][0] if len(below) == 2 and coefficient.q != 1 else None
            if single is not None and single.is_Add:
                # a number times one sum would be multiplied out when read
                return f"{text}/{below[0][1]}/{below[1][1]}"
            bottom = "*".join(t for _, t in below)
            return text if not below else f"{text}/{bottom}" if len(below) == 1 else f"{text}/({bottom})"

        def _print_Derivative(self, e: sympy.Derivative) -> str:
            steps = [str(v) if k == 1 else f"{v}, {k}" for v, k in e.variable_count]
            return f"diff({self._print(e.expr)}, {', '.join(steps)})"

    _check_words(expression)
    return str(Printer({"full_prec": False}).doprint(expression)).replace("**", "^")


def _check_words(expression: sympy.Expr) -> None:
    import sympy

    for node in sympy.preorder_traversal(expression):
        fine = (
            node.is_Symbol
            or node.is_Rational
            or (node.is_Float and node.is_finite)
            or node in (sympy.pi, sympy.E)
            or node.is_Add
            or node.is_Mul
            or node.is_Pow
            or isinstance(node, (sympy.core.function.AppliedUndef, sympy.Derivative, sympy.Tuple))
            or (type(node).__name__ in ELEMENTARY and len(node.args) == 1)
        )
        if not fine:
            raise InputError(
                f"{node} cannot be written in a truncation file",
                remedy="use real numbers, + - * / ^, running functions, " + ", ".join(ELEMENTARY),
            )
