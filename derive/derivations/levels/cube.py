"""Levels of a hypercube watched at a corner, the dimension d left a letter: formulas at every root E of an equation.

H has the levels t (d - 2 j), j = 0 ... d, each seen from the corner with the weight 2^-d binomial(d, j).  With

    S_n(E) = 2^-d sum_j binomial(d, j)/(t (d - 2 j) - E)^n

the resolvent <d|(H-E)^(-1)|d> is S_1, the bright levels at tau = 0 are the d roots of S_1 = 0, and around one of them

    S_1(E + delta) = S_2 delta + S_3 delta^2 + ... = Y(E + delta, x),      x = -i tau

is solved order by order: rate tau/S_2 + O(tau^3).  The level's state is (H-E)^(-1)|d>/sqrt(S_2), so that a start at
a corner that differs in n coordinates has the weight R_n^2/S_2, with Krawtchouk's polynomials (textbook)

    R_n = 2^-d sum_j K_j(n)/(t (d - 2 j) - E),      K_j(n) = sum_m (-1)^m binomial(n, m) binomial(d - n, j - m).

What an eigenspace has beyond the one state that is seen is dark: t (d - 2 j), binomial(d, j) - 1 times.  Derived here.
"""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import replace as changed
from fractions import Fraction
from math import comb, factorial

from derive.derivations.families import Cube, hopping_size
from derive.derivations.families_secular import returns_of, secular_claim
from derive.derivations.levels import steps
from derive.derivations.levels.families import K, for_every, left_out, path_sizes
from derive.derivations.levels.topic import bernoulli, in_tau
from derive.derivations.survival.interference import simple
from derive.errors import NotCovered
from derive.exact.arguments import is_nonnegative
from derive.exact.field import Element, Field
from derive.formula.tree import (
    I_UNIT,
    MINUS_ONE,
    ONE,
    TAU,
    ZERO,
    Formula,
    call,
    inverse,
    letter,
    negate,
    number,
    operator,
    plus,
    power,
    replace,
    times,
)
from derive.formula.tree import (
    order as big_o,
)
from derive.problem.quantities import Quantity
from derive.problem.setting import Domain, Family, Relation, Setting
from derive.record.said import Claim, Derivation, Kind, Line, PerRoot, Step, Value

E = letter("E")
BOUND = ("j", "m", "l", "i1", "i2")
"""Names for what sums run over, those first that the worksheet leaves free."""
Series = list[Element]


def derive_cube_levels(setting: Setting, cube: Cube, order: int) -> Derivation:
    """Bright levels at the roots of S_1, dark ones in closed form, and the secular function."""
    every = path_sizes(setting)
    secular = secular_claim(setting, cube, order, every)  # refuses a letter E of the worksheet's
    energy, rate = _moved(setting, cube, order)
    weight, assume = weight_of(setting, cube)
    even, odd = left_out(order)
    claims = [
        _claim(setting, cube, "energy", "level energy", in_tau(energy), _up_to(even)),
        _claim(setting, cube, "multiplicity", "level multiplicity", ONE, Kind()),
        _claim(setting, cube, "rate", "decay rate", in_tau(rate), _up_to(odd)),
    ]
    if weight is not None:
        claims.append(changed(_claim(setting, cube, "weight", "level weight", weight, Kind()), assume=assume))
    dark = list(_dark(setting, cube))
    out = [for_every(c, every) for c in (*claims, *dark)]
    told = _steps(setting, cube, energy, rate, weight, secular, order)
    return Derivation("levels", (*out[:len(claims)], secular, *out[len(claims):]), (*told, *steps.dark(dark)))


def bound(setting: Setting) -> Iterator[Formula]:
    """Letters for sums that the worksheet leaves free."""
    taken = {x.name for x in setting.letters}
    return (letter(name) for name in BOUND if name not in taken)


def sum_of_powers(setting: Setting, cube: Cube, n: int) -> Formula:
    """S_n."""
    j = next(bound(setting))
    body = times(call("binomial", cube.dimension, j), power(_gap(cube, j), number(-n)))
    return _averaged(cube, j, body)


def _gap(cube: Cube, j: Formula) -> Formula:
    return plus(times(cube.t, plus(cube.dimension, times(number(-2), j))), negate(E))


def _averaged(cube: Cube, j: Formula, body: Formula) -> Formula:
    front = power(number(2), negate(cube.dimension))
    return times(front, Formula("sum", (str(j.args[0]), ZERO, cube.dimension, body)))


# -- the secular equation at a root


def _moved(setting: Setting, cube: Cube, order: int) -> tuple[dict[int, Formula], dict[int, Formula]]:
    """Coefficients of tau^n in energy and rate, with S_2, S_3, ... written out."""
    names = {f"S {n}": sum_of_powers(setting, cube, n) for n in range(2, order + 2)}
    moved = _Root(setting, cube, order, tuple(names))
    energy: dict[int, Formula] = {0: E}
    rate: dict[int, Formula] = {}
    for n, x in enumerate(moved.solved()):
        if n and x:
            sign = Fraction((-1) ** (n // 2) * (2 if n % 2 else 1))
            (rate if n % 2 else energy)[n] = replace(moved.field.formula(x.scaled(sign)), names)
    return energy, rate


class _Root:
    """S_2 delta + S_3 delta^2 + ... = Y(E + delta, x) as a series in x, the S_n letters."""

    def __init__(self, setting: Setting, cube: Cube, order: int, names: tuple[str, ...]):
        self.order = order
        moments = returns_of(cube, order)
        domains = {**setting.domains(), **{name: Domain("real", "") for name in ("E", *names)}}
        self.field = Field.of([E, *moments, *map(letter, names)], domains)
        self.S = [self.field.element(letter(name)) for name in names]
        self.returns = [self.field.element(f) for f in moments]

    def solved(self) -> Series:
        """delta below x^(order+1): each round makes one order more right."""
        delta = self._zero()
        for _ in range(self.order):
            rest, raised = self._pushed(delta), delta
            for S in self.S[1:]:
                raised = self._times(raised, delta)
                rest = [a - S * b for a, b in zip(rest, raised, strict=True)]
            delta = [a / self.S[0] for a in rest]
        return delta

    def _pushed(self, delta: Series) -> Series:
        """Y = x/2 - sum_n B_2n/(2n)! x^(2n) <d|(H - E - delta)^(2n-1)|d>."""
        out = self._zero()
        out[1] = self.field.rational(Fraction(1, 2))
        for n in range(2, self.order + 1, 2):
            front = -bernoulli(n) / factorial(n)
            for k, a in enumerate(self._around(delta, n - 1)[: self.order + 1 - n]):
                out[n + k] = out[n + k] + a.scaled(front)
        return out

    def _around(self, delta: Series, n: int) -> Series:
        energy = list(delta)
        energy[0] = energy[0] + self.field.element(E)
        total, raised = self._zero(), self._zero()
        raised[0] = self.field.one
        for j in range(n + 1):
            front = self.returns[n - j].scaled(Fraction((-1) ** j * comb(n, j)))
            total = [a + front * b for a, b in zip(total, raised, strict=True)]
            raised = self._times(raised, energy)
        return total

    def _zero(self) -> Series:
        return [self.field.zero] * (self.order + 1)

    def _times(self, a: Series, b: Series) -> Series:
        out = self._zero()
        for i, x in enumerate(a):
            if x:
                for k in range(len(a) - i):
                    out[i + k] = out[i + k] + x * b[k]
        return out


# -- weights and dark levels


def weight_of(setting: Setting, cube: Cube) -> tuple[Formula | None, tuple[Relation, ...]]:
    """R_n^2/S_2 for a start n steps away, and that there is such a corner."""
    start = setting.start
    if start is None or start.distance is None:
        return None, ()
    n, d = start.distance, cube.dimension
    free = bound(setting)
    j, m = next(free), next(free)
    others = call("binomial", plus(d, negate(n)), plus(j, negate(m)))
    signed = times(power(MINUS_ONE, m), call("binomial", n, m), others)
    krawtchouk = Formula("sum", (str(m.args[0]), ZERO, n, signed))
    seen = _averaged(cube, j, times(krawtchouk, inverse(_gap(cube, j))))
    room = simple(plus(d, negate(n)), setting)
    assume = () if is_nonnegative(room, setting.domains()) else (Relation(n, "<=", d),)
    return times(power(seen, number(2)), inverse(sum_of_powers(setting, cube, 2))), assume


def _dark(setting: Setting, cube: Cube) -> Iterator[Claim]:
    """-T (d - 2 k), binomial(d, k) - 1 times, k = 1 ... d - 1 from below; none told where T's sign is not known."""
    family, d = setting.space, cube.dimension
    try:
        T, _ = hopping_size(family, setting) if isinstance(family, Family) else (ZERO, False)
    except NotCovered:
        return
    energy = times(MINUS_ONE, T, plus(d, times(number(-2), K)))
    pieces = (("energy", "dark level energy", energy),
              ("multiplicity", "dark level multiplicity", plus(call("binomial", d, K), MINUS_ONE)))
    for part, quantity, value in pieces:
        yield Claim(f"levels.dark.k.{part}", "levels", Quantity(quantity, (("level", "k"),)), value,
                    valid_for="every tau; every k from 1 to d - 1, d the dimension")


def _claim(setting: Setting, cube: Cube, part: str, quantity: str, value: Formula, kind: Kind) -> Claim:
    said: Value = value if value == ONE else PerRoot(sum_of_powers(setting, cube, 1), "E", value)
    return Claim(f"levels.1.{part}", "levels", Quantity(quantity, (("level", 1),)), said, kind,
                 valid_for="small tau; each of the d roots, d the dimension")


def _up_to(remainder: int) -> Kind:
    return Kind("order", f"up to O(tau^{remainder})", remainder)


# -- steps


def _steps(
    setting: Setting, cube: Cube, energy: dict[int, Formula], rate: dict[int, Formula], weight: Formula | None,
    secular: Claim, order: int,
) -> tuple[Step, ...]:
    even, odd = left_out(order)
    value = secular.value if isinstance(secular.value, Formula) else ZERO
    delta = letter("delta")
    expansion = plus(times(operator("S", 2), delta), times(operator("S", 3), power(delta, number(2))),
                     big_o(power(delta, number(3))))
    out = [
        *steps.secular_equation(),
        Step(("The spectrum of a hypercube is known, so that the watched corner's resolvent is a finite sum:",),
             (Line(times(steps.BRA, power(plus(steps.H, times(MINUS_ONE, E)), MINUS_ONE), steps.KET),
                   sum_of_powers(setting, cube, 1)),)),
        Step(("so that the secular equation reads, everything on one side,",), (Line(letter("F"), value),),
             earns=secular.id),
        Step(("At ", TAU, " = 0 its zeros are those of the sum, one between any two neighbouring levels of ", steps.H,
              ". Around such a zero the resolvent is"), (Line(expansion, None),),
             where=("with ", operator("S", "n"), " the same sum over the n-th powers of its fractions.")),
        Step(("The first of these is",), (Line(operator("S", 2), sum_of_powers(setting, cube, 2)),)),
        Step(("Inserting ", delta, " as a series in ", times(I_UNIT, TAU), " and solving order by order: the energy,"),
             (Line(call("Re", steps.EPS), plus(in_tau(energy), big_o(power(TAU, number(even))))),),
             earns="levels.1.energy"),
        Step(("and the rate:",),
             (Line(times(number(-2), call("Im", steps.EPS)), plus(in_tau(rate), big_o(power(TAU, number(odd))))),),
             earns="levels.1.rate"),
    ]
    if weight is not None:
        out.append(Step(("The level's state is the resolvent applied to the watched corner, normalised. The start's "
                         "weight on it, with Krawtchouk's polynomials for the corner it stands on:",),
                        (Line(operator("w"), weight),), earns="levels.1.weight"))
    return tuple(out)
