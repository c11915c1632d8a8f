"""The commands that only read: runs, show, check, report, truncations."""

from __future__ import annotations

import json
from pathlib import Path
from typing import Any

from frg import __version__
from frg.errors import InputError, StoreError
from frg.records import Run, counted

DONE, FAILED = 0, 1


def run(options: Any) -> int:
    commands = {
        "runs": _runs, "show": _show, "check": _check, "report": _report, "truncations": _truncations,
    }
    return commands[options.command](options)


def _runs(options: Any) -> int:
    from frg.show.numbers import harmless
    from frg.store.naming import list_runs

    found = list_runs(options.folder)
    if options.json:
        rows = [
            {"run": str(s.path), "status": s.status, "title": s.title, "created_utc": s.created_utc,
             "steps": s.step_count, "signature": s.signature, "frg": s.frg_version, "problem": s.problem}
            for s in found
        ]
        print(json.dumps({"frg": __version__, "command": "runs", "folder": options.folder, "runs": rows}))
        return DONE
    if not found:
        print(f"no runs in {options.folder}/")
        return DONE
    for s in found:
        detail = s.problem if s.problem else f"{counted(s.step_count, 'step')}  {harmless(s.title)}"
        print(f"{s.path.name}\n    {s.status:<12}{s.created_utc:<22}{detail}")
    return DONE


def _read(options: Any) -> tuple[Path, Run]:
    from frg.store.hdf5 import read_run
    from frg.store.naming import find_run

    path = find_run(options.run, options.folder)
    return path, read_run(path)


def _show(options: Any) -> int:
    path, stored = _read(options)
    if options.json:
        from frg.show.jsonview import run_to_json

        command = str(stored.inputs.settings.get("command", "converge"))
        print(json.dumps(run_to_json(stored, str(path), command=command)))
        return DONE
    if options.latex or options.csv:
        from frg.show import latex

        print(latex.study_table(stored) if options.latex else latex.study_csv(stored))
        return DONE
    from frg.show import tables

    console = tables.console()
    if options.step is not None:
        if not 0 <= options.step < len(stored.steps):
            raise InputError(
                f"--step {options.step}: the run has {counted(len(stored.steps), 'step')}",
                remedy=f"choose a step from 0 to {len(stored.steps) - 1}",
            )
        tables.print_step(console, stored.steps[options.step], title=stored.inputs.title)
        return DONE
    tables.print_run(console, stored)
    return DONE


def _check(options: Any) -> int:
    from frg.cli.recheck import recheck
    from frg.store.checking import check_run
    from frg.store.naming import find_run

    path = find_run(options.run, options.folder)
    report = check_run(path)
    checks = [(c.name, c.passed, c.detail) for c in report.checks]
    if report.run is not None:  # also where something failed already: recomputing tells which fixed point
        checks += recheck(report.run)
    sound = all(passed is not False for _, passed, _ in checks)
    if options.json:
        rows = [{"name": n, "passed": p, "detail": d} for n, p, d in checks]
        print(json.dumps({"frg": __version__, "command": "check", "run": str(path), "sound": sound, "checks": rows}))
    else:
        words = {True: "ok", False: "FAILED", None: "not checked"}
        for name, passed, detail in checks:
            print(f"{words[passed]:<12}{name}{': ' + detail if detail else ''}")
        print(f"{path.name}: {'sound' if sound else 'NOT sound'}")
    return DONE if sound else FAILED


def _report(options: Any) -> int:
    from frg.show.report import write_report

    path, stored = _read(options)
    target = Path(options.output) if options.output else path.with_suffix(".html")
    try:
        write_report(stored, target)
        written = [target, *(_write_plots(stored, Path(options.plots), path.stem) if options.plots else [])]
    except OSError as error:
        raise StoreError(f"{error.filename or target}: {error.strerror}", remedy="choose another place") from None
    if options.json:
        body = {"frg": __version__, "command": "report", "run": str(path), "wrote": [str(w) for w in written]}
        print(json.dumps(body))
    else:
        print("\n".join(f"wrote {w}" for w in written))
    return DONE


def write_beside(stored: Run, path: Path) -> list[Path]:
    """The report and the plot of exponents beside a run file."""
    from frg.show.plots import exponents_figure, save_plot
    from frg.show.report import write_report

    try:
        page, picture = path.with_suffix(".html"), path.with_suffix(".svg")
        write_report(stored, page)
        save_plot(exponents_figure(stored), picture)
    except OSError as error:
        raise StoreError(f"{error.filename or path}: {error.strerror}", remedy="choose another place, or --no-report") from None
    return [page, picture]


def _write_plots(stored: Run, folder: Path, stem: str) -> list[Path]:
    from frg.show.plots import all_figures, save_plot

    folder.mkdir(parents=True, exist_ok=True)
    written = []
    for name, figure in all_figures(stored):
        for ending in (".svg", ".pdf"):
            target = folder / f"{stem}-{name}{ending}"
            save_plot(figure, target)
            written.append(target)
    return written


def _truncations(options: Any) -> int:
    import tomllib

    from frg.cli.shelffiles import shelf_files

    rows = []
    for path in shelf_files():
        text = path.read_text(encoding="utf-8")
        title = str(tomllib.loads(text).get("title", ""))
        about = " ".join(line.lstrip("# ") for line in text.splitlines() if line.startswith("#"))
        rows.append({"file": path.name, "path": str(path), "title": title, "about": about})
    if options.json:
        print(json.dumps({"frg": __version__, "command": "truncations", "truncations": rows}))
        return DONE
    if not rows:
        raise InputError("no shipped truncations were found", remedy="reinstall the package")
    width = max(len(r["file"]) for r in rows)
    for row in rows:
        print(f"{row['file']:<{width}}  {row['title']}")
    print(f"\nin {Path(rows[0]['path']).parent}; a name without folder is looked up there: frg solve {rows[0]['file']}")
    return DONE
