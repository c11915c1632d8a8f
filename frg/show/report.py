"""One self-contained HTML page of a run: opens offline, pictures inside, nothing fetched, no scripts."""

from __future__ import annotations

import html
import io
import json
import os
import re
import tempfile
from importlib import resources
from itertools import zip_longest
from pathlib import Path
from typing import Any

from frg.records import FixedPoint, Run, Step
from frg.show.equations import equation_rows
from frg.show.plots import all_figures, save_plot, shown_point
from frg.show.tables import exponent_lines, point_lines, study_rows, track_line

COUPLINGS = "   couplings  "  # how the summary of a fixed point begins the line of its couplings
CAPTIONS = {
    "exponents": "Followed exponents against the order; open signs and bands at infinite order are extrapolated values "
                 "with their errors.",
    "relevant-count": "Number of relevant directions of the tracked fixed point against the order.",
    "landscape": "All fixed points found at every order by leading exponent and first coupling; diamonds: the "
                 "tracked one.",
    "growth": "Exponents in the order in which operators enter, against their canonical values, and the fitted line.",
    "potential": "Potential and slope at fixed point {point}.",
    "eigenfunctions": "Leading eigenfunctions of the potential at fixed point {point}.",
}


def render_report(run: Run) -> str:
    """The page as text. Everything that comes from the run is escaped."""
    from jinja2 import Environment

    environment = Environment(autoescape=True, trim_blocks=True, lstrip_blocks=True)
    template = environment.from_string(
        resources.files("frg.show").joinpath("report.html").read_text(encoding="utf-8")
    )
    inputs = run.inputs
    return template.render(
        run=run,
        regulator=_regulator(run),
        parameters=", ".join(f"{k} = {v}" for k, v in inputs.parameters.items()),
        exponents=exponent_lines(run.verdict) if run.verdict else [],
        rows=study_rows(run) if run.tracks or len(run.steps) > 1 else [],
        pictures=_pictures(run),
        equations=_equations(run),
        steps=[{"title": _step_title(s), "text": _step_text(s)} for s in run.steps],
        tracks=[track_line(run, t) + "".join(f"; {n}" for n in t.notes) for t in run.tracks if len(t.steps)],
        rule=run.tracks[0].rule if run.tracks else "",
        cautioned=run.verdict is not None and any("not proof" in r for r in run.verdict.reasons),
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


def _pictures(run: Run) -> list[dict[str, str]]:
    point = shown_point(run)
    label = "" if point is None else point.label + (" (the tracked one, at the last order)" if run.tracks else "")
    pictures = []
    for name, figure in all_figures(run):
        caption = CAPTIONS[name].replace("{point}", label)
        buffer = io.StringIO()
        save_plot(figure, buffer)
        text = buffer.getvalue()
        pictures.append({"svg": _inline(text[text.index("<svg") :], name, caption), "caption": caption})
    return pictures


def _inline(svg: str, prefix: str, label: str | None = None) -> str:
    """A picture as part of a page: without its metadata, with names that no other picture on the page has, and with
    `label` read out in its place (None hides it from readers aloud)."""
    text = re.sub(r"<metadata>.*?</metadata>\s*", "", svg, flags=re.DOTALL)
    text = re.sub(r'((?:\sid="|href="#|url\(#))', lambda m: f"{m.group(1)}{prefix}-", text)
    role = 'aria-hidden="true"' if label is None else f'role="img" aria-label="{html.escape(label)}"'
    return text.replace("<svg ", f"<svg {role} ", 1)


def _equations(run: Run) -> list[dict[str, Any]]:
    """One entry an equation: its rows as pictures, or none where it stays text."""
    entries = []
    lines = zip_longest(run.inputs.latex.splitlines(), run.inputs.equations.splitlines(), fillvalue="")
    for i, (latex, plain) in enumerate(lines):
        rows = equation_rows(latex) if latex.strip() else None
        pictures = [_inline(row, f"equation-{i}-{j}") for j, row in enumerate(rows or [])]
        if latex.strip() or plain.strip():
            entries.append({"rows": pictures, "text": plain or latex})
    return entries


def _step_title(step: Step) -> str:
    order = ", ".join(f"{k} = {v}" for k, v in step.order.items()) or "the only step"
    count = len(step.fixed_points)
    return f"{order}: {step.outcome.word}, {count} fixed point{'' if count == 1 else 's'}, {step.seconds:.2g} s"


def _step_text(step: Step) -> str:
    lines = [line for p in step.fixed_points for line in (*_full_lines(p), "")]
    if not step.fixed_points:
        lines.append(step.outcome.value)
    if step.search:
        lines.append("search: " + ", ".join(f"{v} {k}" for k, v in step.search.items()))
    lines += [f"note: {n}" for n in step.notes]
    return "\n".join(lines)


def _full_lines(point: FixedPoint) -> list[str]:
    """The summary of a point, with every coupling where the terminal leaves some out."""
    couplings = ", ".join(f"{n} = {c:.10g}" for n, c in zip(point.names, point.couplings, strict=True))
    return [COUPLINGS + couplings if line.startswith(COUPLINGS) else line for line in point_lines(point)]


def _regulator(run: Run) -> str:
    values = ", ".join(f"{k} = {v:g}" for k, v in run.inputs.regulator_parameters.items())
    return run.inputs.regulator + (f" ({values})" if values else "")


def _provenance(run: Run) -> list[tuple[str, str]]:
    packages = ", ".join(f"{k} {v}" for k, v in run.packages.items())
    return [
        ("regulator", _regulator(run)),
        ("parameters", ", ".join(f"{k} = {v}" for k, v in run.inputs.parameters.items()) or "none"),
        ("command", run.command), ("created", run.created_utc), ("frg", run.frg_version), ("with", packages),
        ("signature", run.inputs.signature),
    ]
