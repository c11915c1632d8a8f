"""Typesetting of the stored equations for the report, without network or scripts: LaTeX lines to SVG pictures."""

from __future__ import annotations

import io
import re
from typing import Any

SIZE = 14.0  # points
WIDEST = 60  # visible characters of a bracket or of one half of a fraction
LONGEST = 20_000  # characters: longer ones are no longer read as formulas, and would take minutes to set


def equation_rows(latex: str) -> list[str] | None:
    """One equation as inline SVG pictures, one a row, broken at top-level signs where it is long, with letters for
    what is too long to be broken so; None where the typesetter does not understand it. The ink has no colour of its
    own: the page sets it by `fill`."""
    if len(latex) > LONGEST:
        return None
    try:
        return [_picture(f"${row}$") for part in abbreviated(latex) for row in broken(simplified(part))]
    except (ValueError, RuntimeError, RecursionError):
        return None


def _picture(row: str) -> str:
    import matplotlib
    from matplotlib.backends.backend_agg import FigureCanvasAgg
    from matplotlib.figure import Figure

    figure = Figure(figsize=(0.01, 0.01))
    FigureCanvasAgg(figure)
    rules: Any = {"svg.fonttype": "path", "svg.hashsalt": "frg", "mathtext.fontset": "cm"}
    with matplotlib.rc_context(rules):
        figure.text(0, 0, row, fontsize=SIZE, va="baseline")
        buffer = io.StringIO()
        figure.savefig(buffer, format="svg", bbox_inches="tight", pad_inches=0.03, transparent=True,
                       metadata={"Date": None})
    text = buffer.getvalue()
    return text[text.index("<svg") :]


def simplified(latex: str) -> str:
    """Constructs that the built-in typesetter lacks, in terms of those it has; fractions at full size, for nested
    ones shrink to nothing otherwise."""
    text = latex.replace(r"\frac", r"\dfrac").replace(r"\tfrac", r"\frac").replace(r"\quad", r"\;\;")
    # the typesetter draws a plain apostrophe as a dot: write primes out as superscripts
    text = re.sub(r"([A-Za-z}])('+)(\^\{(\w+)\})?", _primes, text)
    return re.sub(r"\\text\{([^}]*)\}", lambda m: r"\mathrm{" + m.group(1).replace(" ", r"\ ") + "}", text)


def abbreviated(latex: str) -> list[str]:
    """The equation, followed by the equations of the script letters put for its long brackets, and for long
    numerators and denominators: neither can be broken over rows. Inserting them gives back the equation."""
    parts, done = [latex], 0
    letters = (rf"\mathcal{{{c}}}" for c in "ABCDEFGHIJKLMNOPQRSTUVWXYZ")
    while done < len(parts):
        found = _longest_pair(parts[done])
        letter = next(letters, None) if found else None
        if found is None or letter is None:
            done += 1
            continue
        start, end, inner = found
        parts.append(f"{letter} = {inner}")
        parts[done] = parts[done][:start] + letter + parts[done][end:]
    return parts


def _longest_pair(latex: str) -> tuple[int, int, str] | None:
    """(start, end, content) of the longest bracket that is too long, or else of such a numerator or denominator."""
    brackets, arguments = [], []
    opened: list[tuple[str, int]] = []
    closed = ""
    for token in re.finditer(r"\\left\(|\\right\)|\\frac\{|[{}]", latex):
        text = token.group()
        if text in (r"\left(", r"\frac{", "{"):
            # a brace right behind a numerator opens the denominator
            kind = r"\frac{" if text == "{" and latex[: token.start()].endswith("}") and closed == r"\frac{" else text
            opened.append((kind, token.end()))
            continue
        if not opened:
            return None
        closed, start = opened.pop()
        inner = latex[start : token.start()]
        if _visible(inner) > WIDEST and closed == r"\left(":
            brackets.append((start - len(r"\left("), token.end(), inner))
        elif _visible(inner) > WIDEST and closed == r"\frac{":
            arguments.append((start, token.start(), inner))
    return max(brackets or arguments, key=lambda found: len(found[2]), default=None)


def _primes(match: re.Match[str]) -> str:
    primes = r"\prime" * len(match.group(2))
    power = match.group(4)
    base = match.group(1) + "^{" + primes + "}"
    return base if power is None else "(" + base + ")^{" + power + "}"


def broken(latex: str, width: int = 70) -> list[str]:
    """Lines of at most about `width` visible characters, broken before + and - outside of all brackets."""
    pieces, depth, start = [], 0, 0
    i = 0
    while i < len(latex):
        c = latex[i]
        if c in "{(":
            depth += 1
        elif c in "})":
            depth -= 1
        elif latex.startswith(r"\left[", i):
            depth += 1
            i += 5
        elif latex.startswith(r"\right]", i):
            depth -= 1
            i += 6
        elif c in "+-" and depth == 0 and i > start and latex[i - 1] == " " and latex[:i].rstrip()[-1:] != "=":
            pieces.append(latex[start:i])
            start = i
        i += 1
    pieces.append(latex[start:])
    lines = [pieces[0]]
    for piece in pieces[1:]:
        if _visible(lines[-1]) + _visible(piece) > width:
            lines.append(piece)
        else:
            lines[-1] += piece
    return lines


def _visible(latex: str) -> int:
    """About how many signs are seen: a command is one or none, brackets of the source are none."""
    return len(re.sub(r"\\[A-Za-z]+|[{}^_\s]", "", latex))
