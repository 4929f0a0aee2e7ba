"""Road `exact` for splitting probabilities: the undetected state followed forward.

With w_0 the bright part of a start state, w_(j+1) = K w_j as long as independent, C the companion matrix of K on them,

    R = sum_n (K^n w_0)(K^n w_0)†,     r - C r C† = e_0 e_0†,     S_w = eta_w sum_ij r_ij <w_j|U† P_w U|w_i>.

The derivation solves for the observable instead, in another basis.  U is a step given, or sum_l z_l E_l with seen
energies found anew (`energies.py`), which on bright states is all of exp(-i H tau).
"""

from __future__ import annotations

from collections.abc import Callable, Sequence
from fractions import Fraction

from derive.checks.asked import formula_of
from derive.checks.detection.road import difference, refuted
from derive.checks.energies import phase_of, rational_rows, roots_of, scaled
from derive.checks.observed import Observed, Rows, Sparse, annihilated, subtract
from derive.checks.powers import stirling
from derive.errors import NotCovered
from derive.exact.field import Element, Field
from derive.formula.tree import I_UNIT, ONE, Formula, call, number
from derive.problem.setting import Check, Finite, Setting, Watcher
from derive.record.said import Claim, Finding

Act = Callable[[Sparse], Sparse]
LARGEST, LARGEST_IN_PHASES = 12, 6


def check_splitting(setting: Setting, claims: Sequence[Claim], effort: Check) -> dict[str, Finding]:
    """One finding for each claim that has a place in an exact field and a small enough bright space."""
    mine = [c for c in claims if c.quantity is not None and c.quantity.name == "splitting probability"]
    found: dict[str, Finding] = {}
    try:
        shares = Forward(setting).shares() if mine else {}
    except (NotCovered, ZeroDivisionError):
        return {}
    for claim in mine:
        name = claim.quantity.key("detector") if claim.quantity else None
        if name in shares and isinstance(claim.value, Formula) and claim.kind.name == "exactly":
            finding = _judge(setting, claim, shares[str(name)], effort)
            if finding is not None:
                found[claim.id] = finding
    return found


def _judge(setting: Setting, claim: Claim, truth: Formula, effort: Check) -> Finding | None:
    try:
        residual = difference(formula_of(claim), truth, setting)
    except (NotCovered, ZeroDivisionError):
        return None
    if residual is None:
        return Finding("proved", "exact", evidence="followed forward, the difference is exactly zero")
    return refuted(setting, claim, effort, "splitting probability", residual)


class Forward:
    """The system with its phases in one field."""

    def __init__(self, setting: Setting):
        if setting.interval.law != "fixed":
            raise NotCovered("fixed intervals are needed here")
        self.setting = setting
        self.observed = Observed(setting)
        self.energies = self._energies()
        if self.observed.bright > (LARGEST_IN_PHASES if self.energies else LARGEST):
            raise NotCovered("too many bright dimensions for an exact solution")
        phases = [phase_of(setting, e) for e in self.energies]
        also = [f for w in setting.detectors for f in (w.efficiency, missed(w))]
        formulas = [*self.observed.formulas, *self.energies, *phases, *also, I_UNIT]
        self.field = Field.of(formulas, setting.domains())
        self.z = [self.field.element(f) for f in phases]
        self.rows = [{y: self.field.element(f) for y, f in row} for row in self.observed.space.rows]

    def _energies(self) -> list[Formula]:
        """Seen energies of H; none for a step given."""
        if not isinstance(self.setting.space, Finite):
            return []
        unit, shares = rational_rows(self.setting)
        plain, n = self.observed.field, self.observed.space.size
        across = [{y + k * n: plain.rational(q) for y, q in row.items()}
                  for k in range(len(self.observed.vectors)) for row in shares]
        together = {x + k * n: plain.conjugate(plain.element(f))
                    for k, v in enumerate(self.observed.vectors) for x, f in v}
        _, mu = annihilated(together, across, plain)
        return [scaled(unit, r) for r in roots_of(mu)]

    def shares(self) -> dict[str, Formula]:
        """S by the detector's name, over the start's mixture."""
        totals = {w.name or "": self.field.zero for w in self.setting.detectors}
        for weight, v in self.observed.mixture:
            psi = {x: self.observed.field.element(f) for x, f in v}
            part = self.observed.seen_part(psi)
            begun = {x: self._lift(c) for x, c in part.items()}
            if begun:
                for name, share in self._followed(begun).items():
                    totals[name] = totals[name] + self.field.element(weight) * share
        return {name: self.field.formula(x) for name, x in totals.items()}

    def _lift(self, x: Element) -> Element:
        return self.field.element(self.observed.field.formula(x))

    def step(self, v: Sparse) -> Sparse:
        """U v, v bright."""
        if not self.energies:
            return self._applied(v)
        out: Sparse = {}
        for z, part in zip(self.z, self.by_energy(v), strict=True):
            subtract(out, part, -z)
        return out

    def by_energy(self, v: Sparse) -> list[Sparse]:
        """E_l v for every seen energy, v bright."""
        energies, found = [self.field.element(e) for e in self.energies], []
        for n, energy in enumerate(energies):
            part = dict(v)
            for m, other in enumerate(energies):
                if m != n:
                    moved = self._applied(part)
                    subtract(moved, part, other)
                    scale = self.field.one / (energy - other)
                    part = {x: c * scale for x, c in moved.items()}
            found.append(part)
        return found

    def _applied(self, v: Sparse) -> Sparse:
        out: Sparse = {}
        for x, row in enumerate(self.rows):
            total = self.field.zero
            for y, c in row.items():
                if y in v:
                    total = total + c * v[y]
            if total:
                out[x] = total
        return out

    def moment(self, p: int) -> Element:
        """sum_n n^p F_n over the mixture, from b_i = sum_m binomial(m+i-1, i-1) |K^m psi|^2; p = 0: the total."""
        if p == 0:
            return self._lift(self.observed.seen_share())
        total = self.field.zero
        for weight, v in self.observed.mixture:
            part = self.observed.seen_part({x: self.observed.field.element(f) for x, f in v})
            if not part:
                continue
            states, _, last = self.orbit({x: self._lift(c) for x, c in part.items()})
            r: list[list[Element]] | None = None
            for c in stirling(p)[1:]:
                r = _summed(self.field, last, r)
                lengths = self.field.zero
                for i, a in enumerate(states):
                    for j, b in enumerate(states):
                        lengths = lengths + r[i][j] * self._inner(b, a)
                total = total + self.field.element(weight) * lengths.scaled(Fraction(c))
        return total

    def _inner(self, a: Sparse, b: Sparse) -> Element:
        total = self.field.zero
        for x, c in a.items():
            if x in b:
                total = total + self.field.conjugate(c) * b[x]
        return total

    def amplitudes(self, v: Sparse) -> list[Element]:
        """D† v, the states of all detectors in order."""
        return [c for watcher in self.setting.detectors for c in self._overlaps(watcher, v)]

    def undetected(self, v: Sparse) -> Sparse:
        """K v, v bright."""
        return self._unclicked(self.step(v))

    def _overlaps(self, watcher: Watcher, v: Sparse) -> list[Element]:
        out = []
        for vector in watcher.vectors:
            total = self.field.zero
            for x, f in vector:
                if x in v:
                    total = total + self.field.conjugate(self.field.element(f)) * v[x]
            out.append(total)
        return out

    def _unclicked(self, v: Sparse) -> Sparse:
        """A "no" of every detector."""
        out = dict(v)
        for watcher in self.setting.detectors:
            a = self.field.one - self.field.element(missed(watcher))
            for vector, c in zip(watcher.vectors, self._overlaps(watcher, v), strict=True):
                subtract(out, {x: self.field.element(f) for x, f in vector}, a * c)
        return out

    def _followed(self, begun: Sparse) -> dict[str, Element]:
        """S_w for one bright state."""
        states, moved, last = self.orbit(begun)
        r = _summed(self.field, last)
        out = {}
        for watcher in self.setting.detectors:
            eta = self.field.element(watcher.efficiency)
            seen = [self._overlaps(watcher, u) for u in moved]
            total = self.field.zero
            for i in range(len(states)):
                for j in range(len(states)):
                    for a, b in zip(seen[j], seen[i], strict=True):
                        total = total + r[i][j] * self.field.conjugate(a) * b
            out[watcher.name or ""] = total * eta
        return out

    def orbit(self, begun: Sparse) -> tuple[list[Sparse], list[Sparse], list[Element]]:
        """w_0 ... w_(m-1), U w_j, and the coordinates of K w_(m-1)."""
        size, marked = self.observed.space.size, Rows(self.field)
        states: list[Sparse] = []
        moved: list[Sparse] = []
        state = dict(begun)
        while marked.add({**state, size + len(states): self.field.one}) and min(marked.last) < size:
            states.append(state)
            moved.append(self.step(state))
            state = self._unclicked(moved[-1])
        rest = marked.last
        top = rest[size + len(states)]
        return states, moved, [-(rest.get(size + k, self.field.zero) / top) for k in range(len(states))]


def missed(watcher: Watcher) -> Formula:
    """sqrt(1 - eta)."""
    eta = watcher.efficiency
    left = number(1 - eta.args[0]) if eta.head == "number" else ONE - eta
    return left if left in (number(0), number(1)) else call("sqrt", left)


def _summed(field: Field, last: list[Element], source: list[list[Element]] | None = None) -> list[list[Element]]:
    """r with r - C r C† = source (e_0 e_0† if None); C e_j = e_(j+1), C e_(m-1) = sum_k last_k e_k."""
    m = len(last)
    rows = Rows(field)
    for i in range(m):
        for j in range(m):
            row: Sparse = {i * m + j: field.one}
            right = source[i][j] if source is not None else field.one if i == j == 0 else field.zero
            if right:
                row[m * m] = right
            for a, c in _into(field, last, i):
                for b, d in _into(field, last, j):
                    subtract(row, {a * m + b: field.one}, c * field.conjugate(d))
            rows.add(row)
    solution = [field.zero] * (m * m)
    for pivot in sorted(rows.held, reverse=True):
        total = rows.held[pivot].get(m * m, field.zero)
        for y, v in rows.held[pivot].items():
            if y != pivot and y < m * m:
                total = total - v * solution[y]
        solution[pivot] = total
    return [[solution[i * m + j] for j in range(m)] for i in range(m)]


def _into(field: Field, last: list[Element], i: int) -> list[tuple[int, Element]]:
    """(a, C_ia), non-zero ones."""
    m = len(last)
    out = [(i - 1, field.one)] if i else []
    if last[i]:
        merged = dict(out)
        merged[m - 1] = merged.get(m - 1, field.zero) + last[i]
        out = list(merged.items())
    return out
