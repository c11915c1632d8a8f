"""Pictures of records, fit for a paper: vector output, labelled axes, told apart by shape as well as by colour.

Palette: M. Okabe, K. Ito, Color Universal Design (2008), safe for the common kinds of colour blindness.
"""

from __future__ import annotations

from pathlib import Path
from typing import TYPE_CHECKING, Any

import numpy as np

from frg.records import FixedPoint, Growth, Run, Track, Verdict

if TYPE_CHECKING:
    from matplotlib.axes import Axes
    from matplotlib.figure import Figure

BLUE, ORANGE, GREEN, VERMILION, PURPLE, SKY, BLACK = (
    "#0072B2", "#E69F00", "#009E73", "#D55E00", "#CC79A7", "#56B4E9", "#000000",
)
COLOURS = (BLUE, VERMILION, GREEN, ORANGE, PURPLE, SKY)
MARKERS = ("o", "s", "^", "D", "v", "P")
LINES = ("-", "--", "-.", ":", (0, (5, 1)), (0, (3, 1, 1, 1)))
COLUMN = (4.6, 3.1)  # inches: a journal column with room for labels
GREEK = {"rho": r"$\rho$", "tau": r"$\tau$", "phi": r"$\phi$", "R": r"$R$"}


def new_figure() -> tuple[Figure, Axes]:
    """A figure without any global state of the plotting library."""
    from matplotlib.backends.backend_agg import FigureCanvasAgg
    from matplotlib.figure import Figure

    figure = Figure(figsize=COLUMN, layout="constrained")
    FigureCanvasAgg(figure)
    return figure, figure.add_subplot()


def _axes(ax: Axes | None) -> Axes:
    return new_figure()[1] if ax is None else ax


def orders_of(run: Run, track: Track) -> np.ndarray:
    """(k,) values of the order symbol along a track."""
    return np.array([next(iter(run.steps[int(s)].order.values()), int(s)) for s in track.steps])


def order_label(run: Run) -> str:
    name = next((k for s in run.steps for k in s.order), "n")
    return f"order {name}"


def draw_exponents(run: Run, ax: Axes | None = None) -> Axes:
    """Real parts of the followed exponents against the order, with the extrapolated value and its error."""
    ax = _axes(ax)
    track, verdict = run.tracks[0], run.verdict
    orders = orders_of(run, track)
    shown = min(4, track.theta.shape[1])
    for j in range(shown):
        style: Any = {"color": COLOURS[j], "marker": MARKERS[j], "linestyle": LINES[j]}
        ax.plot(orders, track.theta[:, j].real, markersize=3.5, linewidth=1, label=rf"$\theta_{{{j + 1}}}$", **style)
        if verdict is not None and j < len(verdict.exponents) and np.isfinite(verdict.exponents[j].error):
            e = verdict.exponents[j]
            ax.axhspan(e.value.real - e.error, e.value.real + e.error, color=COLOURS[j], alpha=0.15, linewidth=0)
    settled = track.theta[len(orders) // 2 :, :shown].real
    settled = settled[np.isfinite(settled)]
    if len(settled):
        low, high = float(settled.min()), float(settled.max())
        margin = 0.25 * max(high - low, 1.0)
        ax.set_ylim(low - margin, high + margin)
    ax.axhline(0, color=BLACK, linewidth=0.6)
    ax.set(xlabel=order_label(run), ylabel=r"critical exponent $\mathrm{Re}\,\theta_i$")
    ax.legend(loc="upper left", bbox_to_anchor=(1.0, 1.0), frameon=False)
    _whole_ticks(ax)
    return ax


def draw_counts(run: Run, ax: Axes | None = None) -> Axes:
    """The number of relevant directions against the order."""
    ax = _axes(ax)
    assert run.verdict is not None
    orders = [next(iter(s.order.values()), i) for i, s in enumerate(run.steps)]
    counts = np.array(run.verdict.counts, dtype=float)
    found = counts >= 0
    ax.step(np.array(orders)[found], counts[found], where="mid", color=BLUE, linewidth=1)
    ax.plot(np.array(orders)[found], counts[found], "o", color=BLUE, markersize=4, label="tracked fixed point")
    if (~found).any():
        ax.plot(np.array(orders)[~found], np.zeros((~found).sum()), "x", color=VERMILION, label="not found")
        ax.legend(frameon=False)
    top = float(counts.max(initial=1))
    ax.set(xlabel=order_label(run), ylabel="relevant directions", ylim=(-0.2, top + 1))
    _whole_ticks(ax)
    _whole_ticks(ax, "y")
    return ax


def draw_landscape(run: Run, ax: Axes | None = None) -> Axes:
    """Every fixed point found at every order by its leading exponent; the tracked one is highlighted."""
    ax = _axes(ax)
    style = {"physical": ("o", BLUE), "spurious": ("x", ORANGE), "gaussian": ("+", GREEN)}
    for kind, (marker, colour) in style.items():
        rows = [
            (next(iter(s.order.values()), i), float(p.theta[0].real))
            for i, s in enumerate(run.steps) for p in s.fixed_points if p.kind == kind and len(p.theta)
        ]
        if rows:
            x, y = zip(*rows, strict=True)
            ax.plot(x, y, linestyle="none", marker=marker, markersize=4, markeredgewidth=0.9, label=kind,
                    markerfacecolor="none", markeredgecolor=colour)
    if run.tracks:
        track = run.tracks[0]
        lead = [run.steps[int(s)].fixed_points[int(p)].theta[0].real
                for s, p in zip(track.steps, track.points, strict=True)]
        ax.plot(orders_of(run, track), lead, "-D", color=VERMILION, markersize=4, linewidth=1.2, label="tracked")
    largest = max((abs(p.theta[0].real) for t in run.steps for p in t.fixed_points if len(p.theta)), default=0.0)
    if largest > 20:
        ax.set_yscale("symlog", linthresh=5)
    ax.set(xlabel=order_label(run), ylabel=r"leading exponent $\mathrm{Re}\,\theta_1$")
    ax.legend(loc="upper left", bbox_to_anchor=(1.0, 1.0), frameon=False)
    _whole_ticks(ax)
    return ax


def draw_potential(point: FixedPoint, ax: Axes | None = None) -> Axes:
    """The fixed-point potential and its slope, dimensionless (powers of k scaled out)."""
    ax = _axes(ax)
    profile = point.profile
    assert profile is not None
    name = GREEK.get(profile.x_label, profile.x_label)
    ax.plot(profile.x, _normalised(profile.potential), LINES[0], color=BLUE, linewidth=1.3,
            label=rf"$u - u(0)$, scaled by {_size(profile.potential):.2g}")
    ax.plot(profile.x, _normalised(profile.slope), linestyle=LINES[1], color=VERMILION, linewidth=1.3,
            label=rf"$u'$, scaled by {_size(profile.slope):.2g}")
    ax.axhline(0, color=BLACK, linewidth=0.6)
    ax.set(xlabel=f"{name} in units of $k$", ylabel="potential and slope (scaled to 1)")
    ax.legend(frameon=False, fontsize="small")
    return ax


def draw_eigenfunctions(point: FixedPoint, ax: Axes | None = None) -> Axes:
    """Leading eigenperturbations of the potential, each scaled to 1."""
    ax = _axes(ax)
    profile = point.profile
    assert profile is not None
    for j, values in enumerate(profile.eigenfunctions):
        theta = point.theta[j]
        imaginary = rf"\pm{abs(theta.imag):.3g}i" if abs(theta.imag) > 1e-9 else ""
        ax.plot(profile.x, values, linestyle=LINES[j % 6], color=COLOURS[j % 6], linewidth=1.2,
                label=rf"$\theta = {theta.real:.4g}{imaginary}$")
    ax.axhline(0, color=BLACK, linewidth=0.6)
    name = GREEK.get(profile.x_label, profile.x_label)
    ax.set(xlabel=f"{name} in units of $k$", ylabel=r"$\delta u$ (scaled to 1)")
    ax.legend(frameon=False, fontsize="small", loc="upper left", bbox_to_anchor=(1.0, 1.0))
    return ax


def draw_growth(growth: Growth, ax: Axes | None = None) -> Axes:
    """Exponents in the order in which operators enter, against the canonical ones, with the fitted line."""
    ax = _axes(ax)
    x, y = -growth.canonical, -growth.entering
    ax.plot(x, y, "o", color=BLUE, markersize=4, label="exponents")
    ax.plot(x, growth.offset + growth.slope * x, "--", color=VERMILION, linewidth=1,
            label=f"slope {growth.slope:.2f}, offset {growth.offset:.2f}")
    ax.plot(x, x, ":", color=BLACK, linewidth=1, label="canonical")
    ax.set(xlabel=r"$-\theta$ canonical", ylabel=r"$-\mathrm{Re}\,\theta$ at the fixed point")
    ax.legend(frameon=False, fontsize="small")
    return ax


def _size(values: np.ndarray) -> float:
    return float(np.max(np.abs(values))) or 1.0


def _normalised(values: np.ndarray) -> np.ndarray:
    return values / _size(values)


def _whole_ticks(ax: Axes, which: str = "x") -> None:
    from matplotlib.ticker import MaxNLocator

    (ax.xaxis if which == "x" else ax.yaxis).set_major_locator(MaxNLocator(integer=True))


def exponents_figure(run: Run) -> Figure:
    """The main picture of a study. For a run without tracks, the landscape of what was found."""
    figure, ax = new_figure()
    if run.tracks:
        draw_exponents(run, ax)
    else:
        draw_landscape(run, ax)
    return figure


def shown_point(run: Run) -> FixedPoint | None:
    """The tracked fixed point at its last step, or the first physical one of a run without tracks."""
    if run.tracks:
        track = run.tracks[0]
        return run.steps[int(track.steps[-1])].fixed_points[int(track.points[-1])]
    physical = [p for s in run.steps for p in s.fixed_points if p.kind == "physical"]
    return physical[0] if physical else None


def all_figures(run: Run) -> list[tuple[str, Figure]]:
    """(name, figure) of every picture the run has the data for."""
    found: list[tuple[str, Figure]] = []

    def add(name: str, draw: Any, *records: Any) -> None:
        figure, ax = new_figure()
        draw(*records, ax)
        found.append((name, figure))

    verdict: Verdict | None = run.verdict
    if run.tracks:
        add("exponents", draw_exponents, run)
    if verdict is not None and run.tracks:
        add("relevant-count", draw_counts, run)
    if len(run.steps) > 1 and any(s.fixed_points for s in run.steps):
        add("landscape", draw_landscape, run)
    if verdict is not None and verdict.growth is not None:
        add("growth", draw_growth, verdict.growth)
    point = shown_point(run)
    if point is not None and point.profile is not None:
        add("potential", draw_potential, point)
        if len(point.profile.eigenfunctions):
            add("eigenfunctions", draw_eigenfunctions, point)
    return found


def save_plot(figure: Figure, path: Path | Any) -> None:
    """Write a figure as its ending says (.svg, .pdf, .png): text stays text, the same input gives the same bytes."""
    import logging

    import matplotlib

    # embedding fonts in a PDF warns of the time stamps inside the fonts themselves
    logging.getLogger("fontTools").setLevel(logging.ERROR)
    ending = Path(path).suffix.lower() if isinstance(path, str | Path) else ".svg"
    metadata = {".svg": {"Date": None}, ".pdf": {"CreationDate": None}, ".png": {}}[ending]
    with matplotlib.rc_context({"svg.fonttype": "none", "svg.hashsalt": "frg", "pdf.fonttype": 42}):
        figure.savefig(path, format=ending[1:], metadata=metadata, dpi=150)
