"""The arguments of every command, with help that teaches."""

from __future__ import annotations

import argparse

from frg import __version__

DESCRIPTION = """\
Functional renormalisation group flows: fixed points, critical exponents, and whether the number of relevant
directions stays finite as the truncation grows. Write a truncation of the effective average action in a text
file; frg derives its flow, solves it order by order, judges it, and keeps every run."""

EPILOG = """\
examples:
  frg truncations                                      what is on the shelf
  frg equations ising_lpa.toml                         the derived flow
  frg converge ising_lpa.toml --orders 2..12           the convergence study, the main job
  frg solve ising_lpa_grid.toml --set d=2.5 --all      all global fixed points, multicritical ones included
  frg solve ising_lpa.toml --order 8 --regulator exponential:alpha=2
  frg show 2026                                        a stored run, by any unique part of its name

conventions: t = ln k; theta = -(eigenvalue of the stability matrix); relevant means Re theta > 0;
couplings are dimensionless, in units of the scale k.
exit codes: 0 done, 1 no fixed point found or study failed, 2 bad input, 130 interrupted (what was
committed is kept)."""


def build_parser() -> argparse.ArgumentParser:
    # no abbreviations: `converge --order 4` must not be read as --orders 4
    parser = argparse.ArgumentParser(
        prog="frg", allow_abbrev=False, description=DESCRIPTION, epilog=EPILOG,
        formatter_class=argparse.RawDescriptionHelpFormatter,
    )
    parser.add_argument("--version", action="version", version=f"frg {__version__}")
    commands = parser.add_subparsers(dest="command", metavar="COMMAND")
    _equations(commands)
    _solve(commands)
    _converge(commands)
    _stored(commands)
    shelf = _command(commands, "truncations", "the shelf of shipped truncations",
                     "Lists the truncation files that come with frg: a title, the approximation, and where they are.")
    shelf.add_argument("--json", action="store_true", help="print one JSON object on stdout and nothing else")
    return parser


def _command(commands, name: str, summary: str, description: str) -> argparse.ArgumentParser:  # type: ignore[no-untyped-def]
    return commands.add_parser(
        name, help=summary, description=description, allow_abbrev=False,
        formatter_class=argparse.RawDescriptionHelpFormatter,
    )


def _problem(parser: argparse.ArgumentParser) -> None:
    parser.add_argument("file", metavar="FILE", help="a truncation file (TOML), or the name of one on the shelf")
    parser.add_argument("--set", metavar="NAME=VALUE", action="append", default=[], dest="overrides",
                        help="override a parameter of the file, for example --set d=2.7; may be repeated")
    parser.add_argument("--regulator", metavar="SPEC",
                        help="another regulator: a name with parameters, for example exponential:alpha=2, or "
                             "'custom:a*exp(-y)*(1+b*y),a=1,b=0.1'")
    parser.add_argument("--json", action="store_true", help="print one JSON object on stdout and nothing else")


def _keeping(parser: argparse.ArgumentParser, *, resume: bool = False) -> None:
    where = parser.add_mutually_exclusive_group()
    where.add_argument("--save", metavar="PATH", help="run file (ending in .h5) or folder to keep the run in (default: runs/)")
    where.add_argument("--no-save", action="store_true", help="keep nothing")
    if resume:
        where.add_argument("--resume", metavar="RUN", help="go on with an interrupted run of the same inputs")
    parser.add_argument("--quiet", action="store_true", help="no progress, no tables; errors only")


def _equations(commands) -> None:  # type: ignore[no-untyped-def]
    parser = _command(commands, "equations", "the derived flow equations",
                      "Derives the flow of a truncation and prints it: primes are derivatives by the coordinate, "
                      "y = q^2/k^2,\ns(y) is the shape of the regulator, v_d = 1/(2^(d+1) pi^(d/2) Gamma(d/2)).")
    _problem(parser)
    parser.add_argument("--latex", action="store_true", help="as LaTeX, one equation a line")


def _solve(commands) -> None:  # type: ignore[no-untyped-def]
    parser = _command(commands, "solve", "fixed points and critical exponents at one order",
                      "Finds the fixed points at one order, re-measures their residuals and prints couplings and "
                      "exponents.")
    _problem(parser)
    parser.add_argument("--order", type=int, metavar="N", help="value of the order symbol (default: the largest in the file)")
    parser.add_argument("--all", action="store_true",
                        help="search harder, and list spurious roots too (outside the domain where regulated "
                             "propagators are positive)")
    _keeping(parser)


def _converge(commands) -> None:  # type: ignore[no-untyped-def]
    parser = _command(commands, "converge", "the convergence study across orders, the main job",
                      "Solves the truncation order by order (one compilation serves all), follows fixed points and "
                      "directions,\nand judges whether the number of relevant directions stays finite: supported, not "
                      "supported or undecided,\nwith reasons. Evidence, not proof.")
    _problem(parser)
    parser.add_argument("--orders", metavar="A..B",
                        help="orders to study, for example 2..12 or 2..20:2 (default: those of the file)")
    parser.add_argument("--all", action="store_true", help="search harder at every order")
    parser.add_argument("--no-report", action="store_true", help="do not write the HTML report and the plot beside the run")
    _keeping(parser, resume=True)


def _stored(commands) -> None:  # type: ignore[no-untyped-def]
    runs = _command(commands, "runs", "list stored runs", "Lists the runs of a folder, oldest first.")
    runs.add_argument("--folder", default="runs", help="the folder (default: runs/)")
    runs.add_argument("--json", action="store_true", help="print one JSON object on stdout and nothing else")
    show = _command(commands, "show", "print a stored run", "Prints the tables and the verdict of a stored run.")
    _run_argument(show)
    form = show.add_mutually_exclusive_group()
    form.add_argument("--step", type=int, metavar="I", help="the fixed points of one step, counted from 0")
    form.add_argument("--latex", action="store_true", help="the study table as LaTeX")
    form.add_argument("--csv", action="store_true", help="the study table as CSV")
    form.add_argument("--json", action="store_true", help="print one JSON object on stdout and nothing else")
    check = _command(commands, "check", "check a stored run",
                     "Checks that a run file is whole and consistent, then evaluates every stored fixed point afresh from "
                     "the stored\ntruncation text: residuals, exponents, counts.")
    _run_argument(check)
    check.add_argument("--json", action="store_true", help="print one JSON object on stdout and nothing else")
    report = _command(commands, "report", "write a self-contained HTML report of a run",
                      "Writes one HTML page (pictures inside, opens offline) and, with --plots, the pictures as files.")
    _run_argument(report)
    report.add_argument("--output", metavar="PATH", help="where to write it (default: beside the run file)")
    report.add_argument("--plots", metavar="FOLDER", help="also write every picture there, as SVG and PDF")
    report.add_argument("--json", action="store_true", help="print one JSON object on stdout and nothing else")


def _run_argument(parser: argparse.ArgumentParser) -> None:
    parser.add_argument("run", metavar="RUN", help="a run file, or a unique part of its name or signature")
    parser.add_argument("--folder", default="runs", help="where to look for it (default: runs/)")
