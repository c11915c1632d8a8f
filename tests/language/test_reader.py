"""Truncation files: what each key becomes, and one clear error for each kind of bad input."""

import os
from pathlib import Path

import pytest
import sympy

from frg.errors import InputError, NotYet
from frg.language.reader import read_truncation, read_truncation_text
from frg.language.truncation import (
    Grid,
    RegulatorChoice,
    RunningCoupling,
    RunningFunction,
    ScalarField,
    StudySettings,
    WaveFunction,
)

DATA = Path(__file__).parent / "data"
n, N, d, phi, rho = sympy.symbols("n N d phi rho")


def text_of(name):
    return (DATA / f"{name}.toml").read_text(encoding="utf-8")


def error_of(text, kind=InputError, **kwargs):
    with pytest.raises(kind) as caught:
        read_truncation_text(text, source="model.toml", **kwargs)
    assert caught.value.remedy
    assert caught.value.place.source
    return caught.value


def changed(name, old, new):
    text = text_of(name)
    assert old in text
    return text.replace(old, new)


def placed(text, fragment):
    """Line and column of a fragment, counted without the reader's help."""
    before = text[: text.index(fragment)]
    return before.count("\n") + 1, len(before) - (before.rfind("\n") + 1) + 1


# -- what is read ---------------------------------------------------------------------------


def test_on_model():
    truncation = read_truncation(DATA / "on_model.toml")
    assert truncation.title.startswith("O(N) scalar")
    assert truncation.reference == "C. Wetterich, Phys. Lett. B 301 (1993) 90"
    assert truncation.text == text_of("on_model")
    assert truncation.dimension == d
    assert truncation.geometry == "flat"
    assert truncation.parameters == {"d": 3, "N": 1}
    assert truncation.fields == (ScalarField(name="phi", components=N),)
    assert truncation.definitions == {"rho": phi**2 / 2}
    assert truncation.functions == (RunningFunction(name="U", of=("rho",), about="minimum", order=n),)
    assert truncation.wave_functions == (WaveFunction(name="Z"),)
    dphi = sympy.Function("d")(phi, sympy.Symbol("mu"))
    assert truncation.lagrangian == sympy.Symbol("Z") / 2 * dphi**2 + sympy.Function("U")(rho)
    assert truncation.flow is None
    assert truncation.regulator == RegulatorChoice(name="flat")
    assert truncation.study == StudySettings(order="n", values=tuple(range(2, 13)))


def test_three_fields():
    truncation = read_truncation(DATA / "three_fields.toml")
    assert [f.name for f in truncation.fields] == ["a", "b", "c"]
    assert all(f.components == 1 for f in truncation.fields)
    assert truncation.couplings == tuple(RunningCoupling(name=c) for c in ("m2", "lam", "v"))
    a, v = sympy.symbols("a v")
    assert truncation.lagrangian.expand().coeff(v).coeff(a, 4) == sympy.Rational(1, 24)


def test_two_invariants():
    truncation = read_truncation(DATA / "two_invariants.toml")
    (function,) = truncation.functions
    assert function.of == ("rho", "tau")
    assert function.order == n - 1
    assert function.about == 0
    assert function.coefficients == "power"
    assert truncation.parameters["M"] == sympy.Rational(5, 2)
    assert truncation.numeric(truncation.dimension) == 2.5
    assert truncation.study.values == (2, 4, 8)
    assert truncation.regulator == RegulatorChoice(name="exponential", parameters={"alpha": 2.0})
    assert truncation.order_of(function, 8) == 7


def test_grid_and_regulator_keys():
    truncation = read_truncation(DATA / "grid.toml")
    assert truncation.functions[0].grid == Grid(points=40, upto=6.0)
    assert truncation.functions[0].about is None
    assert truncation.order_of(truncation.functions[0], 3) is None
    assert truncation.regulator == RegulatorChoice(name="theta", parameters={"alpha": 1.5, "power": 3.0})


def test_typed_flows():
    truncation = read_truncation(DATA / "one_coupling.toml")
    A, B, g = sympy.symbols("A B g")
    assert truncation.flow == {"g": A * g - B * g**2}
    assert truncation.parameters == {"A": 1, "B": 2}
    assert truncation.dimension is sympy.nan
    typed = read_truncation(DATA / "typed_on.toml")
    assert typed.functions[0].about == sympy.Rational(1, 10)
    assert typed.study.values == (2, 4, 6, 8, 10)
    assert typed.regulator.expression == "a*exp(-y)*(1+b*y)"
    assert typed.regulator.parameters == {"a": 1.0, "b": 0.1}
    assert typed.flow["U"].has(sympy.Symbol("vd"))


def test_overrides_are_exact_and_reach_dependent_parameters():
    typed = read_truncation(DATA / "one_coupling.toml", overrides={"A": "1/3"})
    assert typed.parameters == {"A": sympy.Rational(1, 3), "B": sympy.Rational(2, 3)}
    model = read_truncation(DATA / "on_model.toml", overrides={"d": "2.7", "N": "-2"})
    assert model.value(model.dimension) == sympy.Rational(27, 10)
    assert model.numeric(model.fields[0].components) == -2.0
    assert model.text == text_of("on_model")


def test_source_text_stands_in_for_the_file():
    truncation = read_truncation("gone.toml", source_text=text_of("one_coupling"))
    assert truncation.source == "gone.toml"


def test_float_parameters_are_exact():
    text = changed("on_model", "d = 3\n", "d = 0.1\n")
    assert read_truncation_text(text, source="f").parameters["d"] == sympy.Rational(1, 10)
    text = changed("on_model", "d = 3\n", 'd = "sqrt(2) + 1"\n')
    assert read_truncation_text(text, source="f").parameters["d"] == sympy.sqrt(2) + 1


def test_expanded_and_value():
    truncation = read_truncation(DATA / "on_model.toml")
    assert truncation.expanded(rho**2) == phi**4 / 4
    assert truncation.value(n - N + d / 2, order=5) == sympy.Rational(11, 2)
    with pytest.raises(InputError, match="no value is known for x"):
        truncation.numeric(sympy.Symbol("x"))
    with pytest.raises(InputError, match="division by zero"):
        truncation.value(1 / (d - 3))


def test_wave_function_options():
    text = changed("on_model", '"wave-function" }', '"wave-function", mode = "radial", at = "d/10" }')
    assert read_truncation_text(text, source="f").wave_functions == (WaveFunction(name="Z", mode="radial", at=d / 10),)


def test_windows_line_ends_and_byte_order_mark(tmp_path):
    path = tmp_path / "model.toml"
    path.write_bytes(b"\xef\xbb\xbf" + text_of("on_model").replace("\n", "\r\n").encode())
    assert read_truncation(path) == read_truncation(DATA / "on_model.toml")


# -- files ----------------------------------------------------------------------------------


def test_missing_file_and_its_neighbour(tmp_path):
    (tmp_path / "ising.toml").write_text("x = 1")
    with pytest.raises(InputError, match="no such file") as caught:
        read_truncation(tmp_path / "isng.toml")
    assert "ising.toml" in caught.value.remedy


def test_directory_device_and_long_file(tmp_path):
    with pytest.raises(InputError, match="directory"):
        read_truncation(tmp_path)
    with pytest.raises(InputError, match="not a regular file"):
        read_truncation("/dev/zero")
    pipe = tmp_path / "pipe"
    os.mkfifo(pipe)
    with pytest.raises(InputError, match="not a regular file"):
        read_truncation(pipe)
    long = tmp_path / "long.toml"
    with open(long, "wb") as file:
        file.truncate(10**9)  # sparse: a size, no content
    with pytest.raises(InputError, match="1000000000 bytes"):
        read_truncation(long)
    with pytest.raises(InputError):
        read_truncation("a\0b")


def test_unreadable_file(tmp_path, monkeypatch):
    path = tmp_path / "model.toml"
    path.write_text("x = 1")

    def refuse(*_args, **_kwargs):
        raise PermissionError(13, "Permission denied")

    # access rights do not bind a superuser, so the refusal itself is played
    monkeypatch.setattr("builtins.open", refuse)
    with pytest.raises(InputError, match="no permission"):
        read_truncation(path)


def test_not_utf8(tmp_path):
    path = tmp_path / "model.toml"
    path.write_bytes(b'title = "a"\nreference = "\xe9"\n')
    with pytest.raises(InputError, match="UTF-8") as caught:
        read_truncation(path)
    assert (caught.value.place.line, caught.value.place.column) == (2, 14)


def test_empty_and_truncated_text():
    assert "empty" in error_of("  \n").message
    text = text_of("on_model")
    cut = error_of(text[: text.index("phi^2/2") + 3])
    assert "TOML" in cut.message
    assert cut.place.line == text[: text.index("phi^2/2")].count("\n") + 1
    assert "[action]" in error_of(text[: text.index("[action]")]).message
    assert "[running]" in error_of(text[: text.index("[running]")]).message


# -- keys and names -------------------------------------------------------------------------


@pytest.mark.parametrize(
    ("name", "old", "new", "fragment", "words"),
    [
        ("on_model", "[study]", "[studdy]", "studdy", ["unknown key", "did you mean 'study'"]),
        ("on_model", "geometry  =", "geometri  =", "geometri", ["unknown key", "did you mean 'geometry'"]),
        ("on_model", "order = \"n\" }", "ordr = \"n\" }", "ordr", ["unknown key", "did you mean 'order'"]),
        ("on_model", "components =", "component =", "component =", ["did you mean 'components'"]),
        ("on_model", "values =", "vales =", "vales", ["did you mean 'values'"]),
        ("on_model", "shape =", "shap =", "regulator]", ["no shape", "did you mean 'shape'"]),
        ("on_model", '"function"', '"funktion"', "funktion", ["did you mean 'function'"]),
        ("on_model", '"minimum"', '"minimun"', "minimun", ["unknown name", "minimum"]),
        ("on_model", '"phi^2/2"', '"phj^2/2"', "phj", ["unknown name 'phj'", "did you mean 'phi'"]),
        ("on_model", "+ U(rho)", "+ V(rho)", "V(rho)", ["called as a function", "[running]"]),
        ("on_model", "+ U(rho)", "+ U(rh)", "rh)", ["unknown name 'rh'", "did you mean 'rho'"]),
        ("on_model", 'components = "N"', 'components = "M"', 'M" }', ["unknown name 'M'"]),
        ("on_model", 'of = "rho"', 'of = "tau"', 'tau"', ["not in [definitions]"]),
        ("on_model", 'of = "rho", ', "", "U = {", ["does not say of what"]),
        ("on_model", 'order = "n" }', 'order = "m" }', 'm" }', ["unknown name 'm'", "order symbol"]),
        ("on_model", ', order = "n"', "", "U = {", ["no order"]),
        ("on_model", 'about = "minimum", ', "", "U = {", ["either about or grid"]),
        ("on_model", 'd = 3', 'd = 3\nphi = 1', 'phi = {', ["already the name of a parameter"]),
        ("on_model", 'N = 1', 'N = 1\nn = 1', 'order  =', ["already the name of a parameter"]),
        ("on_model", 'N = 1', 'N = 1\nZ = 1', 'Z = {', ["already the name of a parameter"]),
        ("on_model", 'N = 1', 'N = 1\nN = 1', None, ["overwrite", "only once"]),
        ("on_model", 'N = 1', 'N = 1\npi = 3', 'pi = 3', ["fixed meaning"]),
        ("on_model", 'N = 1', 'N = 1\n"a b" = 3', '"a b"', ["cannot be a name"]),
        ("on_model", 'N = 1', 'N = nan', 'nan', ["not finite"]),
        ("on_model", 'N = 1', 'N = -inf', '-inf', ["not finite"]),
        ("on_model", 'N = 1', 'N = 1e400', '1e400', ["too large"]),
        ("on_model", 'N = 1', 'N = "0^-1"', '0^-1', ["division by zero"]),
        ("on_model", 'N = 1', 'N = "M"', 'M"', ["unknown name 'M'"]),
        ("on_model", 'N = 1', 'N = true', 'true', ["must be a number"]),
        ("on_model", 'N = 1', 'N = [1]', '[1]', ["must be a number"]),
        ("on_model", '"d"  ', '"D"  ', 'D"', ["unknown name 'D'", "did you mean 'd'"]),
        ("on_model", '"d"  ', '"d-3"  ', 'd-3', ["dimension is 0"]),
        ("on_model", '"d"  ', '-1  ', '-1  ', ["dimension is -1"]),
        ("on_model", '"d"  ', 'inf  ', 'inf', ["not finite"]),
        ("on_model", '"d"  ', '"three"  ', 'three', ["unknown name"]),
        ("on_model", '"d"  ', '"1/(d-3)"  ', '1/(d-3)', ["division by zero"]),
        ("on_model", 'dimension = "d"', '', 'space]', ["dimension is missing"]),
        ("on_model", '"2..12"', '"1..12"', 'n" }', ["leaves no coupling", "at least 2"]),
        ("on_model", '"2..12"', '"12..2"', '12..2', ["empty"]),
        ("on_model", '"2..12"', '"two"', 'two', ["no order"]),
        ("on_model", '"2..12"', '[2, 2]', '[2, 2]', ["must rise"]),
        ("on_model", '"2..12"', '[2.5]', '[2.5]', ["whole numbers"]),
        ("on_model", '"2..12"', '[]', '[]', ["empty"]),
        ("on_model", 'order = "n" }', 'order = "n/2+1" }', 'n/2+1', ["no whole number"]),
        ("on_model", '"flat"\n\n[par', '"sphere"\n\n[par', 'phi = {', ["phi is a scalar field", "[gravity] matter"]),
        ("on_model", 'phi = {', 'g = "metric"\nphi = {', 'metric', ['geometry = "sphere"', "[space]"]),
        ("on_model", "[study]", '[gravity]\n[study]', 'gravity]', ['geometry = "sphere"', "[space]"]),
        ("two_invariants", 'values = [2,', 'values = [1,', 'n-1', ["leaves no coupling", "at least 1"]),
        ("two_invariants", '["rho", "tau"]', '["rho", "rho"]', '["rho", "rho"]', ["distinct"]),
        ("two_invariants", 'U(rho, tau)', 'U(rho)', 'U(rho)', ["2 arguments"]),
        ("two_invariants", 'M = "N', 'M = "M', 'M +', ["unknown name 'M'"]),
        ("grid", "points = 40", "points = 1", "1, upto", ["whole number"]),
        ("grid", ", upto = 6.0", "", "grid =", ["no upto"]),
        ("grid", "upto = 6.0", "upto = -6.0", "-6.0", ["positive"]),
        ("grid", "grid = {", 'order = "n", grid = {', "order =", ["has no order"]),
        ("grid", "power = 3", 'power = "3x"', "x\"", ["operator is missing"]),
        ("grid", "power = 3", "power = inf", "inf", ["not finite"]),
        ("grid", '"theta"', '"theta:power=2"', "power = 3", ["given twice"]),
        ("one_coupling", "[flow]\ng =", "[flow]\nh =", "g = {", ["no beta function for g"]),
        ("one_coupling", "B*g^2\"", "B*g^2\"\nh = \"g\"", "h =", ["not in [running]"]),
        ("one_coupling", "A*g -", "A*g*vd -", "A*g*vd", ["[space] dimension is missing"]),
        ("one_coupling", "[flow]", "[action]\nlagrangian = \"1\"\n[flow]", "flow]", ["both"]),
        ("typed_on", "N = 4", "N = 4\nrho = 1", 'rho", about', ["coordinate of U"]),
        ("typed_on", "b=0.1", "c=0.1", "b*y", ["unknown name 'b'"]),
        ("three_fields", "v/24", "w/24", "w/24", ["unknown name 'w'"]),
    ],
)  # fmt: skip
def test_one_clear_error(name, old, new, fragment, words):
    text = changed(name, old, new)
    error = error_of(text)
    for word in words:
        assert word in str(error)
    if fragment is not None:
        line, column = placed(text, fragment)
        assert (error.place.line, error.place.column) == (line, column)
        assert error.place.text


def test_a_name_that_collides_with_the_couplings_of_a_function():
    text = changed("on_model", "Z = { kind", 'U2 = { kind = "coupling" }\nZ = { kind')
    assert "coupling of the function U" in error_of(text).message


def test_functions_cannot_take_reserved_calls():
    text = text_of("typed_on").replace("U", "l")
    assert "fixed meaning" in error_of(text).message


def test_overlong_and_overdeep():
    assert "characters long" in error_of(changed("on_model", "U(rho)", "U(rho)" + "+1" * 5000)).message
    assert "nested" in error_of(changed("on_model", "U(rho)", "(" * 50 + "U(rho)" + ")" * 50)).message
    assert "exponent" in error_of(changed("on_model", '"phi^2/2"', '"9^9^9^9"')).message
    assert "bytes" in error_of("#" * 10**6).message
    assert "nested" in error_of("a = " + "[" * 10**5).message
    assert "TOML" in error_of("a = " + "1" * 10**5).message


def test_definitions_that_grow_like_powers():
    lines = [f'r{k + 1} = "sin(r{k}) + cos(r{k}) + exp(-r{k})"' for k in range(1, 40)]
    chain = "\n".join(['r1 = "phi^2/2"', *lines])
    text = changed("on_model", 'rho = "phi^2/2"', chain + '\nrho = "phi^2/2 + r40"')
    assert "too large" in error_of(text).message
    lines = [f'r{k + 1} = "sin(r{k}) + cos(2*r{k})"' for k in range(1, 40)]
    text = changed("on_model", "N = 1", "\n".join(["N = 1", "r1 = 1", *lines]))
    assert "too large" in error_of(text).message


def test_look_alike_in_a_file():
    error = error_of(changed("on_model", "+ U(rho)", "+ U(rh\u043e)"))
    assert "U+043E" in error.message
    assert error.place.text == "\u043e"


@pytest.mark.parametrize(
    ("overrides", "words"),
    [
        ({"D": "3"}, ["'D'", "did you mean 'd'"]),
        ({"d": "three"}, ["value of d", "number"]),
        ({"d": ""}, ["value of d"]),
        ({"d": "nan"}, ["value of d"]),
        ({"d": "inf"}, ["value of d"]),
        ({"d": "9^9^9"}, ["value of d"]),
        ({"d": "N"}, ["value of d"]),
        ({"d": "0"}, ["dimension is 0"]),
    ],
)
def test_bad_overrides(overrides, words):
    error = error_of(text_of("on_model"), overrides=overrides)
    for word in words:
        assert word in str(error)
    if "dimension" not in words[0]:
        assert error.place.source == "--set"
        assert error.place.text == "=".join(*overrides.items())


# -- recognised, and refused so far ---------------------------------------------------------


@pytest.mark.parametrize(
    ("old", "new", "key"),
    [
        ("[study]", '[family]\nmembers = ["a.toml"]\n[study]', "family"),
        ('kind = "scalar"', 'kind = "dirac", flavours = 2', "dirac"),
        ('order  = "n"', 'order  = "n"\nproducts = "full"', "products"),
        ('order  = "n"', 'order  = "n"\nnormalised_at = 0', "normalised_at"),
        ("U(rho)\"", "U(rho) + d(phi,mu,nu)^2\"", "higher derivative"),
        ("U(rho)\"", "U(rho) + d(phi,mu)^2*d(phi,nu)^2\"", "higher derivative"),
        ("U(rho)\"", "U(rho) + U(rho)*d(phi,mu)^2\"", "field-dependent"),
        ("U(rho)\"", "U(rho) + phi^2*d(phi,mu)^2\"", "field-dependent"),
        ("U(rho)\"", "U(rho) + d(rho,mu)^2\"", "composite"),
        ("U(rho)\"", "U(rho) + diff(U(rho),rho)\"", "derivatives of running functions"),
    ],
)  # fmt: skip
def test_not_yet(old, new, key):
    error = error_of(changed("on_model", old, new), NotYet)
    assert key in error.message
    assert "not supported yet" in error.message
    assert error.place.line is not None


def test_not_yet_grid_of_two_coordinates_and_typed_wave_function():
    old = 'about = 0, order = "n-1"'
    assert "grid" in error_of(changed("two_invariants", old, "grid = { points = 9, upto = 2 }"), NotYet).message
    text = changed("one_coupling", "[flow]", 'Z = { kind = "wave-function" }\n[flow]')
    assert "wave function" in error_of(text, NotYet).message
