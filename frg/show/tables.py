"""Results as text for a terminal: plain words and aligned columns; nothing depends on colour."""

from __future__ import annotations

import textwrap
from collections.abc import Sequence
from typing import TYPE_CHECKING

import numpy as np

from frg.records import Extrapolation, FixedPoint, Run, Step, Track, Verdict, counted
from frg.show.numbers import (
    REAL,
    correlation_exponent,
    format_complex,
    format_exponents,
    harmless,
    value_with_error,
)

if TYPE_CHECKING:
    from rich.console import Console
    from rich.table import Table

PLAIN_WIDTH = 100
HANG = 14  # continuation lines of a labelled line start under its text
COLUMNS = ("order", "roots", "relevant", "nu", "theta", "residual", "next root")


def console() -> Console:
    """Standard output; without a terminal no control codes, and a fixed width so that nothing depends on it."""
    import sys

    from rich.console import Console

    if sys.stdout.isatty():
        return Console(highlight=False)
    return Console(highlight=False, width=PLAIN_WIDTH, no_color=True, force_terminal=False)


def print_step(console: Console, step: Step, *, title: str) -> None:
    """All fixed points of one step, a paragraph each."""
    for line in step_lines(step, title=title):
        _line(console, line)


def step_lines(step: Step, *, title: str) -> list[str]:
    """One step in words, its fixed points between empty lines."""
    order = ", ".join(f"{k} = {v}" for k, v in step.order.items())
    lines = [f"{title}{f', order {order}' if order else ''}: {step.outcome.word}"]
    for point in step.fixed_points:
        lines += ["", *point_lines(point)]
    if not step.fixed_points:
        lines.append(f"  {step.outcome.value}")
    lines.append("")
    if step.search:
        lines.append("search: " + ", ".join(f"{v} {k}" for k, v in step.search.items()))
    return lines + [f"note: {note}" for note in step.notes]


def point_lines(point: FixedPoint) -> list[str]:
    """One fixed point in words."""
    lines = [
        f"{point.label}  {point.kind}, {point.relevant} relevant"
        + (f", {point.marginal} marginal" if point.marginal else "")
        + (", certified" if point.certified else "")
        + f"; residual {point.residual:.1e}, condition {point.condition:.1e}"
    ]
    shown = [f"{n} = {c + 0.0:.10g}" for n, c in zip(point.names[:5], point.couplings[:5], strict=True)]
    more = len(point.names) - len(shown)
    lines.append("   couplings  " + ", ".join(shown) + (f", … +{more}" if more > 0 else ""))
    if point.landmarks:
        lines.append("   landmarks  " + ", ".join(f"{k} = {v:.10g}" for k, v in point.landmarks.items()))
    if point.eta:
        lines.append("   eta        " + ", ".join(f"{k}: {v:.10g}" for k, v in point.eta.items()))
    nu = leading_nu(point)
    lines.append(
        "   theta      " + (format_exponents(point.theta, 5, 10) or "none resolved")
        + (f"   (nu = {nu:.10g})" if nu is not None else "")
    )
    if len(point.theta_odd):
        lines.append("   theta odd  " + format_exponents(point.theta_odd, 4, 10))
    lines += [f"   note: {note}" for note in point.notes]
    return lines


def print_run(console: Console, run: Run) -> None:
    """Header, study table, tracks and verdict; a run of one step without verdict prints the step."""
    for line in header_lines(run):
        _line(console, line)
    console.print()
    if len(run.steps) == 1 and run.verdict is None:
        print_step(console, run.steps[0], title=run.inputs.title)
        return
    _print_study(console, run)
    for track in run.tracks[1:]:
        _line(console, track_line(run, track))
    if run.verdict is not None:
        console.print()
        for line in verdict_lines(run.verdict):
            _line(console, line)
    elif run.status != "complete":
        _line(console, "no verdict: the study is not complete; resume it with frg converge ... --resume")


def header_lines(run: Run) -> list[str]:
    """What was computed, with what, and whether it is complete."""
    inputs = run.inputs
    values = ", ".join(f"{k} = {v:g}" for k, v in inputs.regulator_parameters.items())
    parts = [f"regulator {inputs.regulator}{f' ({values})' if values else ''}"]
    if inputs.parameters:
        parts.append(", ".join(f"{k} = {v}" for k, v in inputs.parameters.items()))
    return [inputs.title, "; ".join(parts), f"status {run.status}; frg {run.frg_version}; signature {inputs.signature[:12]}"]


def _print_study(console: Console, run: Run) -> None:
    """One row an order, in the widest of three layouts that fits: no number is ever cut or parted."""
    rows = study_rows(run)
    wide = _widths(COLUMNS, rows)
    if wide + 3 * len(COLUMNS) - 1 <= console.width:
        console.print(_table(COLUMNS, rows, gap=1))
        return
    names = (*COLUMNS[:-1], "next")
    rows = study_rows(run, short=True)
    if _widths(names, rows) + len(names) - 1 <= console.width:
        console.print(_table(names, rows, gap=0))
        console.print()
        return
    for order, roots, relevant, nu, theta, residual, further in rows:
        _line(console, f"order {order}: {roots} roots, {relevant} relevant, nu {nu}, residual {residual}, next root {further}")
        _line(console, f"   theta      {theta}")


def _widths(names: Sequence[str], rows: Sequence[Sequence[str]]) -> int:
    return sum(max(map(len, column)) for column in zip(names, *rows, strict=True))


def _table(names: Sequence[str], rows: Sequence[Sequence[str]], *, gap: int) -> Table:
    from rich.box import SIMPLE
    from rich.table import Table

    table = Table(box=SIMPLE, pad_edge=False, show_edge=gap > 0, padding=(0, gap))
    for name in names:
        table.add_column(name, justify="left" if name == "theta" else "right", no_wrap=True)
    for row in rows:
        table.add_row(*row)
    return table


def leading_nu(point: FixedPoint) -> float | None:
    """nu of the leading exponent, where there is one and it is real and positive."""
    return correlation_exponent(complex(point.theta[0])) if len(point.theta) else None


def study_rows(run: Run, *, short: bool = False) -> list[tuple[str, ...]]:
    """(order, roots, relevant, nu, theta, residual, distance of the next root over that of the chosen one).

    nu and theta are those of the tracked fixed point, in the order of its own spectrum; `short` gives them fewer digits. A
    followed direction of the track may begin at a later order and has no fixed place in that list."""
    track = run.tracks[0] if run.tracks else None
    rows: list[tuple[str, ...]] = []
    for s, step in enumerate(run.steps):
        order = ", ".join(str(v) for v in step.order.values())
        where = np.flatnonzero(track.steps == s) if track is not None else np.zeros(0, dtype=int)
        if track is None or not len(where):
            rows.append((order, str(len(step.fixed_points)), "-", "-", step.outcome.word, "-", "-"))
            continue
        k = int(where[0])
        point = step.fixed_points[int(track.points[k])]
        nu = leading_nu(point)
        further = _next_root(float(track.distance[k]), float(track.next_distance[k]), len(step.fixed_points))
        rows.append((
            order, str(len(step.fixed_points)), str(point.relevant), f"{nu:.{8 if short else 10}f}" if nu is not None else "-",
            format_exponents(point.theta, 3, 4 if short else 5).split(", …")[0] or "-", f"{point.residual:.0e}", further,
        ))
    return rows


def _next_root(chosen: float, following: float, roots: int) -> str:
    """The distance of the next-nearest root over that of the chosen one; "-" where there was no prediction yet."""
    if not np.isfinite(following):
        return "-" if np.isnan(chosen) and roots > 1 else "none"
    if not chosen > 0:
        return "-" if np.isnan(chosen) else ">1000x"
    ratio = following / chosen
    return f"{ratio:.1f}x" if ratio < 1000 else ">1000x"


def track_line(run: Run, track: Track) -> str:
    """A track in one line."""
    if not len(track.steps):
        return f"{track.label}: no steps"
    orders = [next(iter(run.steps[int(s)].order.values()), 0) for s in track.steps]
    last = run.steps[int(track.steps[-1])].fixed_points[int(track.points[-1])]
    theta = f"theta_1 {format_complex(complex(last.theta[0]))}" if len(last.theta) else "no exponents"
    return f"{track.label}: orders {orders[0]} to {orders[-1]}, {last.relevant} relevant, {theta}, {last.kind}"


def verdict_lines(verdict: Verdict) -> list[str]:
    """The verdict in words, with reasons and extrapolated exponents."""
    count = f"{counted(verdict.relevant or 0, 'relevant direction')}, settled from order {verdict.settled_from}"
    lines = [
        f"a finite number of relevant directions is {verdict.finite}"
        + (f": {count}" if verdict.relevant is not None else "")
    ]
    lines += [f"  - {reason}" for reason in verdict.reasons]
    if verdict.relevant is None and verdict.counts:
        counts = ", ".join("not found" if c < 0 else str(c) for c in verdict.counts)
        lines.append(f"  relevant directions by order: {counts}")
    lines += [f"  {text}" for text in exponent_lines(verdict)]
    return lines


def exponent_lines(verdict: Verdict) -> list[str]:
    """theta_i extrapolated to infinite order, and nu and omega from them."""
    lines = []
    for i, e in enumerate(verdict.exponents):
        lines.append(f"theta_{i + 1} = {value_with_error(e.value, e.error)}")
    if verdict.exponents:
        first = verdict.exponents[0]
        nu = correlation_exponent(complex(first.value))
        if nu is not None:
            lines.append(f"nu = 1/theta_1 = {value_with_error(nu, first.error * nu**2)}")
    if len(verdict.exponents) > 1 and verdict.exponents[1].value.real < 0:
        second = verdict.exponents[1]
        if abs(second.value.imag) < 1e-9:
            lines.append(f"omega = -theta_2 = {value_with_error(-second.value.real, second.error)}")
    return lines


def leading(exponents: Sequence[Extrapolation], most: int) -> list[Extrapolation]:
    """The first `most` exponents, of a conjugate pair only the first."""
    kept: list[Extrapolation] = []
    for e in exponents:
        pair = bool(kept) and abs(e.value.imag) > REAL and abs(e.value - kept[-1].value.conjugate()) <= e.error
        if not pair:
            kept.append(e)
    return kept[:most]


def _line(console: Console, text: str) -> None:
    """Text as it stands: nothing in it is markup. Long lines wrap between words and go on under their text."""
    clean = harmless(text)
    stripped = clean.lstrip()
    indent = len(clean) - len(stripped)
    labelled = indent == 3 and not stripped.startswith("note:")
    hang = " " * (HANG if labelled else indent + 2)
    wrapped = textwrap.wrap(
        clean, max(console.width, 2 * HANG), subsequent_indent=hang, break_long_words=False, break_on_hyphens=False
    )
    for line in wrapped or [""]:
        console.print(line, markup=False, highlight=False, soft_wrap=True)
