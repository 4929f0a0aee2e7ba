"""The generator's first coefficients, written by hand from its published and derived words, as formula matrices.

    G_0 = A,  G_1 = -(i/2) B_0,  G_2 = (A B_0 + B_0 A)/12 - B_1/6,
    G_3 = i [B_2/24 - (A B_1 + B_1 A)/24 + A B_0 A/24 - B_0 B_0/12]

with A = QHQ, V = QHP, C = PHP, B_k = V C^k V†; plain products of formulas, nothing simplified, no project algebra.
"""

from __future__ import annotations

from collections.abc import Callable
from fractions import Fraction

from derive.formula.tree import I_UNIT, ONE, ZERO, Formula, call, letter, number, plus, times
from derive.problem.quantities import Quantity
from derive.problem.setting import Setting
from derive.record.said import EXACTLY, Claim, Expansion, Kind, Matrix
from tests.strategies import POSITIVE, REAL, setting_of, site

Square = list[list[Formula]]
G, DELTA, PHI = letter("g"), letter("Delta"), letter("phi")
PHASE = call("exp", I_UNIT * PHI)


def square(setting: Setting) -> Square:
    """H, dense."""
    rows = setting.space.rows  # type: ignore[union-attr]
    return [[dict(row).get(y, ZERO) for y in range(len(rows))] for row in rows]


def product(*factors: Square) -> Square:
    first, *rest = factors
    for second in rest:
        first = _times(first, second)
    return first


def _times(a: Square, b: Square) -> Square:
    n = range(len(a))
    return [[_sum(a[x][k] * b[k][y] for k in n if ZERO not in (a[x][k], b[k][y])) for y in n] for x in n]


def _sum(terms) -> Formula:  # type: ignore[no-untyped-def]
    kept = [t for t in terms if t != ZERO]
    return plus(*kept) if kept else ZERO


def combination(*pairs: tuple[Formula, Square]) -> Square:
    n = range(len(pairs[0][1]))
    return [[_sum(c * m[x][y] for c, m in pairs if m[x][y] != ZERO) for y in n] for x in n]


def dagger(m: Square) -> Square:
    n = range(len(m))
    return [[call("conj", m[y][x]) if m[y][x] != ZERO else ZERO for y in n] for x in n]


def transposed(m: Square) -> Square:
    return [list(column) for column in zip(*m, strict=True)]


class Blocks:
    """A, V, C and the projector of a setting, as n x n formula matrices."""

    def __init__(self, setting: Setting):
        H = square(setting)
        n = range(len(H))
        P = [[ZERO for _ in n] for _ in n]
        for watcher in setting.detectors:
            for vector in watcher.vectors:
                for x, a in vector:
                    for y, b in vector:
                        P[x][y] = _sum((P[x][y], times(a, call("conj", b)) if b != ONE else a))
        one = [[ONE if x == y else ZERO for y in n] for x in n]
        Q = combination((ONE, one), (number(-1), P))
        self.A, self.V, self.C = product(Q, H, Q), product(Q, H, P), product(P, H, P)
        self.adjoint = dagger(self.V)

    def B(self, k: int = 0) -> Square:
        return product(self.V, *[self.C] * k, self.adjoint)

    def mu(self, m: int) -> Square:
        return product(self.adjoint, *[self.A] * m, self.V)


def q(a: int, b: int = 1) -> Formula:
    return number(Fraction(a, b))


def g0(b: Blocks) -> Square:
    return b.A


def g1(b: Blocks) -> Square:
    return combination((q(-1, 2) * I_UNIT, b.B()))


def g2(b: Blocks) -> Square:
    return combination((q(1, 12), product(b.A, b.B())), (q(1, 12), product(b.B(), b.A)), (q(-1, 6), b.B(1)))


def g3(b: Blocks) -> Square:
    return combination(
        (q(1, 24) * I_UNIT, b.B(2)),
        (q(-1, 24) * I_UNIT, product(b.A, b.B(1))),
        (q(-1, 24) * I_UNIT, product(b.B(1), b.A)),
        (q(1, 24) * I_UNIT, product(b.A, b.B(), b.A)),
        (q(-1, 12) * I_UNIT, product(b.B(), b.B())),
    )


RIGHT: dict[int, Callable[[Blocks], Square]] = {0: g0, 1: g1, 2: g2, 3: g3}


def matrix(m: Square) -> Matrix:
    patch = tuple((x, tuple((y, f) for y, f in enumerate(row) if f != ZERO)) for x, row in enumerate(m))
    return Matrix(len(m), (), tuple((x, row) for x, row in patch if row))


def claim(order: int | None, value, name: str = "claim.mine", kind: Kind = EXACTLY, **keys: object) -> Claim:  # type: ignore[no-untyped-def]
    """A claim about G_order (None: about G up to the kind's order)."""
    named = (() if order is None else (("order", order),)) + tuple(keys.items())
    return Claim(name, "generator", Quantity("generator", named), value, kind)


def truncated(setting: Setting, *coefficients: Square) -> Claim:
    """generator.truncated with the given coefficients."""
    n = len(coefficients)
    kind = Kind("order", f"up to O(tau^{n})", n)
    value = Expansion("tau", tuple(range(n)), tuple(matrix(m) for m in coefficients), n)
    return claim(None, value, "generator.truncated", kind)


def twisted_graph() -> Setting:
    """Five sites in a ring with a chord, one complex bond at the watched site, which is detuned."""
    rows: list[dict[int, Formula]] = [{} for _ in range(5)]
    for x, y, f, mirrored in (
        (0, 1, -G, -G),
        (1, 2, -G * PHASE, -G * call("exp", -I_UNIT * PHI)),
        (2, 3, -2 * G, -2 * G),
        (3, 4, -G, -G),
        (0, 4, -G, -G),
        (1, 3, G / 2, G / 2),
    ):
        rows[x][y], rows[y][x] = f, mirrored
    rows[1][1], rows[3][3] = DELTA, G / 3
    return setting_of(rows, (site(1),), g=POSITIVE, Delta=REAL, phi=REAL)


def watched_plane() -> Setting:
    """The same graph with a plane of two complex vectors watched."""
    s = twisted_graph()
    c, d = q(3, 5), q(4, 5)
    vectors = (((1, c), (3, d * I_UNIT)), ((1, d * I_UNIT), (3, c)))
    return setting_of([dict(row) for row in s.space.rows], vectors, g=POSITIVE, Delta=REAL, phi=REAL)  # type: ignore[union-attr]


