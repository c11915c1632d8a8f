"""From command-line options to derived equations and the inputs of a run."""

from __future__ import annotations

import dataclasses
import platform
from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from importlib import metadata
from pathlib import Path

from frg.cli.shelffiles import shelf_path
from frg.derive.equations import FlowEquations
from frg.derive.flow import derive_flow
from frg.derive.printing import equations_latex, equations_text
from frg.errors import InputError, Place
from frg.language.reader import read_truncation, read_truncation_text
from frg.language.truncation import Truncation
from frg.records import Inputs
from frg.regulator.base import AbstractRegulator
from frg.regulator.build import build_regulator
from frg.store.signature import signed
from frg.study.convergence import StudySettings

LIBRARIES = ("numpy", "scipy", "jax", "sympy", "h5py", "python-flint")


@dataclass(frozen=True, kw_only=True, eq=False)
class Problem:
    """A truncation with a regulator, and its derived flow."""

    truncation: Truncation
    regulator: AbstractRegulator
    equations: FlowEquations


def read_problem(file: str, overrides: Sequence[str], regulator: str | None) -> Problem:
    """Read, build, derive. Raises InputError."""
    path = Path(file)
    if not path.exists() and not path.suffix and (found := shelf_path(f"{file}.toml")):
        path = found
    elif not path.exists() and (found := shelf_path(path.name)) and path.parent == Path():
        path = found
    truncation = read_truncation(path, overrides=parse_overrides(overrides))
    return problem_of(truncation, regulator)


def problem_from_run(inputs: Inputs) -> Problem:
    """The problem of a stored run, from the stored text alone. The regulator in force replaces that of the file."""
    truncation = read_truncation_text(
        inputs.truncation_text, source=f"truncation stored in the run {inputs.title!r}", overrides=inputs.parameters
    )
    spec = regulator_spec(inputs.regulator, inputs.regulator_parameters)
    return problem_of(truncation, spec, origin=f"regulator stored in the run {inputs.title!r}")


def problem_of(truncation: Truncation, regulator: str | None, *, origin: str = "--regulator") -> Problem:
    """The problem with the regulator of the file, or with another one; `origin` says in errors where the
    text of that one came from. Raises InputError."""
    from frg.language.values import regulator_choice_from_text

    choice, place = truncation.regulator, Place(source=truncation.source)
    if regulator is not None:
        place = Place(source=origin, text=regulator)
        choice = regulator_choice_from_text(regulator, place=place)
    try:
        built = build_regulator(choice)
    except InputError as error:
        raise error.at(place) from None
    return Problem(truncation=truncation, regulator=built, equations=derive_flow(truncation, built))


def parse_overrides(pairs: Sequence[str]) -> dict[str, str]:
    """NAME=VALUE pairs. Raises InputError."""
    found: dict[str, str] = {}
    for pair in pairs:
        name, equals, value = pair.partition("=")
        if not equals or not name.strip() or not value.strip():
            raise InputError(
                f"{pair!r} is not of the form NAME=VALUE", remedy="write for example --set d=2.7",
                place=Place(source="--set", text=pair),
            )
        found[name.strip()] = value.strip()
    return found


def regulator_name(regulator: AbstractRegulator, truncation: Truncation) -> str:
    """The name that goes into a run: a custom shape by its expression."""
    expression = getattr(regulator, "expression", None)
    return regulator.name if expression is None else f"custom:{expression}"


def regulator_spec(name: str, parameters: Mapping[str, float]) -> str:
    """The command-line form of a regulator stored in a run."""
    values = ",".join(f"{k}={v!r}" for k, v in parameters.items())
    if name.startswith("custom:"):
        return f"{name},{values}" if values else name
    return f"{name}:{values}" if values else name


def run_inputs(problem: Problem, settings: StudySettings, orders: Sequence[int], command: str) -> Inputs:
    """Everything the run can be repeated from, signed."""
    truncation, regulator = problem.truncation, problem.regulator
    judgement = settings.search.judgement
    return signed(
        Inputs(
            title=truncation.title,
            truncation_text=truncation.text,
            parameters={k: str(v) for k, v in truncation.parameters.items()},
            equations=equations_text(problem.equations),
            latex=equations_latex(problem.equations),
            regulator=regulator_name(regulator, truncation),
            regulator_parameters={k: float(v) for k, v in regulator.parameters.items()},
            settings={
                "command": command,
                "orders": list(orders),
                "marginal_tolerance": judgement.marginal,
                "residual_tolerance": judgement.residual,
                "study": dataclasses.asdict(settings),
                "notes": list(problem.equations.notes),
            },
            signature="",
        )
    )


def package_versions() -> dict[str, str]:
    """Versions of the interpreter and of the libraries that compute."""
    versions = {"python": platform.python_version()}
    for name in LIBRARIES:
        try:
            versions[name] = metadata.version(name)
        except metadata.PackageNotFoundError:
            versions[name] = "unknown"
    return versions
