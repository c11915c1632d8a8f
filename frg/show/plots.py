"""Pictures of records, fit for a paper: vector output, labelled axes, told apart by shape as well as by colour.

Palette: M. Okabe, K. Ito, Color Universal Design (2008), safe for the common kinds of colour blindness.
"""

from __future__ import annotations

import logging
import os
from collections.abc import Callable, Iterator
from contextlib import contextmanager
from pathlib import Path
from typing import IO, TYPE_CHECKING, Any

import numpy as np

from frg.errors import InputError, Place
from frg.records import FixedPoint, Growth, Profile, Run, Track

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
TALL = (4.6, 4.4)  # two panels over one coordinate
ALWAYS_SHOWN = 4  # exponents drawn even where fewer are relevant
FAR_OFF = 15  # beyond this multiple of the median a linear axis would flatten everything else
KINDS = {"physical": ("o", BLUE), "spurious": ("x", BLACK), "gaussian": ("+", GREEN)}
UNDATED: dict[str, dict[str, Any]] = {".svg": {"Date": None}, ".pdf": {"CreationDate": None}, ".png": {}}
CURVATURE = "R"  # the coordinate of functions of the curvature scalar
GREEK = {"rho": r"$\rho$", "tau": r"$\tau$", "phi": r"$\phi$", "R": r"$R$"}


def new_figure() -> tuple[Figure, Axes]:
    """A figure with one panel, without any global state of the plotting library."""
    figure = _figure(COLUMN)
    return figure, figure.add_subplot()


def new_panels() -> tuple[Figure, Axes, Axes]:
    """A figure with two panels above each other that share their horizontal axis."""
    figure = _figure(TALL)
    above, below = figure.subplots(2, 1, sharex=True)
    return figure, above, below


def _figure(size: tuple[float, float]) -> Figure:
    from matplotlib.backends.backend_agg import FigureCanvasAgg
    from matplotlib.figure import Figure

    figure = Figure(figsize=size, layout="constrained")
    FigureCanvasAgg(figure)
    return figure


def _axes(ax: Axes | None) -> Axes:
    return new_figure()[1] if ax is None else ax


def orders_of(run: Run, track: Track) -> np.ndarray:
    """(k,) values of the order symbol along a track."""
    return np.array([next(iter(run.steps[int(s)].order.values()), int(s)) for s in track.steps])


def order_label(run: Run) -> str:
    name = next((k for s in run.steps for k in s.order), None)
    return "step" if name is None else f"order {plain(name)}"


def plain(text: str) -> str:
    """A name from a file as literal text: its dollar signs do not start formulas."""
    return text.replace("$", r"\$")


def _coordinate(label: str) -> str:
    unit = "k^2" if label == CURVATURE else "k"
    return f"{GREEK.get(label, plain(label))} in units of ${unit}$"


def _function(label: str) -> tuple[str, str]:
    """(what the function over this coordinate is called, its letter)."""
    return ("function", "f") if label == CURVATURE else ("potential", "u")


def draw_exponents(run: Run, ax: Axes | None = None) -> Axes:
    """Real parts of the followed exponents against the order; to the right, at infinite order, the extrapolated
    values with their errors, which are also drawn as bands."""
    ax = _axes(ax)
    track, verdict = run.tracks[0], run.verdict
    orders = orders_of(run, track)
    shown = _shown_exponents(run, track)
    infinity = float(orders[-1]) + max(1.0, 0.12 * float(orders[-1] - orders[0]))
    limits: list[float] = []
    for j in range(shown):
        style: Any = {"color": COLOURS[j], "marker": MARKERS[j]}
        ax.plot(orders, track.theta[:, j].real, markersize=3.5, linewidth=1, linestyle=LINES[j],
                label=rf"$\theta_{{{j + 1}}}$", **style)
        e = verdict.exponents[j] if verdict is not None and j < len(verdict.exponents) else None
        if e is not None and np.isfinite(e.error) and np.isfinite(e.value.real):
            limits.append(e.value.real)
            ax.axhspan(e.value.real - e.error, e.value.real + e.error, color=COLOURS[j], alpha=0.15, linewidth=0)
            ax.errorbar(infinity, e.value.real, yerr=e.error, markersize=4.5, markerfacecolor="white", capsize=2.5,
                        elinewidth=1, linestyle="none", **style)
    # the first orders of an expansion can lie far off; the later half sets the scale
    settled = track.theta[len(orders) // 2 :, :shown].real
    values = np.array([*settled[np.isfinite(settled)], *limits])
    if len(values):
        low, high = min(float(values.min()), 0.0), max(float(values.max()), 0.0)
        margin = 0.15 * max(high - low, 1.0)
        ax.set_ylim(low - margin, high + margin)
    ax.axhline(0, color=BLACK, linewidth=0.6)
    ax.set(xlabel=order_label(run), ylabel=r"critical exponent $\mathrm{Re}\,\theta_i$")
    if shown:
        ax.legend(loc="upper left", bbox_to_anchor=(1.0, 1.0), frameon=False)
    _whole_ticks(ax)
    if limits:
        _infinite_tick(ax, orders, infinity)
    return ax


def _shown_exponents(run: Run, track: Track) -> int:
    """The relevant ones and the first irrelevant one, as far as there are styles, and no fewer than a few."""
    relevant = run.verdict.relevant if run.verdict is not None else None
    return min(len(COLOURS), track.theta.shape[1], max(ALWAYS_SHOWN, (relevant or 0) + 1))


def _infinite_tick(ax: Axes, orders: np.ndarray, position: float) -> None:
    from matplotlib.ticker import MaxNLocator

    first, last = float(orders[0]), float(orders[-1])
    ticks = [t for t in MaxNLocator(integer=True, nbins=6).tick_values(first, last) if first <= t <= last]
    ax.set_xticks([*ticks, position], [*(f"{t:g}" for t in ticks), r"$\infty$"])
    ax.axvline((last + position) / 2, color=BLACK, linewidth=0.5, linestyle=":")


def draw_counts(run: Run, ax: Axes | None = None) -> Axes:
    """The number of relevant directions against the order."""
    ax = _axes(ax)
    if run.verdict is None:
        raise ValueError("a run without a verdict has no counts to draw")
    counts = np.array(run.verdict.counts[: len(run.steps)], dtype=float)
    orders = np.array([next(iter(s.order.values()), i) for i, s in enumerate(run.steps[: len(counts)])])
    found = counts >= 0
    ax.step(orders[found], counts[found], where="mid", color=BLUE, linewidth=1)
    ax.plot(orders[found], counts[found], "o", color=BLUE, markersize=4, label="tracked fixed point")
    if (~found).any():
        ax.plot(orders[~found], np.zeros((~found).sum()), "x", color=VERMILION, label="not found")
        ax.legend(frameon=False)
    top = float(counts.max(initial=1))
    ax.set(xlabel=order_label(run), ylabel="relevant directions", ylim=(-0.2, top + 1))
    _whole_ticks(ax)
    _whole_ticks(ax, "y")
    return ax


def draw_landscape(run: Run, ax: Axes | None = None) -> Axes:
    """Every fixed point found at every order by its leading exponent; the tracked one is highlighted."""
    return _landscape(run, _axes(ax), lambda p: float(p.theta[0].real) if len(p.theta) else np.nan,
                      r"leading exponent $\mathrm{Re}\,\theta_1$")


def draw_first_coupling(run: Run, ax: Axes | None = None) -> Axes:
    """Every fixed point found at every order by its first coupling; the tracked one is highlighted."""
    name = next((p.names[0] for s in run.steps for p in s.fixed_points if p.names), "first")
    return _landscape(run, _axes(ax), lambda p: float(p.couplings[0]) if len(p.couplings) else np.nan,
                      f"coupling {plain(name)}")


def _landscape(run: Run, ax: Axes, value: Callable[[FixedPoint], float], label: str) -> Axes:
    heights: list[float] = []
    for kind, (marker, colour) in KINDS.items():
        rows = [
            (next(iter(s.order.values()), i), value(p))
            for i, s in enumerate(run.steps) for p in s.fixed_points if p.kind == kind
        ]
        rows = [row for row in rows if np.isfinite(row[1])]
        if rows:
            x, y = zip(*rows, strict=True)
            heights += y
            ax.plot(x, y, linestyle="none", marker=marker, markersize=4.5, markeredgewidth=1, label=kind,
                    markerfacecolor="none", markeredgecolor=colour)
    if run.tracks and len(run.tracks[0].steps):
        track = run.tracks[0]
        followed = [value(run.steps[int(s)].fixed_points[int(p)])
                    for s, p in zip(track.steps, track.points, strict=True)]
        # large and open, below the others: what kind of fixed point is followed stays visible inside
        ax.plot(orders_of(run, track), followed, "-D", color=VERMILION, markersize=8, markerfacecolor="none",
                linewidth=1.2, label="tracked", zorder=1.5)
    size = np.abs(np.array(heights))
    typical = float(np.median(size)) if len(size) else 0.0
    if typical > 0 and size.max() > FAR_OFF * typical:
        ax.set_yscale("symlog", linthresh=4 * typical)
    ax.set(xlabel=order_label(run), ylabel=label)
    if heights:
        ax.legend(loc="upper left", bbox_to_anchor=(1.0, 1.0), frameon=False)
    _whole_ticks(ax)
    return ax


def draw_potential(point: FixedPoint, ax: Axes | None = None) -> Axes:
    """The fixed-point potential over its coordinate, up to a constant; both dimensionless."""
    ax = _axes(ax)
    profile = _profile(point)
    start = profile.potential[0] if len(profile.potential) else 0.0
    ax.plot(profile.x, profile.potential - start, LINES[0], color=BLUE, linewidth=1.3)
    ax.axhline(0, color=BLACK, linewidth=0.6)
    first = f"{profile.x[0]:g}" if len(profile.x) else "0"
    what, u = _function(profile.x_label)
    ax.set(xlabel=_coordinate(profile.x_label), ylabel=rf"{what} ${u} - {u}({first})$")
    ax.ticklabel_format(axis="y", scilimits=(-2, 3), useMathText=True)
    return ax


def draw_slope(point: FixedPoint, ax: Axes | None = None) -> Axes:
    """The first derivative of the fixed-point potential over its coordinate; both dimensionless."""
    ax = _axes(ax)
    profile = _profile(point)
    ax.plot(profile.x, profile.slope, linestyle=LINES[1], color=VERMILION, linewidth=1.3)
    ax.axhline(0, color=BLACK, linewidth=0.6)
    # written out: with text kept as text, the prime of the formula font shows as a zero elsewhere
    name = GREEK.get(profile.x_label, plain(profile.x_label))
    _, u = _function(profile.x_label)
    ax.set(xlabel=_coordinate(profile.x_label), ylabel=rf"slope $\mathrm{{d}}{u}/\mathrm{{d}}${name}")
    ax.ticklabel_format(axis="y", scilimits=(-2, 3), useMathText=True)
    return ax


def _profile(point: FixedPoint) -> Profile:
    """The curves of a point. Raises ValueError where there are none."""
    if point.profile is None:
        raise ValueError(f"fixed point {point.label} has no curves to draw: its flow has no function of one coordinate")
    return point.profile


def draw_eigenfunctions(point: FixedPoint, ax: Axes | None = None) -> Axes:
    """Leading eigenperturbations of the potential, each scaled to 1."""
    ax = _axes(ax)
    profile = _profile(point)
    for j, values in enumerate(profile.eigenfunctions[: len(point.theta)]):
        theta = point.theta[j]
        imaginary = rf"\pm{abs(theta.imag):.3g}i" if abs(theta.imag) > 1e-9 else ""
        ax.plot(profile.x, values, linestyle=LINES[j % 6], color=COLOURS[j % 6], linewidth=1.2,
                label=rf"$\theta_{{{j + 1}}} = {theta.real:.4g}{imaginary}$")
    ax.axhline(0, color=BLACK, linewidth=0.6)
    ax.set(xlabel=_coordinate(profile.x_label), ylabel=rf"eigenfunction $\delta {_function(profile.x_label)[1]}$ (scaled to 1)")
    ax.legend(frameon=False, fontsize="small", loc="upper left", bbox_to_anchor=(1.0, 1.0))
    return ax


def draw_growth(growth: Growth, ax: Axes | None = None) -> Axes:
    """Exponents in the order in which operators enter, against the canonical ones, with the fitted line
    -Re theta = offset + slope * (-theta_canonical) and the canonical line for comparison."""
    ax = _axes(ax)
    x, y = -growth.canonical, -growth.entering
    ends = np.array([x.min(), x.max()]) if len(x) else np.zeros(0)
    ax.locator_params(axis="x", nbins=6)
    ax.plot(x, y, "o", color=BLUE, markersize=4.5, label="at the fixed point")
    ax.plot(ends, growth.offset + growth.slope * ends, "--", color=VERMILION, linewidth=1.2,
            label=f"fit: slope {growth.slope:.2f}, offset {growth.offset:.2f}, scatter {growth.scatter:.2g}")
    ax.plot(ends, ends, ":", color=BLACK, linewidth=1.2, label="canonical")
    ax.set(xlabel=r"canonical $-\theta$ of the entering operator", ylabel=r"$-\mathrm{Re}\,\theta$")
    ax.legend(frameon=False, fontsize="small", loc="lower left", bbox_to_anchor=(0.0, 1.0), borderaxespad=0.2)
    return ax


def _whole_ticks(ax: Axes, which: str = "x") -> None:
    from matplotlib.ticker import MaxNLocator

    (ax.xaxis if which == "x" else ax.yaxis).set_major_locator(MaxNLocator(integer=True))


def exponents_figure(run: Run) -> Figure:
    """The main picture of a study. For a run without tracks, the landscape of what was found."""
    figure, ax = new_figure()
    if _followed(run):
        draw_exponents(run, ax)
    else:
        draw_landscape(run, ax)
    return figure


def landscape_figure(run: Run) -> Figure:
    """All that was found, by leading exponent and by first coupling."""
    figure, above, below = new_panels()
    draw_landscape(run, above).set_xlabel("")
    draw_first_coupling(run, below)
    figure.align_ylabels()
    legend = below.get_legend()
    if legend is not None:
        legend.remove()  # the same as above
    return figure


def potential_figure(point: FixedPoint) -> Figure:
    """Potential and slope of a fixed point. Raises ValueError where it has no curves."""
    figure, above, below = new_panels()
    draw_potential(point, above).set_xlabel("")
    draw_slope(point, below).locator_params(axis="x", nbins=6)
    figure.align_ylabels()
    return figure


def _followed(run: Run) -> bool:
    return bool(run.tracks) and len(run.tracks[0].steps) > 0


def shown_point(run: Run) -> FixedPoint | None:
    """The tracked fixed point at its last step, or the first physical one of a run without tracks."""
    if _followed(run):
        track = run.tracks[0]
        return run.steps[int(track.steps[-1])].fixed_points[int(track.points[-1])]
    physical = [p for s in run.steps for p in s.fixed_points if p.kind == "physical"]
    return physical[0] if physical else None


def all_figures(run: Run) -> list[tuple[str, Figure]]:
    """(name, figure) of every picture the run has the data for."""
    found: list[tuple[str, Figure]] = []

    def add(name: str, draw: Callable[[Any, Axes], Axes], record: Any) -> None:
        figure, ax = new_figure()
        draw(record, ax)
        found.append((name, figure))

    verdict = run.verdict
    if _followed(run):
        add("exponents", draw_exponents, run)
        if verdict is not None:
            add("relevant-count", draw_counts, run)
    if len(run.steps) > 1 and any(s.fixed_points for s in run.steps):
        found.append(("landscape", landscape_figure(run)))
    point = shown_point(run)
    if point is not None and point.profile is not None and len(point.profile.x):
        found.append(("potential", potential_figure(point)))
        if len(point.profile.eigenfunctions) and len(point.theta):
            add("eigenfunctions", draw_eigenfunctions, point)
    if verdict is not None and verdict.growth is not None:
        add("growth", draw_growth, verdict.growth)
    return found


def save_plot(figure: Figure, path: str | os.PathLike[str] | IO[str]) -> None:
    """Write a figure as its ending says (.svg, .pdf, .png), an open text file as SVG. Text stays text, and the same
    figure gives the same bytes. Raises InputError for another ending, OSError where it cannot be written."""
    import matplotlib

    ending = Path(path).suffix.lower() if isinstance(path, str | os.PathLike) else ".svg"
    if ending not in UNDATED:
        raise InputError(
            f"pictures cannot be written as {ending or 'a file without ending'}",
            remedy="end the name in .svg, .pdf or .png", place=Place(text=str(path)),
        )
    rules: Any = {"svg.fonttype": "none", "svg.hashsalt": "frg", "pdf.fonttype": 42}
    with matplotlib.rc_context(rules), _quiet_fonts():
        figure.savefig(path, format=ending[1:], metadata=UNDATED[ending], dpi=150)


@contextmanager
def _quiet_fonts() -> Iterator[None]:
    """Embedding fonts in a PDF warns of the time stamps inside the fonts themselves; not here."""
    logger = logging.getLogger("fontTools")
    level = logger.level
    logger.setLevel(logging.ERROR)
    try:
        yield
    finally:
        logger.setLevel(level)
