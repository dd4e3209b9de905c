from __future__ import annotations

import math

import pytest

from fieldround.rounds.errors import SheetsError
from fieldround.trade.constants import Constant
from fieldround.trade.equation import Equation


def equation(text):
    return Equation.of(Constant("forestry.volume", text, "", ""))


@pytest.mark.parametrize(
    "text, value",
    [
        ("f * pi / 4 * d_m ** 2 * h_m", 0.5 * math.pi / 4 * 0.09 * 20),
        ("-d_cm + +h_m", -10.0),
        ("exp(log(d_m)) + sqrt(h_m) - log10(100)", 0.3 + math.sqrt(20) - 2),
        ("2 ** -1", 0.5),
    ],
)
def test_arithmetic(text, value):
    assert equation(text)(d_m=0.3, d_cm=30.0, h_m=20.0, f=0.5) == pytest.approx(value)


@pytest.mark.parametrize(
    "text",
    [
        "__import__('os').system('true')",
        "d_m.__class__",
        "(lambda: 1)()",
        "[d_m]",
        "open('x')",
        "d_m if h_m else 1",
        "d_m; h_m",
        "x + 1",
        "exp(d_m, h_m)",
        "'a' * 9",
        "True",
        "d_m @ h_m",
        "",
        "(" * 500 + "1" + ")" * 500,
    ],
)
def test_anything_else_is_refused(text):
    with pytest.raises(SheetsError, match=r"lists\.toml, column forestry\.volume"):
        equation(text)


@pytest.mark.parametrize(
    "text", ["log(d_m - 1)", "1 / (d_m - d_m)", "exp(1000)", "(0 - d_m) ** 0.5"]
)
def test_what_has_no_value_is_nan(text):
    assert math.isnan(equation(text)(d_m=0.3, d_cm=30.0, h_m=20.0, f=0.5))
