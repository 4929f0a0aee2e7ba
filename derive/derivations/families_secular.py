"""Secular functions of families whose size is a letter, where only they are closed, or beside the levels.

    F(E, tau) = <d|(H-E)^(-1)|d> + i tau/2 - (tau^2/12) <d|H-E|d> - (tau^4/720) <d|(H-E)^3|d> + O(tau^6),

zero at the bright levels;

paths (E = -2 T cos(theta)):   1/<d|(H-E)^(-1)|d> = C - E - T sum_a sin(l_a theta)/sin((l_a + 1) theta),
a ring of N sites adds         - 2 T cos(Phi) sin(theta)/sin(N theta)
hypercube (dimension d, hopping t):    <d|(H-E)^(-1)|d> = 2^-d sum_j binomial(d, j)/(t (d - 2 j) - E)

Moments <d|H^n|d> count closed walks.  Those that a path's far end or a ring's far side would change are kept out by
an assumption on the sizes.  Path resolvents and the hypercube's spectrum are textbook material; put together here.
"""

from __future__ import annotations

from collections.abc import Sequence
from math import comb, factorial

from derive.derivations.families import Cube, Paths, Unequal, at_least
from derive.derivations.levels import steps
from derive.derivations.levels.topic import bernoulli
from derive.errors import NotCovered
from derive.exact.field import Field
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
    plus,
    power,
    times,
)
from derive.problem.quantities import Quantity
from derive.problem.setting import Relation, Setting
from derive.record.said import Claim, Derivation, Kind, Line, Step

E = letter("E")


def secular_claim(setting: Setting, seen: Paths | Unequal | Cube, order: int, every: str) -> Claim:
    """`levels.secular`, up to the even power of tau that the order leaves out."""
    if any(x.name == "E" for x in setting.letters):
        raise NotCovered("the letter E stands for the energy in a secular function; name yours otherwise")
    kept = max(2, order + 1 if order % 2 else order + 2)
    terms = [resolvent(setting, seen), times(I_UNIT, TAU, inverse(number(2)))]
    moments = returns_of(seen, kept - 3)
    for n in range(2, kept, 2):
        front = number(bernoulli(n) * (-1) ** (n // 2) / factorial(n))
        terms.append(times(front, _moved(moments, n - 1), power(TAU, number(n))))
    phrase = f"up to O(tau^{kept})" + (f", for every {every}" if every else "")
    return Claim(
        "levels.secular", "levels", Quantity("secular function"), plus(*terms),
        Kind("order", phrase, kept, every=every or None), assume=deep_enough(setting, seen, kept - 1),
        valid_for="E no eigenvalue of H that the detector sees; small h*tau",
    )


def _moved(moments: Sequence[Formula], n: int) -> Formula:
    """<d|(H - E)^n|d>."""
    return plus(*(
        times(number((-1) ** j * comb(n, j)), moments[n - j], *_whole_power(E, j))
        for j in range(n + 1) if moments[n - j] != ZERO
    ))


def _whole_power(f: Formula, n: int) -> tuple[Formula, ...]:
    return (f if n == 1 else power(f, number(n)),) if n else ()


def returns_of(seen: Paths | Unequal | Cube, highest: int) -> tuple[Formula, ...]:
    """<d|H^n|d>, n = 0 ... highest (at least 1), as long as no walk gets around the ring or to a path's end."""
    highest = max(highest, 1)
    if isinstance(seen, Cube):
        d, hop = seen.dimension, power(seen.t, number(2))
        squares = [times(number(n), plus(d, number(1 - n)), hop) for n in range(1, highest + 1)]
        return _returns(ZERO, squares, highest)
    hop = power(seen.T, number(2))
    count = seen.count if isinstance(seen, Paths) else number(sum(f != ZERO for f in seen.lengths))
    return _returns(seen.C, [times(count, hop), *[hop] * highest], highest)


def _returns(C: Formula, squares: Sequence[Formula], highest: int) -> tuple[Formula, ...]:
    """<e_0|H^n|e_0> on a chain of layers with energies C, 0, 0, ...; `squares` couple each layer to the next."""
    chain, found = [ONE], [ONE]
    for n in range(1, highest + 1):
        chain = [_reached(chain, j, C, squares) for j in range(n + 1)]
        found.append(chain[0])
    return tuple(found)


def _reached(chain: Sequence[Formula], j: int, C: Formula, squares: Sequence[Formula]) -> Formula:
    """Layer j of H applied to the chain, with H e_j = e_(j+1) + squares[j-1] e_(j-1)."""
    terms = [chain[j - 1]] if 1 <= j <= len(chain) else []
    if j == 0 and C != ZERO:
        terms.append(times(C, chain[0]))
    if j + 1 < len(chain):
        terms.append(times(squares[j], chain[j + 1]))
    return plus(*terms)


def deep_enough(setting: Setting, seen: Paths | Unequal | Cube, order: int) -> tuple[Relation, ...]:
    """What sizes must meet for the moments in Y up to tau^order, where their domains do not say it."""
    if isinstance(seen, Cube):
        return ()
    steps_out = order // 2 - 1
    if steps_out < 1:
        return ()
    wanted: list[tuple[Formula, int]] = []
    if isinstance(seen, Paths):
        size = _simple(seen.length + 1, setting) if seen.closed else seen.length
        wanted = [(size, 2 * (order // 2) if seen.closed else steps_out)]
    else:
        wanted = [(f, steps_out) for f in seen.lengths if f != ZERO]
    return tuple(r for size, least in wanted for r in at_least(size, least, setting))


def secular_alone(setting: Setting, seen: Unequal, order: int, every: str) -> Derivation:
    """Paths of too many lengths to tell all levels apart: the equation that they solve."""
    claim = secular_claim(setting, seen, order, every)
    value = claim.value if isinstance(claim.value, Formula) else ZERO
    reason = "With the energy written as an angle, each path's resolvent is a ratio of sines, and they add up:"
    out = (
        *steps.secular_equation(),
        Step((reason,), (Line(times(steps.BRA, power(plus(steps.H, times(MINUS_ONE, E)), MINUS_ONE), steps.KET),
                              resolvent(setting, seen)),)),
        Step(("so that the levels are the zeros, in ", E, ", of",), (Line(letter("F"), value),), earns=claim.id),
    )
    note = ("Which of these paths share a level depends on all their lengths; numbers for them give the levels.",)
    return Derivation("levels", (claim,), out, notes=(note,))


def resolvent(setting: Setting, seen: Paths | Unequal | Cube) -> Formula:
    """<d|(H-E)^(-1)|d>."""
    if isinstance(seen, Cube):
        return _cube(setting, seen)
    theta = call("acos", times(number(-1), E, inverse(times(number(2), seen.T))))
    if isinstance(seen, Unequal):
        parts = [_path(setting, length, theta) for length in seen.lengths if length != ZERO]
    else:
        parts = [times(seen.count, _path(setting, seen.length, theta))]
        if seen.closed:
            parts.append(_around(setting, seen, theta))
    own = () if seen.C == ZERO else (seen.C,)
    return power(plus(*own, negate(E), *(times(MINUS_ONE, seen.T, p) for p in parts)), MINUS_ONE)


def _path(setting: Setting, length: Formula, theta: Formula) -> Formula:
    return times(call("sin", times(length, theta)),
                 inverse(call("sin", times(_simple(length + 1, setting), theta))))


def _around(setting: Setting, ring: Paths, theta: Formula) -> Formula:
    """2 cos(Phi) sin(theta)/sin(N theta), with the hopping's own sign around the ring."""
    size = _simple(ring.length + 1, setting)
    cosine = call("cos", ring.flux) if ring.flux is not None else ONE
    sign = power(MINUS_ONE, size) if ring.turned else ONE
    return times(number(2), sign, cosine, call("sin", theta), inverse(call("sin", times(size, theta))))


def _cube(setting: Setting, cube: Cube) -> Formula:
    j, d = letter("j"), cube.dimension
    if any(x.name == "j" for x in setting.letters):
        j = letter("i1")
    gap = plus(times(cube.t, plus(d, times(number(-2), j))), negate(E))
    body = times(call("binomial", d, j), inverse(gap))
    return times(power(number(2), negate(d)), Formula("sum", (str(j.args[0]), ZERO, d, body)))


def _simple(f: Formula, setting: Setting) -> Formula:
    field = Field.of([f], setting.domains())
    return field.formula(field.element(f))
