"""Road `exact` for strengths, couplings, losses, error orders and the cascade: the secular equation itself.

A level of the null-outcome step obeys P (1 - exp(i (H - eps) tau))^-1 P chi = chi/a.  With 1/(1 - e^y) = sum_m b_m y^m
(b_-1 = -1, b_0 = 1/2, b_1 = -1/12, ...; found here by inverting the series of (1 - e^y)/y), that is R = Y,

    R = P (H - eps)^-1 P,      Y = -i tau [ c/2 - sum_{m>=1} b_m (i tau)^m P (H - eps)^m P ],      c = coth(kappa/2),

and an absorber has R = Y_abs.  Parameters are those for which Y_abs begins like Y; an absorber's levels part from the
measured ones at the first power of tau where Y_abs and Y do, energies being even in tau and rates odd (eta free of
tau).  Levels are simple zeros of R - Y at tau = 0 (rank one), or analytic branches of a Hermitian family.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import replace
from fractions import Fraction
from math import factorial

from derive.checks.absorber.slow import Near
from derive.errors import NotCovered
from derive.exact.field import Element
from derive.exact.sparse import Sparse, added, multiplied, scaled
from derive.formula.text import text
from derive.formula.tree import TAU, Formula, letter, number, power, times
from derive.numerics.nonzero import is_surely_nonzero
from derive.numerics.points import sample_points
from derive.problem.efficiency import is_free_of_interval
from derive.problem.setting import Check, Domain, Letter, Setting
from derive.record.holds import tau_power
from derive.record.said import Claim, Finding, Matrix

LEVEL = "level_energy"  # the letter of eps in the exact field
MOST_ATTACHED = 5  # sites of a network that is compared exactly: 1.5 s with three letters, six take 26 s
TERMS = 5  # powers of H - eps in Y: it is known through tau^6


def inverse_of_one_minus_exp(n: int) -> list[Fraction]:
    """b_-1, b_0, ..., b_(n-1) of 1/(1 - e^y) = sum_m b_m y^m."""
    series = [Fraction(-1, factorial(k + 1)) for k in range(n + 1)]  # (1 - e^y)/y
    out = [1 / series[0]]
    for k in range(1, n + 1):
        out.append(-sum((series[m] * out[k - m] for m in range(1, k + 1)), Fraction(0)) / series[0])
    return out


def check_secular(setting: Setting, claims: tuple[Claim, ...], effort: Check) -> dict[str, Finding]:
    """A finding for each claim about an absorber's parameters or error orders that has a place in an exact field."""
    found = {}
    networks = Networks(setting, network_beside(claims))
    for claim in claims:
        try:
            finding = _judge(setting, claim, networks, effort)
        except (NotCovered, ZeroDivisionError):
            continue
        if finding is not None:
            found[claim.id] = finding
    return found


def _judge(setting: Setting, claim: Claim, networks: Networks, effort: Check) -> Finding | None:
    if claim.quantity is None or claim.kind.name != "exactly":
        return None
    name, kind = claim.quantity.name, str(claim.quantity.key("absorber"))
    if name in ("energy error", "rate error"):
        return _error_order(setting, claim, networks, kind, name)
    if isinstance(claim.value, Matrix) and name == "absorber coupling" and kind == "cascade":
        return _network(setting, claim, networks, effort)
    equation = EQUATIONS.get((name, kind if name != "return factor" else "plain"))
    if equation is None or not isinstance(claim.value, Formula):
        return None
    near = Near(setting, 1, [claim.value, TAU])
    return _verdict(setting, claim, effort, near, equation(near, near.field.element(claim.value)))


def _verdict(setting: Setting, claim: Claim, effort: Check, near: Near, residual: Element) -> Finding:
    if not residual:
        return Finding("proved", "exact", evidence="the secular equation's coefficients leave an exact zero")
    left = near.field.formula(residual)
    for point in sample_points(setting, effort, claim.assume):
        if is_surely_nonzero(left, point):
            evidence = f"the secular equation's coefficients leave {text(left)} instead of 0"
            return Finding("refuted", "exact", points=1, point=point.text(), evidence=evidence)
    return Finding("undecided", "exact", evidence=f"{text(left)} vanishes where tried")


# -- parameters: Y = y_1 tau + y_2 tau^2 (C - eps) + ..., y_1 = -i c/2


def _second(near: Near) -> Element:
    """y_2 = -b_1."""
    return near.number(-inverse_of_one_minus_exp(2)[2])


def _tau(near: Near) -> Element:
    return near.field.element(TAU)


def _dressing(near: Near) -> Element:
    """1/s^2 = 1 + y_2/y_1^2, from 1/Y = 1/(y_1 tau) - (y_2/y_1^2) (C - eps) + O(tau)."""
    first = (near.i * near.coth()).scaled(Fraction(-1, 2))
    return near.field.one + _second(near) / (first * first)


def _plain_strength(near: Near, x: Element) -> Element:
    """-i/Gamma = y_1 tau."""
    return (x * _tau(near) * near.coth()).scaled(Fraction(1, 2)) - near.field.one


def _dressed_coupling(near: Near, x: Element) -> Element:
    return x * x * _dressing(near) - near.field.one


def _dressed_strength(near: Near, x: Element) -> Element:
    """i Gamma'/s^2 = 1/(y_1 tau)."""
    return (x * _dressing(near) * _tau(near) * near.coth()).scaled(Fraction(1, 2)) - near.field.one


def _ancilla_coupling(near: Near, x: Element) -> Element:
    """1/k_a^2 = y_2 tau^2."""
    return x * x * _second(near) * _tau(near) * _tau(near) - near.field.one


def _ancilla_loss(near: Near, x: Element) -> Element:
    """-i l/k_a^2 = y_1 tau."""
    return x * _second(near) * _tau(near) - near.coth().scaled(Fraction(1, 2))


def _return_factor(near: Near, x: Element) -> Element:
    """A "no" keeps q of what stayed: all asks together feed -i tau V/(1 - q); the absorber feeds -i V/Gamma."""
    one = near.field.one
    ratio = (one / (one - near.q)) / near.coth().scaled(Fraction(1, 2))
    return x - ratio * ratio


def _cascade_loss(near: Near, x: Element) -> Element:
    """-i l on the first site is five times the plain absorber's potential, where 1/Y_net = 1/Y through tau^4."""
    return _plain_strength(near, x.scaled(Fraction(1, 5)))


EQUATIONS: dict[tuple[str, str], Callable[[Near, Element], Element]] = {
    ("absorber strength", "plain"): _plain_strength,
    ("absorber strength", "dressed"): _dressed_strength,
    ("absorber coupling", "dressed"): _dressed_coupling,
    ("absorber coupling", "ancilla"): _ancilla_coupling,
    ("absorber loss", "ancilla"): _ancilla_loss,
    ("absorber strength", "cascade"): _plain_strength,
    ("absorber loss", "cascade"): _cascade_loss,
    ("return factor", "plain"): _return_factor,
}


# -- orders


class Secular:
    """Y through tau^(terms + 1) as an r x r matrix over tau, eps and the setting's letters."""

    def __init__(self, setting: Setting, also: tuple[Formula, ...] = (), terms: int = TERMS):
        if not is_free_of_interval(setting.detectors[0].efficiency):
            raise NotCovered("powers of tau are counted for an efficiency that does not depend on it")
        level = Letter(LEVEL, Domain("real", "real"))
        wider = replace(setting, letters=(*setting.letters, level))
        self.terms = terms
        self.near = Near(wider, terms // 2 + 1, (TAU, letter(LEVEL), *also))
        element = self.near.field.element
        self.tau, self.eps = element(TAU), element(letter(LEVEL))
        self.y = self._expanded()

    def _expanded(self) -> Sparse:
        near = self.near
        b = inverse_of_one_minus_exp(self.terms + 1)
        above = added(near.h, {x: {x: -self.eps} for x in near.sites})
        unit = {-1 - a: {-1 - a: near.field.one} for a in range(near.rank)}
        turn = near.i * self.tau
        total = _times(unit, near.coth().scaled(Fraction(1, 2)))
        vectors, factor = near.d, near.field.one
        for m in range(1, self.terms + 1):
            vectors, factor = multiplied(above, vectors), factor * turn
            if b[m + 1]:
                total = added(total, scaled(_times(multiplied(near.d_dagger, vectors), factor), -b[m + 1]))
        return _times(total, -turn)

    def above(self) -> Sparse:
        """C - eps."""
        near = self.near
        c = multiplied(near.d_dagger, multiplied(near.h, near.d))
        return added(c, {-1 - a: {-1 - a: -self.eps} for a in range(near.rank)})

    def order_of(self, residual: Sparse) -> int:
        """The least power of tau in a matrix; one beyond what is known where it vanishes."""
        at = self.near.field.index[f"letter:{TAU.args[0]}"]
        found = [_least_power(f, at) for row in residual.values() for f in row.values() if f]
        return min(found, default=self.terms + 2)


def _least_power(x: Element, at: int) -> int:
    least = min(int(m[at]) for m, _ in x.num.terms())
    return least if x.den is None else least - min(int(m[at]) for m, _ in x.den.terms())


def _times(a: Sparse, factor: Element) -> Sparse:
    return {x: {y: f * factor for y, f in row.items()} for x, row in a.items()}


def parting_order(secular: Secular, kind: str) -> int:
    """The first power of tau at which Y_abs - Y does not vanish, by the absorber's definition."""
    near, tau = secular.near, secular.tau
    unit = {-1 - a: {-1 - a: near.field.one} for a in range(near.rank)}
    first = (near.i * near.coth() * tau).scaled(Fraction(-1, 2))
    if kind == "plain":
        return secular.order_of(added(_times(unit, first), scaled(secular.y, Fraction(-1))))
    if kind == "ancilla":
        second = _times(secular.above(), _second(near) * tau * tau)
        return secular.order_of(added(added(_times(unit, first), second), scaled(secular.y, Fraction(-1))))
    if kind == "dressed":
        share = near.field.one - _dressing(near)
        inverse = added(_times(secular.above(), share), _times(unit, near.field.one / first))
        product = added(multiplied(inverse, secular.y), scaled(unit, Fraction(-1)))
        return secular.order_of(product) + 1
    raise NotCovered(f"no definition of {kind} to compare with")


def _error_order(setting: Setting, claim: Claim, networks: Networks, kind: str, name: str) -> Finding | None:
    wanted = claimed_power(claim)
    k = parting_order(Secular(setting), kind) if kind != "cascade" else networks.order(networks.beside)
    earned = {"energy error": k if k % 2 == 0 else k + 1, "rate error": k + 1 if k % 2 == 0 else k}[name]
    if wanted > earned:
        return None  # levels may agree better than the equation: the measured road decides
    return Finding("proved", "exact", evidence=f"the secular equations part at tau^{k}")


def claimed_power(claim: Claim) -> int:
    """p of a claimed O(tau^p)."""
    f = claim.value
    if not isinstance(f, Formula) or f.head != "order":
        raise NotCovered("an error is claimed as O(tau^k)")
    p = tau_power(f.args[0])
    if p is None or p < 1:
        raise NotCovered("an error is claimed as O(tau^k), k at least 1")
    return p


# -- the cascade: 1/Y_net = -N_00 + N_01^2/(N_11 - eps - N_12^2/(N_22 - eps - ...))


def network_beside(claims: tuple[Claim, ...]) -> Matrix | None:
    """The cascade that is claimed in the same worksheet; derived ones come first."""
    for claim in claims:
        quantity, value = claim.quantity, claim.value
        if quantity is None or quantity.name != "absorber coupling" or not isinstance(value, Matrix):
            continue
        if quantity.key("absorber") == "cascade":
            return value
    return None


def attached(value: Matrix) -> int:
    """M, the number of sites beside the detector; energies are due to O(tau^(2M+2)), rates to O(tau^(2M+3))."""
    return max((max(x, y) for x, y, _ in value.entries()), default=0)


class Networks:
    """Networks against Y, each once; `beside` is the one that error orders of a cascade are about."""

    def __init__(self, setting: Setting, beside: Matrix | None):
        self.setting, self.beside = setting, beside
        self._known: dict[Matrix | None, tuple[int, Secular, Element]] = {}

    def order(self, value: Matrix | None) -> int:
        """The first power of tau at which Y_net - Y does not vanish; None is the two-site cascade as defined."""
        return self._solved(value)[0]

    def residual(self, value: Matrix) -> Formula:
        """Y/Y_net - 1."""
        _, secular, inverse = self._solved(value)
        return secular.near.field.formula(_residual(secular, inverse))

    def _solved(self, value: Matrix | None) -> tuple[int, Secular, Element]:
        if value not in self._known:
            if value is None:
                secular = Secular(self.setting)
                inverse = closed_network(secular)
            else:
                secular, inverse = _claimed_network(self.setting, value)
            self._known[value] = (network_order(secular, inverse), secular, inverse)
        return self._known[value]


def _claimed_network(setting: Setting, value: Matrix) -> tuple[Secular, Element]:
    """Y far enough for the order that so many sites promise, and the network's 1/Y."""
    if attached(value) > MOST_ATTACHED:
        raise NotCovered(f"networks of more than {MOST_ATTACHED} sites are measured only")
    chain = _tridiagonal({(x, y): f for x, y, f in value.entries()})
    secular = Secular(setting, tuple(chain), 2 * attached(value) + 1)
    return secular, _continued(secular, [secular.near.field.element(f) for f in chain])


def _network(setting: Setting, claim: Claim, networks: Networks, effort: Check) -> Finding | None:
    if not isinstance(claim.value, Matrix) or setting.detectors[0].rank != 1 or not attached(claim.value):
        return None
    due = 2 * attached(claim.value) + 2
    k = networks.order(claim.value)
    if k >= due:
        return Finding("proved", "exact", evidence=f"the network's secular equation parts at tau^{k}")
    left = networks.residual(claim.value)
    wider = replace(setting, letters=(*setting.letters, Letter(LEVEL, Domain("real", "real"))))
    for point in sample_points(wider, effort, claim.assume):
        if is_surely_nonzero(left, point):
            evidence = f"the network's secular equation parts at tau^{k}, before tau^{due}"
            return Finding("refuted", "exact", points=1, point=point.without(LEVEL).text(), evidence=evidence)
    return Finding("undecided", "exact", evidence=f"the secular equations part at tau^{k}")


def _tridiagonal(cells: dict[tuple[int, int], Formula]) -> list[Formula]:
    """N_00, N_01 N_10, N_11, N_12 N_21, N_22, ...; anything else in the matrix is not served here."""
    size = 1 + max(max(place) for place in cells)
    if any(abs(x - y) > 1 for x, y in cells):
        raise NotCovered("a cascade is a chain: each site is joined to the next one only")
    zero = number(0)
    out = [cells.get((0, 0), zero)]
    for a in range(1, size):
        out.append(_product(cells.get((a - 1, a), zero), cells.get((a, a - 1), zero)))
        out.append(cells.get((a, a), zero))
    return out


def _product(f: Formula, g: Formula) -> Formula:
    """f g; equal factors are squared so that a root of theirs goes away."""
    if f != g:
        return times(f, g)
    factors = f.args if f.head == "times" else (f,)
    return times(*(a.args[1] if a.head == "call" and a.args[0] == "sqrt" else power(a, number(2)) for a in factors))


def _continued(secular: Secular, chain: list[Element]) -> Element:
    """1/Y_net."""
    tail = chain[-1] - secular.eps
    for k in range(len(chain) - 2, 1, -2):
        tail = chain[k - 1] - secular.eps - chain[k] / tail
    return chain[1] / tail - chain[0] if len(chain) > 1 else -chain[0]


def closed_network(secular: Secular) -> Element:
    """1/Y_net of the two-site cascade: b = 12/(1 + tau^2 mu_0/20), delta = tau^3 (mu_1 - C mu_0)/60."""
    near, tau, one = secular.near, secular.tau, secular.near.field.one
    c, mu0, mu1 = _three_numbers(near)
    b = near.number(12) / (one + (tau * tau * mu0).scaled(Fraction(1, 20)))
    delta = (tau * tau * tau * (mu1 - c * mu0)).scaled(Fraction(1, 60))
    th = one / near.coth()
    lossy = near.i * th / tau
    chain = [
        -lossy.scaled(Fraction(2)),
        -(th * th).scaled(Fraction(20)) / (tau * tau),
        c - delta / tau - lossy.scaled(Fraction(10)),
        (b.scaled(Fraction(5)) - delta * delta) / (tau * tau),
        c + delta / tau,
    ]
    return _continued(secular, chain)


def _three_numbers(near: Near) -> tuple[Element, Element, Element]:
    """C, mu_0, mu_1 for a detector of rank one."""
    zero = near.field.zero
    hd = multiplied(near.h, near.d)
    v = multiplied(near.outside, hd)
    bar = near.dagger(v)
    blocks = (multiplied(near.d_dagger, hd), multiplied(bar, v), multiplied(bar, multiplied(near.h, v)))
    c, mu0, mu1 = (block.get(-1, {}).get(-1, zero) for block in blocks)
    return c, mu0, mu1


def _residual(secular: Secular, inverse: Element) -> Element:
    """Y/Y_net - 1."""
    return secular.y[-1][-1] * inverse - secular.near.field.one


def network_order(secular: Secular, inverse: Element) -> int:
    """The first power of tau at which Y_net - Y does not vanish."""
    return secular.order_of({-1: {-1: _residual(secular, inverse)}}) + 1
