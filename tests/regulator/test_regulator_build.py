"""From choices to regulator objects."""

from __future__ import annotations

import pytest

from frg.errors import InputError
from frg.language.truncation import RegulatorChoice
from frg.regulator.build import build_regulator, regulator_names
from frg.regulator.shapes import Exponential, Flat, Sharp, Theta
from frg.regulator.thresholds import threshold


def test_names_and_parameters() -> None:
    assert build_regulator(RegulatorChoice(name="flat")) == Flat()
    assert build_regulator(RegulatorChoice(name="sharp")) == Sharp()
    assert build_regulator(RegulatorChoice(name="theta", parameters={"power": 2, "alpha": 0.5})) == Theta(alpha=0.5, power=2.0)
    assert build_regulator(RegulatorChoice(name="exponential", parameters={"s": 2.0})) == Exponential(s=2.0)
    assert set(regulator_names()) == {"flat", "theta", "exponential", "gaussian", "power", "mass", "sharp", "custom"}
    for name, line in regulator_names().items():
        assert line and "\n" not in line
        if name != "custom":
            assert build_regulator(RegulatorChoice(name=name)).name == name


def test_custom_text_is_the_named_shape() -> None:
    text = RegulatorChoice(name="custom", parameters={"a": 4.0, "c": 0.5}, expression="a*y/(exp(c*y) - 1)")
    custom, named = build_regulator(text), Exponential(alpha=4.0, s=0.5)
    assert custom.parameters == {"a": 4.0, "c": 0.5}
    for n, w in [(0, 0.3), (1, -1.0), (2, 5.0)]:
        assert threshold(custom, n, w, 2.7, eta=0.2) == pytest.approx(threshold(named, n, w, 2.7, eta=0.2), rel=1e-12)


@pytest.mark.parametrize(("choice", "said", "remedy"), [
    (RegulatorChoice(name="exponental"), "unknown regulator 'exponental'", "exponential"),
    (RegulatorChoice(name="custom"), "needs an expression", "custom:a"),
    (RegulatorChoice(name="gaussian", parameters={"alfa": 1.0}), "no parameter 'alfa'", "alpha"),
    (RegulatorChoice(name="sharp", parameters={"alpha": 1.0}), "no parameter 'alpha'", "leave it out"),
    (RegulatorChoice(name="flat", parameters={"alpha": -1.0}), "alpha = -1", "positive"),
    (RegulatorChoice(name="custom", expression="exp(-y"), "", ""),
    (RegulatorChoice(name="custom", expression="b*exp(-y)"), "b", "custom:a"),
    (RegulatorChoice(name="custom", expression="exp(-y)", parameters={"y": 1.0}), "cannot name a parameter", ""),
    (RegulatorChoice(name="custom", expression="__import__('os')"), "", ""),
])  # fmt: skip
def test_bad_choices_get_one_error_with_a_remedy(choice: RegulatorChoice, said: str, remedy: str) -> None:
    with pytest.raises(InputError) as caught:
        build_regulator(choice)
    assert said in caught.value.message and remedy in caught.value.remedy and caught.value.remedy
