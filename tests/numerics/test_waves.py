"""Formulas as sums of exponentials: values and integrals by mpmath."""

import mpmath as mp
import pytest
from flint import acb, arb

from derive.formula.grammar import parse
from derive.numerics.evaluate import Values
from derive.numerics.waves import wave_of

VALUES = Values.at({"g": parse("3/2"), "tau": parse("1/7")})
FORMULAS = [
    ("2/3 + exp(-g*tau*t)", lambda t: mp.mpf(2) / 3 + mp.exp(-mp.mpf(3) / 14 * t)),
    ("tau*(cos(g*t)/2 - sin(2*t))*exp(-t/5)",
     lambda t: (mp.cos(mp.mpf(3) / 2 * t) / 2 - mp.sin(2 * t)) * mp.exp(-t / 5) / 7),
    ("sum(k from 1 to 3: sin(k*t)*cos(t))", lambda t: mp.fsum(mp.sin(k * t) * mp.cos(t) for k in (1, 2, 3))),
    ("rootsum(E in E^3 - 3*E + 1: E^2*cos(E*t))",
     lambda t: mp.fsum(x**2 * mp.cos(x * t) for x in mp.polyroots([1, 0, -3, 1], maxsteps=200))),
    ("rootsum(E in E^2 - 2: rootsum(x in x + E: E*x*sin((E - x)*t)/(E - x)))",
     lambda t: -2 * mp.sin(mp.sqrt(8) * t) / mp.sqrt(8) * 2),
]


def _middle(x):
    return mp.mpmathify(complex(x))


@pytest.mark.parametrize("text, plain", FORMULAS)
def test_values_and_integrals(text, plain):
    wave = wave_of(parse(text), "t", VALUES)
    for t in (0, 1, 4):
        assert abs(_middle(wave.at(acb(t))) - plain(mp.mpf(t))) < 1e-13
    area = mp.quad(plain, [mp.mpf(1) / 4, 1, 2, 3])
    assert abs(_middle(wave.integral(acb(arb(1) / 4), acb(3))) - area) < 1e-11


@pytest.mark.parametrize("text", ["t^2", "exp(-t^2)", "1/(1 + t)", "cos(t + 1)", "bessel_J(0, t)", "exp(-sqrt(t))"])
def test_what_is_no_wave(text):
    assert wave_of(parse(text), "t", VALUES) is None
