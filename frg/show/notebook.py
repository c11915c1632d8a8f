"""Rich display in notebooks, switched on by an explicit call."""

from __future__ import annotations

import html
from typing import Any

from frg.errors import FrgError
from frg.records import FixedPoint, Run, Step, Verdict
from frg.show.tables import COLUMNS, header_lines, point_lines, step_lines, study_rows, verdict_lines


def html_for(record: Run | Step | FixedPoint | Verdict) -> str:
    """The record as escaped HTML: a table for a run, words for the rest."""
    if isinstance(record, Run):
        about = _paragraph(header_lines(record))
        if len(record.steps) == 1 and record.verdict is None:
            return about + html_for(record.steps[0])
        head = "".join(f"<th>{html.escape(c)}</th>" for c in COLUMNS)
        body = "".join(
            "<tr>" + "".join(f"<td>{html.escape(x)}</td>" for x in row) + "</tr>" for row in study_rows(record)
        )
        words = _paragraph(verdict_lines(record.verdict)) if record.verdict is not None else ""
        return f"{about}<table><tr>{head}</tr>{body}</table>{words}"
    if isinstance(record, Verdict):
        return _paragraph(verdict_lines(record))
    if isinstance(record, Step):
        return _paragraph(step_lines(record, title="step"))
    return _paragraph(point_lines(record))


def _paragraph(lines: list[str]) -> str:
    return "<pre>" + html.escape("\n".join(lines)) + "</pre>"


def enable() -> None:
    """Register the records with the running notebook. Raises FrgError outside of one."""
    try:
        from IPython import get_ipython
    except ImportError:
        raise FrgError("there is no notebook to register with: IPython is not installed") from None
    shell: Any = get_ipython()
    if shell is None:
        raise FrgError("there is no notebook to register with: call enable() inside one")
    formatter = shell.display_formatter.formatters["text/html"]
    for kind in (Run, Step, FixedPoint, Verdict):
        formatter.for_type(kind, html_for)
