"""The generator's coefficients, measured: log(Q U(tau) Q) sampled on a small circle, in balls.

    Q U(tau) Q = exp(-i tau G(tau)) on range(Q),   G = sum_k tau^k G_k,   U(tau) = exp(-i H tau)

With H' = (H - E0)/h, ||H'|| <= 1, and z = h tau on the circle |z| = y, write Q U Q = Q + X(z), so ||X|| <= e^y - 1
and, on range(Q),

    L(z) = log(1 + X) = sum_{n=1}^{T} (-1)^(n+1) X^n/n + R_T,   ||R_T|| <= q^(T+1)/((T+1)(1-q)),  q = e^y - 1
    L(z) = sum_{d>=1} L_d z^d,      G_k = i h^(k+1) L_{k+1}      (and E0 Q is added to G_0)

M samples at z_j = y exp(i theta_j), theta_j = pi/2 + 2 pi j/M, give L_d up to the aliases L_{d+M}, L_{d+2M}, ...
The norms ||L_d|| are majorised by the coefficients c_d of f(y) = -log(2 - e^y), all positive, so that
c_d <= f(1/2) 2^d and the alias of L_d is at most f(1/2) 2^d (2y)^M/(1 - 2y).  R_T enters L_d divided by y^d.
Both are added to every entry: what comes back holds the G_k, whatever y, T and M were.

U(-conj tau) = U(tau)† halves the samples: L(z_{-j}) = L(z_j)†.  No logarithm algebra is used.
Derived here; majorant and rule checked against scipy's and mpmath's matrix logarithms in the tests.
"""

from __future__ import annotations

from dataclasses import dataclass
from math import ceil, log2, sqrt

from flint import acb, acb_mat, arb

from derive.errors import NeedsPrecision, NotCovered
from derive.numerics.precision import BITS_PER_DIGIT
from derive.numerics.system import System, dagger, dense, projector

MAJORANT_AT_HALF = "1.0462"
"""Above f(1/2) = -log(2 - exp(1/2)) = 1.04617...; a test compares."""

HIGHEST_ORDER = 64


@dataclass(frozen=True, slots=True)
class Circle:
    """The choice that only costs time: radius y = 2^-shrink, T terms of the log, M samples, working bits.

    `probing`: chosen for actions on vectors rather than for matrices.
    """

    shrink: int
    terms: int
    samples: int
    bits: int
    probing: bool = False


def choose_circle(order: int, digits: int, size: int, probing: bool = False) -> Circle:
    """The cheapest circle that reaches `digits` at order `order`: by matrix products, or by actions on a vector.

    Small circles need few terms of the log and more bits; measured, the count has a flat minimum (y = 2^-14 at
    order 10, 33 digits, 23 sites).
    """
    candidates = [_circle(order, digits, size, shrink, probing) for shrink in range(4, 160, 2)]
    return min(candidates, key=_action_cost if probing else _cost)


def _circle(order: int, digits: int, size: int, shrink: int, probing: bool) -> Circle:
    goal = digits * BITS_PER_DIGIT + 4
    deep = order + 1
    terms = deep + ceil(goal / (shrink - 1)) + 1
    samples = max(deep, ceil((goal + deep) / (shrink - 1)) + 1)
    bits = ceil(goal + shrink * deep + 4 * log2(size + 1) + 3 * log2(terms + 2) + 16)
    return Circle(shrink, terms, samples, bits, probing)


def dense_cost(size: int, circle: Circle) -> float:
    """Products of one complex number with another that `enclose_generators` takes, roughly."""
    products = (circle.samples // 2 + 1) * (2 * sqrt(circle.terms) + 2) + 3 * circle.bits / circle.shrink
    return products * float(size) ** 3


def _cost(c: Circle) -> float:
    products = 2 * sqrt(c.terms) + 0.15 * c.terms
    return (c.samples // 2 + 1) * products * (c.bits + 200.0)


def _action_cost(c: Circle) -> float:
    return c.samples * c.terms * (c.bits / c.shrink + 2) * (c.bits + 400.0)


def enclose_generators(s: System, order: int, circle: Circle) -> list[acb_mat]:
    """Balls for G_0, ..., G_order (n x n each, energy^(k+1)), at the working precision.

    Valid for any Hermitian H and any detector; what precision is lost only widens the balls.
    """
    if order > HIGHEST_ORDER:
        raise NotCovered(f"order {order} is above {HIGHEST_ORDER}, the highest one that is measured")
    Q = projector(s)
    scaled = _scaled_hamiltonian(s)
    steps = _step_terms(scaled, Q, circle)
    logs = [_log_at(steps, z, circle) for z in _half_circle(circle)]
    unit = s.h if s.h > 0 else arb(1)
    found = [_coefficient(logs, k + 1, circle, unit) for k in range(order + 1)]
    found[0] = found[0] + Q * acb(s.E0)
    return found


def _scaled_hamiltonian(s: System) -> acb_mat:
    """H' = (H - E0)/h; the zero matrix where h = 0."""
    matrix = dense(s)
    for x in range(s.size):
        matrix[x, x] = matrix[x, x] - s.E0
    return matrix * acb(1 / s.h) if s.h > 0 else acb_mat(s.size, s.size)


def _step_terms(scaled: acb_mat, Q: acb_mat, circle: Circle) -> list[acb_mat]:
    """Q (-i H')^m Q/m! for m = 1, 2, ... until y^m/m! is below the working precision; the last term is the tail.

    The tail of the exponential series is at most y^(m+1)/(m+1)! 1/(1 - y) in norm, hence in every entry.
    """
    y = radius(circle)
    power, terms = scaled * acb(0, -1), []
    step = power
    m = 1
    while True:
        terms.append(Q * power * Q)
        if circle.shrink * (m + 1) > circle.bits + 8:
            break
        m += 1
        power = (power * step) * acb(arb(1) / m)
    tail = y ** (m + 1) / arb.fac_ui(m + 1) / (1 - y)
    terms.append(blur(scaled.nrows(), tail))
    return terms


def radius(circle: Circle) -> arb:
    """y = |z| = h |tau|."""
    return arb(2) ** (-circle.shrink)


def blur(size: int, radius: arb) -> acb_mat:
    """A matrix of balls around 0 with the given radius in every entry, real and imaginary part alike."""
    spread = arb(0, radius.upper())
    return acb_mat(size, size, [acb(spread, spread)] * (size * size))


def _half_circle(circle: Circle) -> list[acb]:
    """exp(i theta_j) for j = 0 .. M//2; the others follow by reflection at the imaginary axis."""
    return [phase(j, circle.samples) for j in range(circle.samples // 2 + 1)]


def phase(j: int, M: int) -> acb:
    """i exp(2 pi i j/M)."""
    return acb(0, 1) * acb(arb(2 * j) / M).exp_pi_i()


def _log_at(steps: list[acb_mat], direction: acb, circle: Circle) -> acb_mat:
    """log(1 + X) at z = y * direction, with the tail R_T in every entry."""
    z = direction * radius(circle)
    *terms, tail = steps
    X, factor = tail, acb(1)
    for term in terms:
        factor *= z
        X = X + term * factor
    return _log_one_plus(X, circle.terms) + blur(X.nrows(), log_tail(circle))


def log_tail(circle: Circle) -> arb:
    """Bound on ||R_T||."""
    q = radius(circle).expm1()
    return q ** (circle.terms + 1) / ((circle.terms + 1) * (1 - q))


def enclose_log(X: acb_mat, q: arb, bits: int) -> acb_mat:
    """log(1 + X) for ||X|| <= q < 1 by its series, the tail q^(T+1)/((T+1)(1-q)) in every entry."""
    if not q < 1:
        raise NeedsPrecision("the logarithm's series needs a norm below 1")
    terms = ceil(bits / -log2(float(q.upper()))) + 1 if q > 0 else 1
    tail = q ** (terms + 1) / ((terms + 1) * (1 - q))
    return _log_one_plus(X, terms) + blur(X.nrows(), tail)


def _log_one_plus(X: acb_mat, terms: int) -> acb_mat:
    """sum_{n=1}^{terms} (-1)^(n+1) X^n/n by blocks of about sqrt(terms) powers (Paterson and Stockmeyer's scheme)."""
    block = max(1, ceil(sqrt(terms)))
    powers = [X]
    while len(powers) < block:
        powers.append(powers[-1] * X)
    total: acb_mat | None = None
    for first in range((terms - 1) // block * block, -1, -block):
        inner = acb_mat(X.nrows(), X.nrows())
        for n in range(first + 1, min(first + block, terms) + 1):
            inner = inner + powers[n - first - 1] * acb(arb((-1) ** (n + 1)) / n)
        total = inner if total is None else inner + powers[-1] * total
    return acb_mat(X.nrows(), X.nrows()) if total is None else total


def _coefficient(logs: list[acb_mat], d: int, circle: Circle, unit: arb) -> acb_mat:
    """G_{d-1} = i h^d L_d from the samples: L_d = S + (-1)^d S†, S = sum over half the circle."""
    M, y = circle.samples, radius(circle)
    S = acb_mat(logs[0].nrows(), logs[0].nrows())
    for j, sample in enumerate(logs):
        weight = arb(1) / M if 0 < j < M - j else arb(1) / (2 * M)  # own mirror image: half
        S = S + sample * (phase(j, M) ** (-d) * weight)
    L = (S + dagger(S) * acb((-1) ** d)) * acb(y ** (-d))
    return (L + blur(S.nrows(), alias_bound(d, circle))) * acb(0, unit**d)


def alias_bound(d: int, circle: Circle) -> arb:
    """Bound on sum_{l>=1} ||L_{d+lM}|| y^(lM)."""
    twice = 2 * radius(circle)
    return arb(MAJORANT_AT_HALF) * arb(2) ** d * twice**circle.samples / (1 - twice)
