"""Road `exact` for several detector states, or a step given: renewal equation or recurrence, as polynomials in z.

For exp(-i H tau), with the seen energies found anew, z_l their phases, W = prod_l (1 - z z_l),

    W u = sum_l D† E_l D prod_(k != l) (1 - z z_k),     W v = sum_l D† E_l psi z z_l prod_(k != l) (1 - z z_k),
    phi_c = sqrt(eta_c) det(M with W v as its column c)/det M,     M = W (1 - A) + W u A,
    det M = det(1 - z K) prod_l (1 - z z_l)^(r - rank E_l D)    on the bright space: the poles.

For a step given, with w_0 the bright part of the start, w_j = K^j w_0 as long as independent, K w_(m-1) = sum_j l_j w_j
and f_n = D† U w_(n-1), the recurrence f_(n+m) = sum_j l_j f_(n+j) gives

    phi_c = sqrt(eta_c) sum_(k=1..m) z^k (f_k - sum_(1<=j<k) l_(m-j) f_(k-j))_c/(1 - sum_j l_j z^(m-j)).

A claimed quotient is multiplied out with these: nothing is divided.  F_n is found by asking n times.  The derivation
expands 1/(1 - z K) on the whole bright space, in another basis.
"""

from __future__ import annotations

from collections.abc import Sequence

from derive.checks.detection.splitting import Forward, missed
from derive.checks.moments.road import Polynomial, combined, multiplied, product_of
from derive.checks.observed import Rows, Sparse
from derive.errors import NotCovered
from derive.exact.field import Element
from derive.formula.tree import ONE, Formula, call, letter, number, plus, times
from derive.problem.setting import Setting, Vector
from derive.record.said import Claim, PerRoot

Z = letter("z")
MOST_STATES = 3
"""Detector states up to which determinants are written out."""


class Columns:
    """The amplitudes on the detectors' states as polynomials and as numbers."""

    def __init__(self, setting: Setting):
        self.forward = Forward(setting)
        self.field = self.forward.field
        self.etas = [w.efficiency for w in setting.detectors for _ in w.vectors]
        self.shares = [self.field.one - self.field.element(missed(w)) for w in setting.detectors for _ in w.vectors]
        self.vectors = [v for w in setting.detectors for v in w.vectors]

    def sides(self, claim: Claim) -> tuple[Formula, Formula]:
        """What is claimed and what it must equal."""
        name = claim.quantity.name if claim.quantity else ""
        if isinstance(claim.value, PerRoot) and claim.value.formula == letter(claim.value.letter) == Z:
            return self._all_poles(claim.value.polynomial)
        if not isinstance(claim.value, Formula) or claim.quantity is None:
            raise NotCovered("a formula is compared here")
        if name == "pole" and claim.origin == "derived":  # the only one
            return self._all_poles(ONE - Z / claim.value)
        if name == "generating function":
            return claim.value, self._generating_function(state_of(claim, len(self.etas)))
        n = claim.quantity.key("ask")
        if name != "detection probability" or not isinstance(n, int):
            raise NotCovered("a generating function or one ask's probability is followed here")
        return claim.value, self._probability(n)

    def _generating_function(self, c: int) -> Formula:
        mixture = self.forward.observed.mixture
        if len(mixture) != 1:
            raise NotCovered("a mixture has no amplitude")
        begun = self._begun(mixture[0][1])
        if not begun:
            return number(0)
        top, bottom = self._by_levels(begun, c) if self.forward.energies else self._by_recurrence(begun, c)
        root = [] if self.etas[c] == ONE else [call("sqrt", self.etas[c])]
        return times(*root, self._written(top)) / self._written(bottom)

    def _begun(self, v: Vector) -> Sparse:
        """The bright part of a state."""
        observed = self.forward.observed
        part = observed.seen_part({x: observed.field.element(f) for x, f in v})
        return {x: self.field.element(observed.field.formula(c)) for x, c in part.items()}

    def _written(self, p: Polynomial) -> Formula:
        return plus(*(self.field.formula(c) * Z ** number(k) if k else self.field.formula(c) for k, c in enumerate(p)))

    def _by_levels(self, begun: Sparse, c: int) -> tuple[Polynomial, Polynomial]:
        self._require_few()
        field, z = self.field, self.forward.z
        lifted = [[field.zero, *(x * f for f in p)] for x, p in zip(z, self._others(), strict=True)]
        m, right = self._matrix(), self._over_levels(begun, lifted)
        replaced = [[x if b == c else f for b, f in enumerate(row)] for row, x in zip(m, right, strict=True)]
        return self._determinant(replaced), self._determinant(m)

    def _others(self) -> list[Polynomial]:
        """prod_(k != l) (1 - z z_k)."""
        z = self.forward.z
        return [product_of(self.field, [x for k, x in enumerate(z) if k != n]) for n in range(len(z))]

    def _matrix(self) -> list[list[Polynomial]]:
        """M."""
        others, whole = self._others(), product_of(self.field, self.forward.z)
        columns = [self._over_levels(self._ket(v), others) for v in self.vectors]
        return [
            [self._entry(whole, column[a], self.shares[b], a == b) for b, column in enumerate(columns)]
            for a in range(len(self.vectors))
        ]

    def _ket(self, v: Vector) -> Sparse:
        return {x: self.field.element(f) for x, f in v}

    def _all_poles(self, claimed: Formula) -> tuple[Formula, Formula]:
        """The claimed polynomial times what det M has more than det(1 - z K), and det M."""
        self._require_few()
        if not self.forward.energies:
            raise NotCovered("poles of a step given are not found again exactly")
        parts = [self.forward.by_energy(self._ket(v)) for v in self.vectors]
        more = [self.field.one]
        for n, z in enumerate(self.forward.z):
            seen = Rows(self.field)
            rank = sum(seen.add(part[n]) for part in parts)
            more = multiplied(self.field, more, product_of(self.field, [z] * (len(self.vectors) - rank)))
        return times(claimed, self._written(more)), self._written(self._determinant(self._matrix()))

    def _require_few(self) -> None:
        if len(self.vectors) > MOST_STATES:
            raise NotCovered(f"determinants of at most {MOST_STATES} detector states are written out")

    def _over_levels(self, v: Sparse, polynomials: Sequence[Polynomial]) -> list[Polynomial]:
        """sum_l (D† E_l v)_a times the polynomial of l, for every a."""
        weights = [self.forward.amplitudes(part) for part in self.forward.by_energy(v)]
        return [
            combined(self.field, [(w[a], p) for w, p in zip(weights, polynomials, strict=True)])
            for a in range(len(self.vectors))
        ]

    def _entry(self, whole: Polynomial, u: Polynomial, a: Element, diagonal: bool) -> Polynomial:
        """W (1 - a) on the diagonal, and a W u."""
        kept = self.field.one - a if diagonal else self.field.zero
        return combined(self.field, [(kept, whole), (a, u)])

    def _determinant(self, rows: list[list[Polynomial]]) -> Polynomial:
        if len(rows) == 1:
            return rows[0][0]
        terms = []
        for c, f in enumerate(rows[0]):
            rest = self._determinant([[x for b, x in enumerate(row) if b != c] for row in rows[1:]])
            sign = self.field.one if c % 2 == 0 else -self.field.one
            terms.append((sign, multiplied(self.field, f, rest)))
        return combined(self.field, terms)

    def _by_recurrence(self, begun: Sparse, c: int) -> tuple[Polynomial, Polynomial]:
        _, moved, last = self.forward.orbit(begun)
        f, m = [self.forward.amplitudes(v)[c] for v in moved], len(last)
        bottom = [self.field.one, *(-last[m - k] for k in range(1, m + 1))]
        top = [self.field.zero, *multiplied(self.field, f, bottom)[:m]]
        return top, bottom

    def _probability(self, n: int) -> Formula:
        total = self.field.zero
        for weight, v in self.forward.observed.mixture:
            state = self._begun(v)
            for _ in range(n - 1):
                state = self.forward.undetected(state)
            for f, eta in zip(self.forward.amplitudes(self.forward.step(state)), self.etas, strict=True):
                share = self.field.element(weight) * self.field.element(eta)
                total = total + share * f * self.field.conjugate(f)
        return self.field.formula(total)


def state_of(claim: Claim, count: int) -> int:
    """The place of the detector state that the claim speaks of; it may be left out where there is one."""
    c = claim.quantity.key("component", 1 if count == 1 else None) if claim.quantity else None
    if not isinstance(c, int) or not 1 <= c <= count:
        raise NotCovered(f"which of the {count} detector states is not said")
    return c - 1


def numerator_and_denominator(f: Formula) -> tuple[Formula, Formula]:
    """(p, q) with f = p/q, q collected from the negative whole powers of a product."""
    above, below = [], []
    for factor in f.args if f.head == "times" else (f,):
        inverted = factor.head == "power" and factor.args[1].head == "number" and factor.args[1].args[0] < 0
        if inverted:
            below.append(factor.args[0] ** number(-factor.args[1].args[0]))
        else:
            above.append(factor)
    return times(*above), times(*below)
