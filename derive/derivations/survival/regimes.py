"""How survival falls on equal paths of symbolic length: two power laws, then an exponential, and when each takes over.

With M = L + 1, x = m T^2 tau t/M and theta_k = pi k/M the law at small tau is, by Poisson's summation over k,

    S - w_dark = (1/m) (2/M) sum_k sin^2(j theta_k) e^(-2 x sin^2 theta_k)
               = (1/m) e^(-x) sum_{n in Z} [I_(nM)(x) - I_(j+nM)(x)]                    (I modified Bessel functions)

Term n = 0 is the law of the endless path; the others are images in its far end.  From I_n(x) e^(-x) ~ (2 pi x)^(-1/2)
(1 - (4 n^2 - 1)/(8 x) + ...), DLMF 10.40.1:

    1/2 < x < j^2/2             (2 pi x)^(-1/2)                     the start does not feel the detector yet
    j^2/2 < x < ...             j^2 (2 pi)^(-1/2) x^(-3/2)/2        the first two orders cancel down to this
    x > 1/(2 sin^2(pi/M))       (4/M) sin^2(pi j/M) e^(-2 x sin^2(pi/M))       the slowest pair k = 1, L is left

The first two meet where they are equal, the last begins where its rate times t is 1.  Derived here.
"""

from __future__ import annotations

from fractions import Fraction

from derive.derivations.families import Paths
from derive.derivations.levels.families import arms_size
from derive.formula.tree import (
    MINUS_ONE,
    ONE,
    PI,
    TAU,
    ZERO,
    Formula,
    call,
    constant,
    inverse,
    letter,
    number,
    operator,
    plus,
    power,
    times,
)
from derive.problem.quantities import Quantity
from derive.record.said import Claim, Kind, Line, Step

T, X, INFINITY = letter("t"), letter("x"), constant("infinity")
VALID = (
    "many steps from the detector and far from the path's other end, 1 << j << L",
    "far from the path's other end, j << L",
    "t beyond the last crossover",
)


def regime_claims(paths: Paths, j: Formula, dark: Formula, size: str) -> tuple[Claim, ...]:
    """Three laws and the times between them; `size` is the letter that grows."""
    M, x = arms_size(paths), _x(paths)
    known = () if dark == ZERO else (dark,)
    laws = [plus(*known, times(inverse(paths.count), f)) for f in _laws(M, x, j)]
    said = []
    for i, law in enumerate(laws, start=1):
        if i == 1 and j.head != "letter":
            continue  # a start at a given distance feels the detector from the first
        key = (("regime", i),)
        said.append(Claim(f"survival.regimes.{i}.law", "survival", Quantity("survival regime", key), law,
                          _kind(i, size, j), valid_for=VALID[i - 1]))
        for part, which in (("from", i), ("to", i + 1)):
            if which <= len(laws):
                time = crossover(paths, M, j, which)
                said.append(Claim(f"survival.regimes.{i}.{part}", "survival",
                                  Quantity("crossover time", (("regime", which),)), time,
                                  valid_for="to leading order in tau"))
    return tuple(said)


def _kind(i: int, size: str, j: Formula) -> Kind:
    """In which limit the law's ratio to the sum goes to 1, in the middle of its window."""
    if i == 3:
        return Kind("limit", "as t -> infinity", toward=(("t", INFINITY),))
    if i == 1 and j.head == "letter":
        name = str(j.args[0])
        return Kind("limit", f"as {size} -> infinity, then {name} -> infinity",
                    toward=((size, INFINITY), (name, INFINITY)))
    return Kind("limit", f"as {size} -> infinity", toward=((size, INFINITY),))


def _x(paths: Paths) -> Formula:
    return times(paths.count, power(paths.T, number(2)), TAU, T, inverse(arms_size(paths)))


def _slowest(M: Formula) -> Formula:
    return power(call("sin", times(PI, inverse(M))), number(2))


def _laws(M: Formula, x: Formula, j: Formula) -> list[Formula]:
    half = number(Fraction(1, 2))
    spread = inverse(call("sqrt", times(number(2), PI, x)))
    drained = times(half, power(j, number(2)), inverse(call("sqrt", times(number(2), PI))),
                    power(x, number(Fraction(-3, 2))))
    pair = times(number(4), power(call("sin", times(PI, j, inverse(M))), number(2)), inverse(M),
                 call("exp", times(number(-2), x, _slowest(M))))
    return [spread, drained, pair]


def crossover(paths: Paths, M: Formula, j: Formula, which: int) -> Formula:
    """t at x = 1/2, x = j^2/2 and x = 1/(2 sin^2(pi/M))."""
    above = {1: ONE, 2: power(j, number(2)), 3: ONE}[which]
    below = {1: ONE, 2: ONE, 3: inverse(_slowest(M))}[which]
    rest = times(inverse(paths.count), power(paths.T, number(-2)), inverse(TAU), below)
    return times(number(Fraction(1, 2)), above, M, rest)


def regime_steps(paths: Paths, j: Formula, claims: tuple[Claim, ...]) -> tuple[Step, ...]:
    """The image sum, and what is left of it in each window."""
    M, n = operator("M"), letter("n")
    def bessel(order: Formula) -> Formula:
        return call("bessel_I", order, X)

    images = times(inverse(paths.count), call("exp", times(MINUS_ONE, X)), Formula("sum", (
        "n", times(MINUS_ONE, INFINITY), INFINITY,
        plus(bessel(times(n, M)), times(MINUS_ONE, bessel(plus(j, times(n, M))))))))
    out = [
        Step(("With ",), (Line(M, arms_size(paths), ":="), Line(X, _x(paths), ":="))),
        Step(("Poisson's summation turns the sum over levels into a sum over images in the path's far end, with ",
              "modified Bessel functions:"),
             (Line(plus(operator("S"), times(MINUS_ONE, operator("w", "dark"))), images),)),
    ]
    reasons = (
        "Long before the far end is felt one image is left. While the start does not feel the detector either:",
        "Later the two Bessel functions cancel to their third order:",
        "In the end the slowest pair of levels is left:",
    )
    for i, reason in enumerate(reasons, start=1):
        law = next((c for c in claims if c.id == f"survival.regimes.{i}.law"), None)
        if law is None:
            continue
        if isinstance(law.value, Formula):
            out.append(Step((reason,), (Line(operator("S"), law.value, "~"),), earns=law.id))
        times_ = [c for c in claims if c.id.startswith(f"survival.regimes.{i}.") and c.id != law.id]
        for c in times_:
            if isinstance(c.value, Formula):
                word = "from" if c.id.endswith("from") else "until"
                out.append(Step((f"{word}",), (Line(T, c.value),), earns=c.id))
    return tuple(out)
