"""Amplitudes between asks where one site of a line or half line has an energy of its own, in balls.

    H = H_0 + eps |p><p|,     x = 2|h| t,     e = eps tau,     a = 2|h| tau

The Laplace transform of J_k(x) is y^k/s, s = (a/2)(y + 1/y), in units of the interval (DLMF 10.22.49 at nu = k).  So
Duhamel's equation for the impurity is algebra in y: the free amplitudes F_0/s of the lattice (powers of y) and

    F = F_0(d, x) - i e (-1)^j F_0(d, p) F_0(p, x)/(s + i e F_0(p, p))

(2j what the way over p is longer than the straight one), a polynomial and simple poles 1/(1 - r y), which belong to

    S_r(x) = sum_(k>=0) r^k J_k(x),     T = S_r - J_0/2,     T' = -kappa T + (r + 1/r) J_0/4,     kappa = (1/r - r)/2.

T is carried from ask to ask by exp(-kappa a), forward where that does not grow and backward, from its own sum, where
it would; between two asks J_0(x + y) is Neumann's sum of J_k(x) J_k(y) (DLMF 10.23.2).  No Fourier integral is taken,
no band, no bound state and no edge is singled out: a bound state is a kappa without real part.
"""

from __future__ import annotations

from collections.abc import Iterator, Sequence
from dataclasses import dataclass

from flint import acb, acb_poly, arb, arb_mat, ctx

from derive.errors import NeedsPrecision
from derive.numerics.precision import upper

BLOCK = 256
"""Asks whose Bessel functions are held at once."""
ONE, UNIT = acb(1), acb(0, 1)


@dataclass(frozen=True)
class Impurity:
    """e = eps tau at site p of a line or (`ends`) of a half line."""

    e: arb
    site: int
    ends: bool


@dataclass(frozen=True)
class Rational:
    """top/below as polynomials in y: what an impurity adds to F."""

    top: acb_poly
    below: acb_poly


@dataclass(frozen=True)
class Scattered:
    """sum_k front[k] J_k(x) + sum_i weights[i] S_(ratios[i])(x)."""

    front: tuple[acb, ...]
    ratios: tuple[acb, ...]
    weights: tuple[acb, ...]


def added(imp: Impurity, a: arb, d: int, x: int) -> Rational:
    """-i e (-1)^j y F_0(d, p) F_0(p, x)/((a/2)(1 + y^2) + i e y F_0(p, p)); on the half line 1 + y^2 cancels."""
    p = imp.site
    m, k = abs(d - p) + abs(p - x), abs(d - x)
    front = acb_poly([0] * (m + 1) + [-UNIT * imp.e * (-1) ** ((m - k) // 2)])
    band = acb_poly([a / 2, 0, a / 2])
    turn = acb_poly([0, UNIT * imp.e])
    if not imp.ends:
        return Rational(front, band + turn)
    mirrors = _mirror(min(d, p)) * _mirror(min(p, x)) * acb_poly([1, 0, 1])
    return Rational(front * mirrors, acb_poly([a / 2]) + turn * _mirror(p))


def _mirror(m: int) -> acb_poly:
    """(1 + (-1)^m y^(2m+2))/(1 + y^2)."""
    return acb_poly([(-1) ** (j // 2) if j % 2 == 0 else 0 for j in range(2 * m + 1)])


def split(f: Rational) -> Scattered:
    """Polynomial part and partial fractions; `NeedsPrecision` where two poles are not told apart."""
    quotient, rest = _divided(f.top, f.below)
    poles, slope = _poles(f.below), f.below.derivative()
    residues = [rest(y) / slope(y) for y in poles]  # c/(y - y_i) = (-c/y_i)/(1 - y/y_i)
    weights = [-c / y for c, y in zip(residues, poles, strict=True)]
    return Scattered(tuple(quotient), tuple(ONE / y for y in poles), tuple(weights))


def _poles(below: acb_poly) -> list[acb]:
    """The roots of a polynomial, isolated to half the precision and sharpened by one step of Newton's in balls."""
    try:
        found = below.roots(tol=arb(2) ** (-ctx.prec // 2), maxprec=2 * ctx.prec)
    except ValueError:
        raise NeedsPrecision("two poles of the impurity's resolvent are not told apart") from None
    slope = below.derivative()
    return [acb(y.mid()) - below(acb(y.mid())) / slope(y) for y in found]


def _divided(top: acb_poly, below: acb_poly) -> tuple[list[acb], acb_poly]:
    """Quotient's coefficients and remainder."""
    rest, divisor = [acb(c) for c in top.coeffs()], [acb(c) for c in below.coeffs()]
    quotient: list[acb] = [acb(0)] * max(0, len(rest) - len(divisor) + 1)
    for k in reversed(range(len(quotient))):
        c = rest[k + len(divisor) - 1] / divisor[-1]
        quotient[k] = c
        for j, b in enumerate(divisor):
            rest[k + j] -= c * b
    return quotient, acb_poly(rest[: len(divisor) - 1])


def unfading(part: Scattered, a: arb) -> list[tuple[arb, arb]]:
    """(E tau, weight) of every term weight exp(-i E tau n) in an amplitude: the S_r with |r| > 1.

    There S_r = exp(-kappa x) - sum_(k>=1) r^(-k) J_(-k)(x), and the sum fades.
    """
    found = []
    for ratio, weight in zip(part.ratios, part.weights, strict=True):
        size = abs(ratio)
        if size.overlaps(arb(1)):
            raise NeedsPrecision("whether the impurity binds a state is too close to call")
        if size > 1:
            kappa = (ONE / ratio - ratio) / 2
            found.append((kappa.imag * a, weight.real))
    return found


# -- sequences


def enclose_scattered(parts: Sequence[Scattered], a: arb, count: int) -> list[list[acb]]:
    """Each part at x = 0, a, 2a, ..., count*a, at the working precision.  All parts share their ratios."""
    ratios = parts[0].ratios
    degree = max(len(p.front) for p in parts)
    steps = [_Step(r, a) for r in ratios]
    kept = max([degree, *(s.terms for s in steps)], default=1)
    weights = _weights(steps, kept)
    free: list[list[acb]] = [[] for _ in parts]
    pushes: list[list[acb]] = [[] for _ in ratios]
    bare: list[arb] = []
    for rows in _blocks(a, count, kept):
        bare += [row[0] for row in rows]
        for values, p in zip(free, parts, strict=True):
            values += [_combined(p.front, row) for row in rows]
        if ratios:
            pushed = arb_mat(rows) * weights
            for i, (push, step) in enumerate(zip(pushes, steps, strict=True)):
                push += [step.widened(acb(pushed[n, 2 * i], pushed[n, 2 * i + 1])) for n in range(len(rows))]
    tails = [step.carried(push, bare, count) for step, push in zip(steps, pushes, strict=True)]
    for values, p in zip(free, parts, strict=True):
        for w, tail in zip(p.weights, tails, strict=True):
            for n, t in enumerate(tail):
                values[n] += w * t
    return free


def _combined(front: tuple[acb, ...], row: list[arb]) -> acb:
    total = acb(0)
    for c, j in zip(front, row, strict=False):
        total += c * j
    return total


def _weights(steps: Sequence[_Step], kept: int) -> arb_mat:
    """Column pairs (Re, Im): what J_k(x) adds to T between x and x + a."""
    columns = [s.moments(kept) for s in steps]
    return arb_mat([[part for c in columns for part in (c[k].real, c[k].imag)] for k in range(kept)])


class _Step:
    """T = S_r - J_0/2 from one ask to the next: T(x + a) = exp(-kappa a) T(x) + push(x).

    push = ((r + 1/r)/4) int_0^a exp(-kappa (a - y)) J_0(x + y) dy.
    """

    def __init__(self, ratio: acb, a: arb):
        self.ratio, self.a = ratio, a
        self.kappa = (ONE / ratio - ratio) / 2
        self.front = (ratio + ONE / ratio) / 4
        self.size = upper(self.front) * a * upper(abs(self.kappa.real) * a).exp()
        self.terms, self.rest = self._length()

    def _length(self) -> tuple[int, arb]:
        """Terms of Neumann's sum, and a bound on the rest: |J_k(x)| <= 1, |J_k(y)| <= (a/2)^k/k!."""
        k, size = 1, self.size * 4
        while True:
            size = size * self.a / (2 * k)
            if k > self.a and size < arb(2) ** (-ctx.prec):
                return k, upper(size)
            k += 1

    def widened(self, x: acb) -> acb:
        return x + acb(arb(0, self.rest), arb(0, self.rest))

    def moments(self, kept: int) -> list[acb]:
        """(2 - [k = 0]) (-1)^k front int_0^a exp(-kappa (a - y)) J_k(y) dy for k < kept; 0 from `terms` on."""
        powers = self._powers(kept)
        out = [acb(0)] * kept
        for k in range(min(self.terms, kept)):
            c, total = arb(1) / (arb(2) ** k * arb(k).fac()), acb(0)
            for j in range((len(powers) - k) // 2):
                total += powers[k + 2 * j] * c
                c /= -4 * (j + 1) * (k + j + 1)
            out[k] = total * self.front * ((1 if k == 0 else 2) * (-1) ** k)
        return out

    def _powers(self, kept: int) -> list[acb]:
        """int_0^a exp(-kappa (a - y)) y^l dy, from the top down, where errors shrink: M_(l-1) = (a^l - kappa M_l)/l.

        What the list leaves out is below (a/2)^l/l! beside the sums; its own top is a ball around 0.
        """
        top = 2 * max(self.terms, kept) + 40
        bound = upper(abs(self.kappa) * self.a).exp() * self.a ** (top + 1)
        out = [acb(0)] * (top + 1)
        out[top] = acb(arb(0, upper(bound)), arb(0, upper(bound)))
        for m in range(top, 0, -1):
            out[m - 1] = (self.a**m - self.kappa * out[m]) / m
        return out

    def carried(self, push: list[acb], bare: list[arb], count: int) -> list[acb]:
        """S_r at every ask.

        What turns is taken out first, T = exp(-i Im(kappa) x) D: a ball that is turned again and again widens.
        """
        phases = [acb(0, -self.kappa.imag * self.a * n).exp() for n in range(count + 1)]
        fall = (-self.kappa.real * self.a).exp()
        if self.kappa.real < 0:
            found, back = [self._at_end(count, bare) / phases[count]], 1 / fall
            for n in range(count - 1, -1, -1):
                found.append((found[-1] - push[n] / phases[n + 1]) * back)
            found.reverse()
        else:
            found = [acb(arb(1) / 2)]
            for n in range(count):
                found.append(found[-1] * fall + push[n] / phases[n + 1])
        return [d * p + j / 2 for d, p, j in zip(found, phases, bare, strict=True)]

    def _at_end(self, count: int, bare: list[arb]) -> acb:
        """S_r - J_0/2 at x = count*a by its own sum; the rest is below |r|^k/(1 - |r|) times 1 or (x/2)^k/k!."""
        size, x, least = upper(self.ratio), self.a * count, arb(2) ** (-ctx.prec)
        if not size < 1:
            raise NeedsPrecision("a pole of the impurity's resolvent is too close to the circle for this precision")
        rest, fall, kept = upper(1 / (1 - size)), arb(1), 1
        while not (rest < least or rest * fall < least):
            rest, fall = upper(rest * size), upper(fall * x / (2 * kept))
            kept += 1
        total, turned = -acb(bare[count]) / 2, self.ratio.log()
        for k, j in enumerate(_long_row(x, kept)):
            total += (k * turned).exp() * j
        left = rest if rest < least else upper(rest * fall)
        return total + acb(arb(0, left), arb(0, left))


def _long_row(x: arb, kept: int) -> list[arb]:
    """J_0(x) ... J_(kept-1)(x) where x may be large: two bits a unit of x more, at its middle, since |J_k'| <= 1."""
    with ctx.workprec(ctx.prec + 2 * int(float(x.mid())) + 64):
        row = bessel_row(arb(x.mid()), max(kept, int(float(x.mid())) + 2))[:kept]
    return [j + arb(0, x.rad()) for j in row]


def _blocks(a: arb, count: int, kept: int) -> Iterator[list[list[arb]]]:
    """J_0 ... J_(kept-1) at x = 0, a, ..., count*a, BLOCK asks at a time."""
    for first in range(0, count + 1, BLOCK):
        yield [bessel_row(a * n, kept) for n in range(first, min(first + BLOCK, count + 1))]


def bessel_row(x: arb, kept: int) -> list[arb]:
    """J_0(x) ... J_(kept-1)(x) by J_(k-1) + J_(k+1) = (2k/x) J_k (DLMF 10.6.1), in the direction that keeps digits."""
    if x.contains(0) or kept < 3:
        return [x.bessel_j(arb(k)) for k in range(kept)]
    upward = x > kept
    row = [x.bessel_j(arb(k)) for k in ((0, 1) if upward else (kept - 1, kept - 2))]
    for k in range(1, kept - 1) if upward else range(kept - 2, 0, -1):
        row.append(row[-1] * (2 * k) / x - row[-2])
    return row if upward else row[::-1]
