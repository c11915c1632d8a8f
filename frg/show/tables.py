"""Results as text for a terminal: plain words and aligned columns; nothing depends on colour."""

from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np

from frg.records import FixedPoint, Run, Step, Track, Verdict
from frg.show.numbers import correlation_exponent, format_complex, format_exponents, value_with_error

if TYPE_CHECKING:
    from rich.console import Console

PLAIN_WIDTH = 100


def console() -> Console:
    """Standard output; without a terminal no control codes, and a fixed width so that nothing depends on it."""
    import sys

    from rich.console import Console

    if sys.stdout.isatty():
        return Console(highlight=False)
    return Console(highlight=False, width=PLAIN_WIDTH, no_color=True, force_terminal=False)


def print_step(console: Console, step: Step, *, title: str) -> None:
    """All fixed points of one step, a paragraph each."""
    order = ", ".join(f"{k} = {v}" for k, v in step.order.items())
    _line(console, f"{title}{f', order {order}' if order else ''}: {step.outcome.word}")
    for point in step.fixed_points:
        console.print()
        for line in point_lines(point):
            _line(console, line)
    if not step.fixed_points:
        _line(console, f"  {step.outcome.value}")
    console.print()
    if step.search:
        _line(console, "search: " + ", ".join(f"{v} {k}" for k, v in step.search.items()))
    for note in step.notes:
        _line(console, f"note: {note}")


def point_lines(point: FixedPoint) -> list[str]:
    """One fixed point in words."""
    lines = [
        f"{point.label}  {point.kind}, {point.relevant} relevant"
        + (f", {point.marginal} marginal" if point.marginal else "")
        + (", certified" if point.certified else "")
        + f"; residual {point.residual:.1e}, condition {point.condition:.1e}"
    ]
    shown = [f"{n} = {c:.10g}" for n, c in zip(point.names[:5], point.couplings[:5], strict=True)]
    more = len(point.names) - len(shown)
    lines.append("   couplings  " + ", ".join(shown) + (f", … +{more}" if more > 0 else ""))
    if point.landmarks:
        lines.append("   landmarks  " + ", ".join(f"{k} = {v:.10g}" for k, v in point.landmarks.items()))
    if point.eta:
        lines.append("   eta        " + ", ".join(f"{k}: {v:.10g}" for k, v in point.eta.items()))
    nu = correlation_exponent(complex(point.theta[0])) if len(point.theta) else None
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
    inputs = run.inputs
    values = ", ".join(f"{k} = {v:g}" for k, v in inputs.regulator_parameters.items())
    _line(console, inputs.title)
    _line(console, f"regulator {inputs.regulator}{f' ({values})' if values else ''}; "
                   + ", ".join(f"{k} = {v}" for k, v in inputs.parameters.items()))
    _line(console, f"status {run.status}; frg {run.frg_version}; signature {inputs.signature[:12]}")
    console.print()
    if len(run.steps) == 1 and run.verdict is None:
        print_step(console, run.steps[0], title=inputs.title)
        return
    console.print(study_table(run))
    for track in run.tracks[1:]:
        _line(console, track_line(run, track))
    if run.verdict is not None:
        console.print()
        for line in verdict_lines(run.verdict):
            _line(console, line)
    elif run.status != "complete":
        _line(console, "no verdict: the study is not complete; resume it with frg converge ... --resume")


def study_table(run: Run):  # type: ignore[no-untyped-def]
    """One row an order: what was found, and the main track."""
    from rich.box import SIMPLE
    from rich.table import Table

    table = Table(box=SIMPLE, pad_edge=False, padding=(0, 1))
    for name in ("order", "roots", "relevant", "nu", "theta", "residual", "next root"):
        table.add_column(name, justify="left" if name == "theta" else "right", no_wrap=name != "theta")
    for row in study_rows(run):
        table.add_row(*row)
    return table


def study_rows(run: Run) -> list[tuple[str, ...]]:
    """(order, roots, relevant, nu, theta, residual, distance of the next root over that of the chosen one)."""
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
        nu = correlation_exponent(complex(point.theta[0]))
        ratio = track.next_distance[k] / track.distance[k] if track.distance[k] > 0 else np.inf
        further = "none" if not np.isfinite(ratio) else (f"{ratio:.1f}x" if ratio < 1000 else ">1000x")
        rows.append((
            order, str(len(step.fixed_points)), str(point.relevant), f"{nu:.10f}" if nu is not None else "-",
            format_exponents(point.theta, 3, 5).split(", …")[0], f"{point.residual:.0e}", further,
        ))
    return rows


def track_line(run: Run, track: Track) -> str:
    """A track in one line."""
    orders = [next(iter(run.steps[int(s)].order.values()), 0) for s in track.steps]
    last = run.steps[int(track.steps[-1])].fixed_points[int(track.points[-1])]
    return (f"{track.label}: orders {orders[0]} to {orders[-1]}, {last.relevant} relevant, "
            f"theta_1 {format_complex(complex(last.theta[0]))}, {last.kind}")


def verdict_lines(verdict: Verdict) -> list[str]:
    """The verdict in words, with reasons and extrapolated exponents."""
    count = f"{verdict.relevant} relevant direction(s), settled from order {verdict.settled_from}"
    lines = [
        f"a finite number of relevant directions is {verdict.finite}"
        + (f": {count}" if verdict.relevant is not None else "")
    ]
    lines += [f"  - {reason}" for reason in verdict.reasons]
    lines += [f"  {text}" for text in exponent_lines(verdict)]
    return lines


def exponent_lines(verdict: Verdict) -> list[str]:
    """theta_i extrapolated to infinite order, and nu and omega from them."""
    lines = []
    for i, e in enumerate(verdict.exponents):
        if abs(e.value.imag) > 1e-9 * max(1.0, abs(e.value)):
            text = f"{format_complex(e.value, 8)} (error {e.error:.1e})"
        else:
            text = value_with_error(e.value.real, e.error)
        lines.append(f"theta_{i + 1} = {text}")
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


def _line(console: Console, text: str) -> None:
    """Text as it stands: nothing in it is markup, and long lines wrap."""
    console.print(text, markup=False, highlight=False)


