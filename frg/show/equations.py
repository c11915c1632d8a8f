"""Typesetting of the stored equations for the report, without network or scripts: LaTeX lines to SVG pictures."""

from __future__ import annotations

import io
import re


def equation_svg(latex: str) -> str | None:
    """One equation as an inline SVG, broken at top-level signs where it is long; None where the typesetter does not
    understand it."""
    import matplotlib
    from matplotlib.backends.backend_agg import FigureCanvasAgg
    from matplotlib.figure import Figure

    rows = [f"${row}$" for row in broken(simplified(latex))]
    figure = Figure(figsize=(0.01, 0.01))
    FigureCanvasAgg(figure)
    try:
        with matplotlib.rc_context({"svg.fonttype": "path", "svg.hashsalt": "frg", "mathtext.fontset": "stix"}):
            for i, row in enumerate(rows):
                figure.text(0.02 * (i > 0), -i * 70.0, row, fontsize=15, va="top")
            buffer = io.StringIO()
            figure.savefig(buffer, format="svg", bbox_inches="tight", pad_inches=0.04, transparent=True,
                           metadata={"Date": None})
    except (ValueError, RuntimeError):
        return None
    text = buffer.getvalue()
    return text[text.index("<svg") :]


def simplified(latex: str) -> str:
    """Constructs that the built-in typesetter lacks, in terms of those it has."""
    text = latex.replace(r"\tfrac", r"\frac").replace(r"\quad", r"\;\;")
    # the typesetter draws a plain apostrophe as a dot: write primes out as superscripts
    text = re.sub(r"([A-Za-z}])('+)(\^\{(\w+)\})?", _primes, text)
    return re.sub(r"\\text\{([^}]*)\}", lambda m: r"\mathrm{" + m.group(1).replace(" ", r"\ ") + "}", text)


def _primes(match: re.Match[str]) -> str:
    primes = r"\prime" * len(match.group(2))
    power = match.group(4)
    base = match.group(1) + "^{" + primes + "}"
    return base if power is None else "(" + base + ")^{" + power + "}"


def broken(latex: str, width: int = 150) -> list[str]:
    """Lines of at most about `width` characters of source, broken before + and - outside of all brackets."""
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
        if len(lines[-1]) + len(piece) > width:
            lines.append(piece)
        else:
            lines[-1] += piece
    return lines
