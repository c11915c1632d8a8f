"""The commands that compute: equations, solve, converge."""

from __future__ import annotations

import dataclasses
import json
import shlex
import sys
from collections.abc import Sequence
from datetime import UTC, datetime
from pathlib import Path
from typing import Any

from frg import __version__
from frg.cli.problem import Problem, package_versions, read_problem, run_inputs
from frg.cli.progress import progress
from frg.cli.settings import study_settings
from frg.errors import InputError, Outcome, Place, StoreError
from frg.records import Run, Step
from frg.solve.choose import make_search
from frg.solve.search import Warm, run_step
from frg.store.base import AbstractStore
from frg.study.convergence import ConvergenceStudy, StudySettings, convergence_study

DONE, FAILED, INTERRUPTED = 0, 1, 130
HIGHEST_POWER = 170  # 171! is beyond the largest 64-bit float


def run(options: Any, given: Sequence[str]) -> int:
    command = "frg " + shlex.join(given)
    problem = read_problem(options.file, options.overrides, options.regulator)
    if options.command == "equations":
        return _equations(options, problem)
    if options.command == "solve":
        return _solve(options, problem, command)
    return _converge(options, problem, command)


# ---- equations -------------------------------------------------------------------------------


def _equations(options: Any, problem: Problem) -> int:
    from frg.derive.printing import equations_latex, equations_text

    text, latex = equations_text(problem.equations), equations_latex(problem.equations)
    if options.json:
        inputs = run_inputs(problem, study_settings(thorough=False), (), "equations")
        body = _head("equations", None, inputs) | {
            "equations": text.splitlines(), "latex": latex.splitlines(), "notes": list(problem.equations.notes),
        }
        print(json.dumps(body))
        return DONE
    if options.latex:
        print(latex)
        return DONE
    print(f"{problem.truncation.title}\n")
    print(text)
    print(f"\nregulator: {shape_text(problem)}")
    for note in problem.equations.notes:
        print(f"note: {note}")
    return DONE


def shape_text(problem: Problem) -> str:
    """The regulator in words: its name, its shape, its parameters."""
    regulator = problem.regulator
    values = ", ".join(f"{k} = {v:g}" for k, v in regulator.parameters.items())
    if regulator.closed_form:
        return "sharp cutoff (threshold functions in closed form)"
    shape = str(regulator.shape()).replace("**", "^")
    edge = "" if not _finite(regulator.support) else f" for y < {regulator.support:g}, else 0"
    return f"{regulator.name}, s(y) = {shape}{edge}" + (f", {values}" if values else "")


def _finite(value: float) -> bool:
    return value != float("inf")


def _head(command: str, path: str | None, inputs: Any) -> dict[str, Any]:
    return {
        "frg": __version__, "command": command, "run": path, "signature": inputs.signature,
        "parameters": inputs.parameters,
        "regulator": {"name": inputs.regulator, "parameters": inputs.regulator_parameters},
    }


# ---- keeping ---------------------------------------------------------------------------------


def open_store(options: Any, inputs: Any, command: str) -> AbstractStore:
    """The store the options ask for: a new run file, or memory. Raises StoreError."""
    created = datetime.now(UTC).strftime("%Y-%m-%dT%H:%M:%SZ")
    facts = {"command": command, "created_utc": created, "frg_version": __version__}
    if options.no_save:
        from frg.store.memory import MemoryStore

        return MemoryStore.create(inputs, packages=package_versions(), **facts)
    from frg.store.hdf5 import HDF5Store
    from frg.store.naming import run_path

    path = Path(options.save) if options.save else Path("runs")
    if path.suffix != ".h5":
        path = run_path(path, inputs.title, inputs.signature, created)
    return HDF5Store.create(path, inputs, packages=package_versions(), **facts)


# ---- solve -----------------------------------------------------------------------------------


def _solve(options: Any, problem: Problem, command: str) -> int:
    settings = study_settings(thorough=options.all, single=True)
    order = _chosen_order(options.order, problem)
    orders = (order,) if order is not None else ()
    inputs = run_inputs(problem, settings, orders, "solve")
    loud = not (options.json or options.quiet)
    with open_store(options, inputs, command) as store:
        search = make_search(problem.equations, orders, settings.search)
        with progress("searching", total=None, visible=loud):
            step = run_step(search, problem.truncation.study.order, order, Warm())
        if not options.all:
            step = without_spurious(step)
        store.append_step(step)
        found = step.outcome is Outcome.FOUND
        store.set_results(tracks=(), verdict=None, status="complete" if found else "failed")
        finished = store.read()
    if options.json:
        _print_json(finished, "solve", store.location)
    elif loud:
        from frg.show import tables

        console = tables.console()
        tables.print_step(console, step, title=problem.truncation.title)
        _say_kept(store.location)
    return DONE if found else FAILED


def without_spurious(step: Step) -> Step:
    """The step with only Gaussian and physical points; how many were set aside is noted."""
    kept = tuple(p for p in step.fixed_points if p.kind != "spurious")
    dropped = len(step.fixed_points) - len(kept)
    if not dropped:
        return step
    note = f"{dropped} spurious root(s) set aside; --all lists them"
    outcome = step.outcome if kept else Outcome.NONE_FOUND
    return dataclasses.replace(step, fixed_points=kept, notes=(*step.notes, note), outcome=outcome)


def _chosen_order(asked: int | None, problem: Problem) -> int | None:
    study = problem.truncation.study
    if not _has_order(problem):
        if asked is not None:
            raise InputError(
                f"--order {asked}: this truncation has no order to choose", remedy="leave --order out",
                place=Place(source="--order", text=str(asked)),
            )
        return None
    order = asked if asked is not None else max(study.values, default=None)
    if order is None:
        raise InputError(
            f"no value for the order {study.order}", remedy="give --order N, or [study] values in the file",
            place=Place(source=problem.truncation.source),
        )
    check_orders((order,), problem)
    return order


def _has_order(problem: Problem) -> bool:
    import sympy

    symbol = sympy.Symbol(problem.truncation.study.order)
    orders = [getattr(item, "order", None) for item in problem.truncation.running]
    return any(o is not None and symbol in o.free_symbols for o in orders)


def check_orders(orders: Sequence[int], problem: Problem) -> None:
    """Every function keeps at least one coupling at every order, and factorials stay representable.
    Raises InputError."""
    for function in problem.truncation.functions:
        for order in orders:
            power = problem.truncation.order_of(function, order)
            if power is not None and power > HIGHEST_POWER:
                raise InputError(
                    f"order {order} keeps the power {power} of {function.name}: 64-bit floats cannot hold {power}!",
                    remedy=f"stay at powers up to {HIGHEST_POWER}, or solve the whole function on a grid",
                    place=Place(source=problem.truncation.source),
                )


# ---- converge --------------------------------------------------------------------------------


def _converge(options: Any, problem: Problem, command: str) -> int:
    settings = study_settings(thorough=options.all)
    orders = _chosen_orders(options.orders, problem)
    check_orders(orders, problem)
    study = convergence_study(problem.equations, orders, settings)
    inputs = run_inputs(problem, settings, orders, "converge")
    loud = not (options.json or options.quiet)
    with _converge_store(options, inputs, command) as store:
        if loud:
            _print_equations(problem)
        status = _advance(study, store, loud)
        finished = store.read()
    if options.json:
        _print_json(finished, "converge", store.location)
    elif loud:
        _show_study(finished, store.location, options)
    if status == "interrupted":
        if not options.json:
            print("frg: interrupted; what was committed is kept", file=sys.stderr)
        return INTERRUPTED
    return DONE if any(s.outcome is Outcome.FOUND for s in finished.steps) else FAILED


def _chosen_orders(text: str | None, problem: Problem) -> tuple[int, ...]:
    from frg.language.values import orders_from_text

    if not _has_order(problem):
        return ()
    if text is None:
        return problem.truncation.study.values
    return orders_from_text(text, place=Place(source="--orders", text=text))


def _converge_store(options: Any, inputs: Any, command: str) -> AbstractStore:
    if not options.resume:
        return open_store(options, inputs, command)
    from frg.store.hdf5 import open_for_resume
    from frg.store.naming import find_run

    return open_for_resume(find_run(options.resume, "runs"), inputs=inputs, frg_version=__version__)


def _advance(study: ConvergenceStudy, store: AbstractStore, loud: bool) -> str:
    """Compute and commit the steps that are missing, then tracks and verdict; returns the status."""
    done = store.read().steps
    name = study.equations.truncation.study.order
    try:
        with progress(f"orders in {name}", total=len(study.orders), visible=loud) as bar:
            bar.advance(len(done))
            for step in study.steps(done):
                store.append_step(step)
                bar.advance(1)
        steps = store.read().steps
        tracks, verdict = study.conclude(steps)
        found = any(s.outcome is Outcome.FOUND for s in steps)
        status = "complete" if found else "failed"
        store.set_results(tracks=tracks, verdict=verdict, status=status)
    except KeyboardInterrupt:
        status = "interrupted"
        try:
            store.set_results(tracks=(), verdict=None, status=status)
        except StoreError as error:
            print(f"frg: {error}", file=sys.stderr)
    return status


def _print_equations(problem: Problem) -> None:
    from frg.derive.printing import equations_text

    print(f"{problem.truncation.title}\n\n{equations_text(problem.equations)}\n\nregulator: {shape_text(problem)}")
    for note in problem.equations.notes:
        print(f"note: {note}")
    print(flush=True)


def _show_study(finished: Run, location: str | None, options: Any) -> None:
    from frg.show import tables

    console = tables.console()
    tables.print_run(console, finished)
    if location and not options.no_report and finished.status == "complete":
        write_pages(finished, Path(location))
    _say_kept(location)


def write_pages(finished: Run, path: Path) -> None:
    """The report and the main plot beside a run file. Raises StoreError where they cannot be written."""
    from frg.cli.shelf import write_beside

    for written in write_beside(finished, path):
        print(f"wrote {_relative(str(written))}")


def _say_kept(location: str | None) -> None:
    print(f"run kept in {_relative(location)}" if location else "nothing kept (--no-save)")


def _relative(location: str) -> str:
    try:
        return str(Path(location).relative_to(Path.cwd()))
    except ValueError:
        return location


def _print_json(finished: Run, command: str, location: str | None) -> None:
    from frg.show.jsonview import run_to_json

    print(json.dumps(run_to_json(finished, _relative(location) if location else None, command=command)))


__all__ = ["StudySettings", "check_orders", "run"]
