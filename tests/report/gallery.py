"""Every box the emitters can make, as one report: looked at by eye, compiled and opened by the tests.

worksheets/gallery.toml shows what a worksheet brings about.  Only here, since no worksheet asks for it by itself: a
projector of named kets, a power of a dagger, an operator's exponential, inequalities and "behaves as" inside one
chain, script letters, sums and factors of dozens of terms, a matrix with more distinct entries than are printed.
"""

from __future__ import annotations

from fractions import Fraction

from derive.formula.grammar import parse
from derive.formula.tree import ONE, TAU, Formula, call, letter, number, operator, plus, power, times
from derive.problem.quantities import Quantity
from derive.problem.setting import POSITIVE, Domain, Letter, Question
from derive.record.said import Cases, Claim, Derivation, Kind, Line, Matrix, PerRoot, Prose, Report, Step

from .sample import REAL, matrix, proved, setting

LETTERS = (
    Letter("g", POSITIVE),
    Letter("Delta", REAL),
    Letter("phi", REAL, "\\varphi"),
    Letter("w", Domain("complex", "complex")),
    Letter("J", REAL, "\\mathcal{J}_{\\mathrm{eff}}"),
    Letter("Hh", REAL, "\\hat{H}"),
    Letter("nb", REAL, "\\bar{n}"),
    Letter("omega_c", POSITIVE),
    Letter("L", Domain("integer", "integer >= 2", low=number(2))),
)

SUM = parse("sum(k from 1 to L: 2/(L+1)*sin(pi*j*k/(L+1))^2*exp(-4*g^2*tau*t/(L+1)*sin(pi*k/(L+1))^2))")
NESTED = parse("sqrt(1 + sqrt(2 + sqrt(3 + omega_c^2)))/2")
HATS = parse("J*Hh*nb + conj(w)*omega_c")
INTEGRAL = parse("integral(x from 0 to infinity: exp(-x)/((log(n) + c_0 - log(x))^2 + pi^2))")
SPECIAL = parse("binomial(n, k)*n!*bessel_J(n, 2*g*tau) + elliptic_K(m)/Gamma(x) - abs(w/g) + floor(x/2)")
ROOTS = parse("root(x^3 - 2*x + 1, x, 2) + rootsum(E in E^2 - 2: E*sin(E))")
PRODUCT = times(
    number(Fraction(-7, 720)), parse("i*g^3*omega_c^2*sqrt(J)"), parse("Delta + g"),
    parse("sin(phi)^2*cos(2*phi)"), parse("exp(-i*Delta*tau)"), power(plus(ONE, TAU), number(-3)),
)
LONG = parse(" + ".join(f"{k + 1}*g^{k}*Delta^{40 - k}/{k + 2}" for k in range(41)))
LONG_FACTOR = times(parse("-i*g^2/5040"), plus(*(parse(f"{3 * k + 1}*Delta^{k}*g^{30 - k}") for k in range(31))))
V, V_DAGGER, A = operator("V"), operator("V", None, True), operator("A")
KETS = plus(
    times(operator("|psi>", "n"), operator("<psi|", "n")),
    times(V, power(operator("A"), letter("m")), V_DAGGER),
    power(V_DAGGER, number(2)),
    call("exp", times(number(-1), parse("i*tau"), A)),
)
FOUR = matrix(
    {(x, y): s for x, row in enumerate((
        ("0", "-g", "-g*exp(i*phi)", "0"), ("-g", "Delta", "-g/2", "i*g"),
        ("-g*exp(-i*phi)", "-g/2", "0", "-g"), ("0", "-i*g", "-g", "-Delta/3"),
    )) for y, s in enumerate(row) if s != "0"}, 4,
)


def lines() -> tuple[tuple[Prose, tuple[Line, ...]], ...]:
    f = letter("f")
    return (
        (("A sum with limits:",), (Line(call("S", letter("t")), SUM),)),
        (("Nested roots:",), (Line(f, NESTED),)),
        (("A matrix of four sites:",), (Line(operator("H"), FOUR),)),
        (("Kets, bras and daggers:",), (Line(operator("K"), KETS),)),
        (("Hats, bars and letters of one's own:",), (Line(f, HATS),)),
        (("A chain whose lines are aligned:",), (
            Line(f, parse("(Delta + g)^2")), Line(f, parse("Delta^2 + 2*Delta*g + g^2")),
            Line(letter("longer"), parse("4*g^2"), "<="), Line(f, parse("1 - g^2*tau^2/2 + O(tau^3)"), "~"),
        )),
        (("A big product:",), (Line(f, PRODUCT),)),
        (("An integral:",), (Line(f, INTEGRAL),)),
        (("Special functions:",), (Line(f, SPECIAL),)),
        (("Roots of a polynomial:",), (Line(f, ROOTS),)),
        (("A long sum:",), (Line(f, LONG),)),
        (("A long factor:",), (Line(f, LONG_FACTOR),)),
    )


def claims() -> tuple[Claim, ...]:
    cases = Cases((("Delta > 0", parse("g^2/Delta")), ("Delta = 0", parse("g")), ("otherwise", parse("-g^2/Delta"))))
    per_root = PerRoot(parse("E^3 - 3*g^2*E + g^3"), "E", parse("2*g^2*tau*E^2/(3*E^2 - 3*g^2)"))
    level = Quantity("level energy", (("level", 1),))
    rate = Quantity("decay rate", (("level", "k"),))
    wide = Matrix(300, (), tuple((x, ((x, parse(f"{x + 2}*g")),)) for x in range(300)))
    return (
        Claim("levels.1.energy", "levels", level, cases),
        Claim("levels.k.rate", "levels", rate, per_root, Kind("order", "up to O(tau^3)", 3)),
        Claim("generator.wide", "generator", Quantity("generator", (("order", 7),)), wide, valid_for="h*tau < log(2)"),
        Claim("validity.remainder", "validity", Quantity("remainder bound"), parse("(g*tau)^4/12"), Kind("upper")),
    )


def report() -> Report:
    here = setting("Every box there is", letters=LETTERS)
    steps = tuple(Step(reason, made, fold=len(made) > 4) for reason, made in lines())
    derivation = Derivation("generator", claims(), steps, sources=("phys-rev-a-91-062115",))
    return Report(Question(here, name="gallery"), (derivation,), tuple(proved(c) for c in claims()), version="0.1.0")


ALL: tuple[Formula, ...] = (SUM, NESTED, HATS, INTEGRAL, SPECIAL, ROOTS, PRODUCT, LONG, LONG_FACTOR, KETS)
