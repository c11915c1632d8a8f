"""One self-contained HTML page of a run: opens offline, pictures inside, nothing fetched, no scripts."""

from __future__ import annotations

import io
import json
import os
import tempfile
from importlib import resources
from pathlib import Path
from typing import Any

from frg.records import Run, Step
from frg.show.equations import equation_svg
from frg.show.plots import all_figures, save_plot
from frg.show.tables import exponent_lines, point_lines, study_rows, track_line

CAPTIONS = {
    "exponents": "Followed exponents against the order; bands are extrapolated values with their errors.",
    "relevant-count": "Number of relevant directions of the tracked fixed point against the order.",
    "landscape": "All fixed points found at every order by their leading exponent; the tracked one is highlighted.",
    "growth": "Exponents in the order in which operators enter, against their canonical values.",
    "potential": "Fixed-point potential and slope at the last order.",
    "eigenfunctions": "Leading eigenperturbations of the potential at the last order.",
}


def render_report(run: Run) -> str:
    """The page as text. Everything that comes from the run is escaped."""
    from jinja2 import Environment

    environment = Environment(autoescape=True, trim_blocks=True, lstrip_blocks=True)
    template = environment.from_string(
        resources.files("frg.show").joinpath("report.html").read_text(encoding="utf-8")
    )
    inputs = run.inputs
    values = ", ".join(f"{k} = {v:g}" for k, v in inputs.regulator_parameters.items())
    return template.render(
        run=run,
        regulator=inputs.regulator + (f" ({values})" if values else ""),
        parameters=", ".join(f"{k} = {v}" for k, v in inputs.parameters.items()),
        exponents=exponent_lines(run.verdict) if run.verdict else [],
        rows=study_rows(run) if run.tracks or len(run.steps) > 1 else [],
        pictures=[{"svg": _svg(figure), "caption": CAPTIONS[name]} for name, figure in all_figures(run)],
        equations=_equations(run),
        steps=[{"title": _step_title(s), "text": _step_text(s)} for s in run.steps],
        tracks=[track_line(run, t) + "".join(f"; {n}" for n in t.notes) for t in run.tracks],
        rule=run.tracks[0].rule if run.tracks else "",
        provenance=_provenance(run),
        settings=json.dumps(inputs.settings, indent=1, default=str),
    )


def write_report(run: Run, path: str | os.PathLike[str]) -> None:
    """Write the page, whole or not at all. Raises OSError where it cannot be written."""
    target = Path(path)
    text = render_report(run)
    target.parent.mkdir(parents=True, exist_ok=True)
    handle, name = tempfile.mkstemp(dir=target.parent, suffix=".tmp")
    try:
        with os.fdopen(handle, "w", encoding="utf-8") as file:
            file.write(text)
        os.chmod(name, 0o666 & ~_umask())
        os.replace(name, target)
    except BaseException:
        Path(name).unlink(missing_ok=True)
        raise


def _umask() -> int:
    """The permissions the user takes away from new files (reading it means setting it for a moment)."""
    current = os.umask(0o077)
    os.umask(current)
    return current


def _svg(figure: Any) -> str:
    buffer = io.StringIO()
    save_plot(figure, buffer)
    text = buffer.getvalue()
    return text[text.index("<svg") :]


def _equations(run: Run) -> list[dict[str, str | None]]:
    latex, plain = run.inputs.latex.splitlines(), run.inputs.equations.splitlines()
    padded = latex + [""] * (len(plain) - len(latex))
    return [
        {"svg": equation_svg(line) if line else None, "text": text} for line, text in zip(padded, plain, strict=False)
    ]


def _step_title(step: Step) -> str:
    order = ", ".join(f"{k} = {v}" for k, v in step.order.items()) or "the only step"
    return f"{order}: {step.outcome.word}, {len(step.fixed_points)} fixed point(s), {step.seconds:.2g} s"


def _step_text(step: Step) -> str:
    lines = [line for p in step.fixed_points for line in (*point_lines(p), "")]
    if not step.fixed_points:
        lines.append(step.outcome.value)
    lines.append("search: " + ", ".join(f"{v} {k}" for k, v in step.search.items()))
    lines += [f"note: {n}" for n in step.notes]
    return "\n".join(lines)


def _provenance(run: Run) -> list[tuple[str, str]]:
    packages = ", ".join(f"{k} {v}" for k, v in run.packages.items())
    return [
        ("command", run.command), ("created", run.created_utc), ("frg", run.frg_version), ("with", packages),
        ("signature", run.inputs.signature),
    ]
