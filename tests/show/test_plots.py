"""Pictures show the numbers of the records, can be told apart without colour, and are the same bytes every time."""

from __future__ import annotations

import re
import subprocess
import sys
from dataclasses import replace
from pathlib import Path

import numpy as np
import pytest
from fakes import ORDERS, interrupted, point, profile, rootless, solved, study, verdict

from frg.errors import InputError
from frg.show import plots


def lines_by_label(ax):
    return {line.get_label(): line for line in ax.get_lines()}


def test_a_full_study_has_all_pictures_and_others_what_they_have_data_for():
    full = [name for name, _ in plots.all_figures(study())]
    assert full == ["exponents", "relevant-count", "landscape", "potential", "eigenfunctions", "growth"]
    assert [name for name, _ in plots.all_figures(interrupted())] == ["landscape", "potential", "eigenfunctions"]
    assert [name for name, _ in plots.all_figures(solved())] == ["potential", "eigenfunctions"]
    assert plots.all_figures(rootless()) == []
    assert plots.all_figures(replace(study(), steps=(), tracks=(), verdict=None)) == []


def test_exponents_are_those_of_the_track_and_the_verdict():
    ax = plots.draw_exponents(study())
    track = study().tracks[0]
    for j in range(4):
        line = lines_by_label(ax)[rf"$\theta_{{{j + 1}}}$"]
        np.testing.assert_array_equal(line.get_xdata(), ORDERS)
        np.testing.assert_array_equal(line.get_ydata(), track.theta[:, j].real)
    bars = [c for c in ax.containers if c.lines]
    assert [float(c.lines[0].get_ydata()[0]) for c in bars] == [1.53, -0.61]
    ends = [[float(s[1]) for s in c.lines[2][0].get_segments()[0]] for c in bars]
    np.testing.assert_allclose(ends, [[1.51, 1.55], [-0.66, -0.56]])
    assert ax.get_xticklabels()[-1].get_text() == r"$\infty$"
    assert ax.get_xlabel() == "order n"


def test_relevant_exponents_are_never_left_out_of_the_picture():
    run = study()
    many = replace(run, verdict=replace(verdict(), relevant=4))
    assert r"$\theta_{5}$" in lines_by_label(plots.draw_exponents(many))
    assert r"$\theta_{5}$" not in lines_by_label(plots.draw_exponents(run))


def test_counts_and_orders_at_which_nothing_was_found():
    run = replace(study(), verdict=replace(verdict(), counts=(2, -1, 1, 1)))
    lines = lines_by_label(plots.draw_counts(run))
    np.testing.assert_array_equal(lines["tracked fixed point"].get_xdata(), [2, 4, 5])
    np.testing.assert_array_equal(lines["tracked fixed point"].get_ydata(), [2, 1, 1])
    np.testing.assert_array_equal(lines["not found"].get_xdata(), [3])
    with pytest.raises(ValueError, match="no counts"):
        plots.draw_counts(interrupted())


@pytest.mark.parametrize(("draw", "heights"), [
    (plots.draw_landscape, {"physical": [1.5 + 0.1 / n for n in ORDERS], "gaussian": [2.0] * 4,
                            "spurious": [4.0 + n for n in ORDERS]}),
    (plots.draw_first_coupling, {"physical": [0.1 + 0.001 * n for n in ORDERS], "gaussian": [0.0] * 4,
                                 "spurious": [-0.3] * 4}),
])
def test_landscape_holds_every_fixed_point_by_kind_and_the_tracked_one(draw, heights):
    lines = lines_by_label(draw(study()))
    for kind, values in heights.items():
        np.testing.assert_array_equal(lines[kind].get_xdata(), ORDERS)
        np.testing.assert_allclose(lines[kind].get_ydata(), values)
    np.testing.assert_allclose(lines["tracked"].get_ydata(), heights["physical"])
    markers = [line.get_marker() for line in lines.values()]
    assert len(set(markers)) == len(markers) == 4
    assert lines["tracked"].get_linestyle() == "-"
    assert "tracked" not in lines_by_label(draw(interrupted()))


def test_potential_slope_and_eigenfunctions_are_the_profile():
    p = point("A", "physical", 0.1, [1.5, -0.6 + 0.2j], curves=profile())
    curves = profile()
    np.testing.assert_allclose(plots.draw_potential(p).get_lines()[0].get_ydata(), curves.potential - curves.potential[0])
    np.testing.assert_allclose(plots.draw_slope(p).get_lines()[0].get_ydata(), curves.slope)
    drawn = plots.draw_eigenfunctions(p)
    for line, values in zip(drawn.get_lines()[:2], curves.eigenfunctions, strict=True):
        np.testing.assert_array_equal(line.get_xdata(), curves.x)
        np.testing.assert_array_equal(line.get_ydata(), values)
    assert r"\pm0.2i" in drawn.get_lines()[1].get_label()
    assert "in units of $k$" in drawn.get_xlabel()
    for draw in (plots.draw_potential, plots.draw_slope, plots.draw_eigenfunctions):
        with pytest.raises(ValueError, match="no curves"):
            draw(replace(p, profile=None))


def test_growth_shows_the_data_and_the_fitted_line():
    lines = plots.draw_growth(verdict().growth).get_lines()
    np.testing.assert_array_equal(lines[0].get_xdata(), [-2.0, -1.0, 0.0])
    np.testing.assert_array_equal(lines[0].get_ydata(), [-1.5, 0.6, 2.6])
    np.testing.assert_allclose(lines[1].get_ydata(), [2.62 - 2 * 2.05, 2.62])  # offset + slope * (-canonical) at the ends
    assert "slope 2.05, offset 2.62" in lines[1].get_label()


def test_axes_given_are_used():
    _, ax = plots.new_figure()
    assert plots.draw_exponents(study(), ax) is ax
    assert plots.draw_growth(verdict().growth, ax) is ax


def test_styles_differ_without_colour_and_colours_are_the_published_ones():
    assert len(set(plots.MARKERS)) == len(set(plots.LINES)) == len(set(plots.COLOURS)) == 6
    # M. Okabe, K. Ito, Color Universal Design (2008): blue, vermilion, bluish green, orange, reddish purple, sky blue as RGB
    published = [(0, 114, 178), (213, 94, 0), (0, 158, 115), (230, 159, 0), (204, 121, 167), (86, 180, 233)]
    assert [tuple(bytes.fromhex(c[1:])) for c in plots.COLOURS] == published


@pytest.mark.parametrize("ending", ["svg", "pdf", "png"])
def test_the_same_run_gives_the_same_bytes(tmp_path: Path, ending: str):
    first, second = tmp_path / f"a.{ending}", tmp_path / f"b.{ending}"
    for target in (first, second):
        plots.save_plot(plots.exponents_figure(study()), target)
    assert first.read_bytes() == second.read_bytes()
    assert len(first.read_bytes()) > 1000


def test_svg_keeps_text_as_text_and_carries_no_date(tmp_path: Path):
    target = tmp_path / "a.svg"
    plots.save_plot(plots.exponents_figure(study()), target)
    text = target.read_text(encoding="utf-8")
    assert re.search(r"<text[^>]*>order n</text>", text)
    assert "<dc:date>" not in text


@pytest.mark.parametrize("name", ["a.jpg", "picture"])
def test_an_unknown_ending_is_refused_with_advice(tmp_path: Path, name: str):
    with pytest.raises(InputError, match=r"\.svg, \.pdf or \.png"):
        plots.save_plot(plots.exponents_figure(study()), tmp_path / name)
    assert not (tmp_path / name).exists()


def test_names_from_a_file_are_literal_text(tmp_path: Path):
    run = study()
    name = r"$\frac{$ <b>"
    curves = profile(name)
    steps = tuple(
        replace(s, order={name: i}, fixed_points=tuple(
            replace(p, names=(name, *p.names[1:]), profile=curves if p.profile else None) for p in s.fixed_points))
        for i, s in enumerate(run.steps)
    )
    for label, figure in plots.all_figures(replace(run, steps=steps)):
        target = tmp_path / f"{label}.svg"
        plots.save_plot(figure, target)
        assert "<b>" not in target.read_text(encoding="utf-8")
    assert "&lt;b&gt;" in (tmp_path / "landscape.svg").read_text(encoding="utf-8")


def test_importing_is_free_and_drawing_needs_no_window_system():
    code = (
        "import sys; import frg.show.plots, frg.show.report, frg.show.equations\n"
        "assert not {'matplotlib', 'jinja2', 'sympy', 'jax', 'h5py'} & set(sys.modules)\n"
        "from fakes import study; frg.show.plots.all_figures(study())\n"
        "assert 'matplotlib.pyplot' not in sys.modules"
    )
    done = subprocess.run([sys.executable, "-c", code], capture_output=True, text=True,
                          env={"PYTHONPATH": ":".join(p for p in sys.path if p)}, check=False)
    assert done.returncode == 0, done.stderr
