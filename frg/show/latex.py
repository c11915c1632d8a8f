"""Tables for papers (LaTeX) and for other programs (CSV)."""

from __future__ import annotations

import csv
import io

from frg.records import Run
from frg.show.numbers import correlation_exponent, value_with_error
from frg.show.tables import leading, study_rows

SPECIAL = {
    "\\": r"\textbackslash{}", "&": r"\&", "%": r"\%", "$": r"\$", "#": r"\#", "_": r"\_", "{": r"\{", "}": r"\}",
    "~": r"\textasciitilde{}", "^": r"\textasciicircum{}",
}


def escape(text: str) -> str:
    """Text as it stands in LaTeX, the signs of exponents in math mode."""
    escaped = "".join(SPECIAL.get(c, c) for c in text)
    return escaped.replace("±", r"$\pm$").replace("…", r"\dots").replace("-", "$-$") if escaped != "-" else "--"


def study_table(run: Run) -> str:
    """The study as a plain tabular: order, relevant directions, nu, exponents, and the extrapolated values."""
    lines = [r"\begin{tabular}{rrrl}", r"\hline", r"order & relevant & $\nu$ & $\theta_1, \theta_2, \theta_3$ \\", r"\hline"]
    for order, _, relevant, nu, theta, _, _ in study_rows(run):
        lines.append(" & ".join(escape(x) for x in (order, relevant, nu, theta)) + r" \\")
    lines.append(r"\hline")
    verdict = run.verdict
    if verdict is not None and verdict.exponents:
        first = verdict.exponents[0]
        nu_value = correlation_exponent(complex(first.value))
        nu_text = value_with_error(nu_value, first.error * nu_value**2) if nu_value is not None else "-"
        theta_text = ", ".join(value_with_error(e.value, e.error) for e in leading(verdict.exponents, 3))
        count = "--" if verdict.relevant is None else str(verdict.relevant)
        lines.append(f"$\\infty$ & {count} & {escape(nu_text)} & {escape(theta_text)} \\\\")
        lines.append(r"\hline")
    return "\n".join([*lines, r"\end{tabular}"])


def study_csv(run: Run) -> str:
    """Every fixed point of every step, one line a number: couplings, exponents (those of odd perturbations apart), eta,
    landmarks."""
    buffer = io.StringIO()
    writer = csv.writer(buffer, lineterminator="\n")
    writer.writerow(["order", "label", "kind", "relevant", "marginal", "residual", "condition", "quantity", "name",
                     "real", "imaginary"])
    for step in run.steps:
        order = " ".join(f"{k}={v}" for k, v in step.order.items())
        for p in step.fixed_points:
            head = [order, p.label, p.kind, p.relevant, p.marginal, repr(float(p.residual)), repr(float(p.condition))]
            for name, value in zip(p.names, p.couplings, strict=True):
                writer.writerow([*head, "coupling", name, repr(float(value)), ""])
            for i, theta in enumerate(p.theta):
                writer.writerow([*head, "theta", f"theta_{i + 1}", repr(float(theta.real)), repr(float(theta.imag))])
            for i, theta in enumerate(p.theta_odd):
                writer.writerow([*head, "theta odd", f"theta_{i + 1}", repr(float(theta.real)), repr(float(theta.imag))])
            for quantity, values in (("eta", p.eta), ("landmark", p.landmarks)):
                for name, value in values.items():
                    writer.writerow([*head, quantity, name, repr(float(value)), ""])
    return buffer.getvalue().rstrip("\n")
