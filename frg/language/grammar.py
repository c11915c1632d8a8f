"""The grammar of expressions: text -> sympy, never evaluated as code, every step bounded.

sum     = ["+" | "-"] product { ("+" | "-") product }
product = signed { ("*" | "/") signed }
signed  = { "+" | "-" } power
power   = atom [ ("^" | "**") signed ]            (binds to the right; -x^2 is -(x^2))
atom    = number | name | name "(" sum { "," sum } ")" | "(" sum ")"
"""

from __future__ import annotations

from collections.abc import Callable
from typing import TYPE_CHECKING, TypeVar

from frg.errors import InputError, Place
from frg.language.algebra import GIVING_UP, Refused, SafeAlgebra, check_result
from frg.language.names import ELEMENTARY, NameTable, listing, suggestion
from frg.language.tokens import Token, place_of, tokenize
from frg.language.wording import expression_text

if TYPE_CHECKING:
    import sympy

T = TypeVar("T")

DEEPEST = 40
HIGHEST_DERIVATIVE = 20
SETTLING = 5


def parse(text: str, *, names: NameTable, place: Place) -> sympy.Expr:
    """The sympy expression that `text` means, with decimals as exact rationals.

    `place` is that of the first character of the text. Raises InputError, with the column and the
    offending part, for anything outside the grammar, unknown names, undefined values and expressions
    beyond the bounds on length, depth, exponents and digits."""
    parser = _Parser(text, names, place)
    expression = parser.whole()
    for _ in range(SETTLING):
        # sympy does not always reach its own normal form at once; what is read must print and read back equal
        again = parser.again(expression)
        if again == expression:
            return again
        expression = again
    raise parser.error("the expression has no settled form", "simplify its numbers and powers", 0, len(text))


class _Parser:
    def __init__(self, text: str, names: NameTable, place: Place):
        self.text = text
        self.names = names
        self.place = place
        self.tokens = tokenize(text, place)
        self.index = 0
        self.depth = 0
        self.algebra = SafeAlgebra()

    # -- tokens -----------------------------------------------------------------------------

    @property
    def token(self) -> Token:
        return self.tokens[self.index]

    def take(self) -> Token:
        token = self.token
        self.index += token.kind != "end"
        return token

    def at(self, *operators: str) -> bool:
        return self.token.kind == "operator" and self.token.text in operators

    def error(self, message: str, remedy: str, start: int, stop: int) -> InputError:
        return InputError(message, remedy=remedy, place=place_of(self.text, start, stop, self.place))

    def guarded(self, start: int, step: Callable[..., T], *args: object) -> T:
        """One step of the algebra; a refusal gets the place of the text from `start` to here."""
        try:
            return step(*args)
        except Refused as refusal:
            message, remedy = refusal.message, refusal.remedy
        except GIVING_UP:
            message, remedy = "the expression is too complicated", "simplify its numbers and powers"
        stop = self.tokens[self.index - 1].stop if self.index else len(self.text)
        raise self.error(message, remedy, start, stop)

    # -- the grammar ------------------------------------------------------------------------

    def whole(self) -> sympy.Expr:
        if self.token.kind == "end":
            raise self.error("the expression is empty", "write an expression between the quotes", 0, 0)
        expression = self.sum()
        if self.token.kind != "end":
            raise self.unexpected(after_operand=True)
        self.guarded(0, check_result, expression)
        return expression

    def again(self, expression: sympy.Expr) -> sympy.Expr:
        """The expression printed and read once more."""
        try:
            return _Parser(expression_text(expression), self.names, Place()).whole()
        except InputError as error:
            whole = len(self.text)
            raise self.error(f"multiplied out, {error.message}", error.remedy, 0, whole) from None

    def sum(self) -> sympy.Expr:
        start = self.token.start
        self.depth += 1
        if self.depth > DEEPEST:
            raise self.error(
                f"the expression is nested more than {DEEPEST} deep",
                "split it with [definitions]",
                start,
                start + 1,
            )
        terms = [self.product(1)]
        while self.at("+", "-"):
            sign = -1 if self.take().text == "-" else 1
            terms.append(self.product(sign))
        self.depth -= 1
        return self.guarded(start, self.algebra.add, terms)

    def product(self, sign: int) -> sympy.Expr:
        import sympy

        start = self.token.start
        extra, factor = self.signed()
        sign *= extra
        factors = [factor]
        while self.at("*", "/"):
            divide = self.take().text == "/"
            factor_start = self.token.start
            extra, factor = self.signed()
            sign *= extra
            if divide:
                factor = self.guarded(factor_start, self.algebra.power, factor, sympy.Integer(-1))
            factors.append(factor)
        # The sign is a factor of its own: sympy spreads a number over a sum only if nothing else is there.
        if sign < 0:
            factors.insert(0, sympy.Integer(-1))
        return self.guarded(start, self.algebra.multiply, factors)

    def signed(self) -> tuple[int, sympy.Expr]:
        sign = 1
        while self.at("+", "-"):
            sign *= -1 if self.take().text == "-" else 1
        return sign, self.power()

    def power(self) -> sympy.Expr:
        import sympy

        start = self.token.start
        base = self.atom()
        if not self.at("^", "**"):
            return base
        self.take()
        self.depth += 1
        if self.depth > DEEPEST:
            raise self.error(
                f"powers are nested more than {DEEPEST} deep",
                "write fewer powers of powers",
                start,
                start + 1,
            )
        sign, exponent = self.signed()
        self.depth -= 1
        if sign < 0:
            exponent = self.guarded(start, self.algebra.multiply, [sympy.Integer(-1), exponent])
        return self.guarded(start, self.algebra.power, base, exponent)

    def atom(self) -> sympy.Expr:
        token = self.token
        if token.kind == "number":
            self.take()
            return self.guarded(token.start, self.algebra.number, token.text)
        if token.kind == "name":
            self.take()
            return self.call(token) if self.at("(") else self.name(token)
        if self.at("("):
            self.take()
            inner = self.sum()
            self.close(token)
            return inner
        raise self.unexpected(after_operand=False)

    def close(self, opening: Token) -> None:
        if not self.at(")"):
            if self.token.kind == "end":
                raise self.error("a bracket is never closed", "add the missing )", opening.start, len(self.text))
            raise self.unexpected(after_operand=True)
        self.take()

    def unexpected(self, *, after_operand: bool) -> InputError:
        token = self.token
        if token.kind == "end":
            return self.error("the expression ends too early", "complete it", len(self.text), len(self.text))
        if not after_operand:
            return self.error(
                f"expected a number, a name or a bracket, found {token.text!r}",
                "check the operator before it",
                token.start,
                token.stop,
            )
        if token.text == ")":
            return self.error("a bracket is closed that was never opened", "remove it", token.start, token.stop)
        if token.kind in ("number", "name") or token.text == "(":
            return self.error(
                f"an operator is missing before {token.text!r}",
                "write * for a product",
                token.start,
                token.stop,
            )
        return self.error(f"unexpected {token.text!r}", "remove it", token.start, token.stop)

    # -- names and calls --------------------------------------------------------------------

    def name(self, token: Token) -> sympy.Expr:
        import sympy

        name, table = token.text, self.names
        if name in table.names:
            return sympy.Symbol(name)
        if name == "pi":
            return sympy.pi
        if name in table.functions:
            arguments = ", ".join(["…"] * table.functions[name])
            raise self.error(
                f"{name} is a running function and needs its arguments",
                f"write {name}({arguments})",
                token.start,
                token.stop,
            )
        if name in ELEMENTARY or name == "diff":
            raise self.error(f"{name} needs its argument", f"write {name}(…)", token.start, token.stop)
        if name in table.lorentz:
            raise self.error(
                f"the Lorentz name {name} may only stand inside d(field, {name})",
                "declare it if it is meant to be something else",
                token.start,
                token.stop,
            )
        raise self.error(
            f"unknown name {name!r}",
            suggestion(name, [*table.names, "pi"], table.advice),
            token.start,
            token.stop,
        )

    def call(self, token: Token) -> sympy.Expr:
        import sympy

        name, table = token.text, self.names
        if name == "d" and table.differentiable:
            return self.derivative_operator(token)
        if name not in table.callables():
            raise self.unknown_call(token)
        arguments = self.arguments(token)
        if name in table.functions:
            self.count(token, arguments, {table.functions[name]})
            return sympy.Function(name)(*arguments)
        if name == "diff":
            return self.derivative(token, arguments)
        if name == "l":
            self.count(token, arguments, {2, 3})
            return sympy.Function("l")(*arguments)
        self.count(token, arguments, {1})
        return self.guarded(token.start, self.algebra.call, name, arguments[0])

    def unknown_call(self, token: Token) -> InputError:
        name, table = token.text, self.names
        if name in table.names:
            return self.error(
                f"{name} is a {table.names[name]}, not a function",
                f"write {name}*(…) for a product, or declare {name} as a function in [running]",
                token.start,
                token.stop,
            )
        return self.error(
            f"{name} is called as a function, but no running function of that name is declared",
            suggestion(
                name,
                table.callables(),
                f'add {name} = {{ kind = "function", of = …, about = …, order = … }} to [running]',
            ),
            token.start,
            token.stop,
        )

    def arguments(self, token: Token) -> list[sympy.Expr]:
        opening = self.take()
        if self.at(")"):
            raise self.error(f"{token.text} needs an argument", f"write {token.text}(…)", token.start, self.token.stop)
        found = [self.sum()]
        while self.at(","):
            self.take()
            found.append(self.sum())
        self.close(opening)
        return found

    def count(self, token: Token, arguments: list[sympy.Expr], allowed: set[int]) -> None:
        if len(arguments) not in allowed:
            stop = self.tokens[self.index - 1].stop
            wanted = listing(str(k) for k in sorted(allowed))
            raise self.error(
                f"{token.text} takes {wanted} argument{'s' if wanted != '1' else ''}, not {len(arguments)}",
                "separate the arguments by commas",
                token.start,
                stop,
            )

    def derivative(self, token: Token, arguments: list[sympy.Expr]) -> sympy.Expr:
        """diff(U(rho), rho), diff(U(rho), rho, 2), diff(U(rho, tau), rho, tau)."""
        import sympy

        stop = self.tokens[self.index - 1].stop
        function = arguments[0]
        inner = function.expr if isinstance(function, sympy.Derivative) else function
        remedy = "write diff(U(rho), rho) or diff(U(rho), rho, 2)"
        if type(inner).__name__ not in self.names.functions or not all(a.is_Symbol for a in inner.args):
            raise self.error("diff differentiates a running function of plain coordinates", remedy, token.start, stop)
        counts = dict.fromkeys(inner.args, 0)
        if function is not inner:
            counts |= {v: int(k) for v, k in function.variable_count}
        repeatable: sympy.Expr | None = None
        for argument in arguments[1:]:
            if argument in counts:
                counts[argument] += 1
                repeatable = argument
            elif argument.is_Integer and repeatable and 1 <= argument <= HIGHEST_DERIVATIVE:
                counts[repeatable] += int(argument) - 1
                repeatable = None
            else:
                raise self.error(
                    f"{argument} is neither an argument of {inner} nor a number of derivatives up to "
                    f"{HIGHEST_DERIVATIVE}",
                    remedy,
                    token.start,
                    stop,
                )
        total = sum(counts.values())
        if len(arguments) == 1 or total > HIGHEST_DERIVATIVE:
            raise self.error(
                f"diff needs between 1 and {HIGHEST_DERIVATIVE} derivatives, not {total}",
                remedy,
                token.start,
                stop,
            )
        return sympy.Derivative(inner, *((v, k) for v, k in counts.items() if k))

    def derivative_operator(self, token: Token) -> sympy.Expr:
        """d(phi, mu): the arguments are single names, and mu is known nowhere else."""
        import sympy

        opening = self.take()
        words: list[Token] = []
        while True:
            word = self.take()
            if word.kind != "name":
                raise self.error(
                    "d takes a field and Lorentz names",
                    "write d(phi, mu)",
                    token.start,
                    max(word.stop, token.stop),
                )
            words.append(word)
            if not self.at(","):
                break
            self.take()
        self.close(opening)
        table = self.names
        target = words[0]
        if target.text not in table.differentiable:
            raise self.error(
                f"d cannot act on {target.text!r}",
                suggestion(target.text, table.differentiable, "d acts on fields"),
                target.start,
                target.stop,
            )
        if len(words) == 1:
            raise self.error(
                "d needs a Lorentz name",
                f"write d({target.text}, mu)",
                token.start,
                self.tokens[self.index - 1].stop,
            )
        for word in words[1:]:
            if word.text not in table.lorentz:
                what = f"it is a {table.names[word.text]} here" if word.text in table.names else "it is unknown"
                raise self.error(
                    f"{word.text!r} is no Lorentz name: {what}",
                    suggestion(word.text, table.lorentz, "use a free Lorentz name"),
                    word.start,
                    word.stop,
                )
        return sympy.Function("d")(*(sympy.Symbol(w.text) for w in words))
