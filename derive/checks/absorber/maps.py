"""Road `exact` for state maps: the equations that define them, order by order in tau.

With E = exp(-i tau G) and exp(-i tau S) the slow parts of the measured step and of the absorber over one interval,
and N, N_abs their overlaps (`absorber_slow.py`), the maps are right up to O(tau^p) at fixed t = n tau exactly when

    E L - L exp(-i tau S) = O(tau^(p+1)),      N^-1 - L N_abs^-1 R = O(tau^p),

and R = L(-tau)†, since both evolutions read backwards are their own adjoints at -tau.  A start on the detector is
right when N^-1 Z - L N_abs^-1 F = O(tau^p), what stays on it when X L - T = O(tau^p).  Sites and matrices alone: a
residual that is exactly zero proves, one that is surely not at a point refutes.
"""

from __future__ import annotations

from collections.abc import Iterator, Mapping
from dataclasses import dataclass, replace
from fractions import Fraction

from derive.checks import asked
from derive.checks.absorber.slow import (
    Near,
    Series,
    Slow,
    absorber_step,
    measured_step,
    series_exponential,
    series_inverse,
    series_product,
    solved,
)
from derive.errors import NotCovered
from derive.exact.sparse import Sparse, added, multiplied, scaled
from derive.formula.text import text
from derive.formula.tree import ONE, Formula
from derive.numerics.nonzero import is_surely_nonzero
from derive.numerics.points import sample_points
from derive.problem.setting import Check, Domain, Finite, Setting
from derive.record.said import Claim, Expansion, Finding, Matrix

HIGHEST_ORDER = 8
Residual = tuple[str, int, tuple[int, int], Formula]


@dataclass(frozen=True)
class MapClaim:
    """A state map as a series: `terms[k]` are the entries at tau^k, k < order."""

    kind: str
    side: str
    order: int
    terms: tuple[asked.Entries, ...]


def is_map(claim: Claim) -> bool:
    return claim.quantity is not None and claim.quantity.name == "state map"


def read_map(claim: Claim, domains: Mapping[str, Domain]) -> MapClaim:
    """The claimed series, whoever wrote it."""
    if claim.quantity is None or claim.kind.name != "order" or claim.kind.order is None:
        raise NotCovered("a state map is claimed up to O(tau^k)")
    if claim.kind.fixed is not None or claim.quantity.key("entry") is not None:
        raise NotCovered("a state map is judged as a whole matrix, up to O(tau^k)")
    kind, side = str(claim.quantity.key("absorber")), str(claim.quantity.key("side"))
    order = claim.kind.order
    if order > HIGHEST_ORDER:
        raise NotCovered(f"state maps are compared up to O(tau^{HIGHEST_ORDER})")
    found: list[list[tuple[int, int, Formula]]] = [[] for _ in range(order)]
    if isinstance(claim.value, Expansion):
        for k, term in zip(claim.value.powers, claim.value.terms, strict=True):
            if isinstance(term, Matrix) and k < order:
                found[k] += term.entries()
    elif isinstance(claim.value, Matrix):
        for x, y, f in claim.value.entries():
            parts = {0: f} if f == ONE else asked.tau_coefficients(f, domains)
            for k, part in parts.items():
                if k < order:
                    found[k].append((x, y, part))
    else:
        raise NotCovered("a state map is claimed as a matrix")
    return MapClaim(kind, side, order, tuple(tuple(rows) for rows in found))


def whole_claim(claim: Claim, claims: tuple[Claim, ...]) -> Claim:
    """A claim about one entry of a map, put into the whole map that is claimed beside it; others as they are."""
    place = None if claim.quantity is None else claim.quantity.key("entry")
    if claim.quantity is None or not isinstance(place, tuple) or not isinstance(claim.value, Formula):
        return claim
    wanted = (claim.quantity.key("absorber"), claim.quantity.key("side"))
    for other in claims:
        same = is_map(other) and other.quantity is not None and other.quantity.key("entry") is None
        if not same or other.quantity is None or not isinstance(other.value, Matrix):
            continue
        if (other.quantity.key("absorber"), other.quantity.key("side")) == wanted:
            keys = tuple(k for k in claim.quantity.keys if k[0] != "entry")
            quantity = replace(claim.quantity, keys=keys)
            return replace(claim, quantity=quantity, value=_with_entry(other.value, place, claim.value))
    raise NotCovered("one entry of a state map is judged beside the whole map, which is not derived here")


def _with_entry(matrix: Matrix, place: tuple[int, int], value: Formula) -> Matrix:
    cells = {(x, y): f for x, y, f in matrix.entries()} | {place: value}
    rows: dict[int, list[tuple[int, Formula]]] = {}
    for x, y in sorted(cells):
        rows.setdefault(x, []).append((y, cells[x, y]))
    return Matrix(matrix.size, (), tuple((x, tuple(row)) for x, row in rows.items()))


def check_maps(setting: Setting, claims: tuple[Claim, ...], effort: Check) -> dict[str, Finding]:
    """A finding for each state map that has a place in an exact field; the others get none."""
    found = {}
    for claim in claims:
        if not is_map(claim):
            continue
        try:
            finding = _judge(setting, claim, claims, effort)
        except (NotCovered, ZeroDivisionError):
            continue
        found[claim.id] = finding
    return found


def _judge(setting: Setting, claim: Claim, claims: tuple[Claim, ...], effort: Check) -> Finding:
    claim = whole_claim(claim, claims)
    residual = next(_residuals(setting, claim, claims), None)
    if residual is None:
        return Finding("proved", "exact", evidence="the equations of the slow states leave an exact zero")
    equation, order, place, value = residual
    names = [_name(setting, s) for s in place]
    where = f"{equation}, order tau^{order}, entry ({', '.join(names)})"
    for point in sample_points(setting, effort, claim.assume):
        if is_surely_nonzero(value, point):
            evidence = f"{where}: what is left over is {text(value)}"
            return Finding("refuted", "exact", points=1, point=point.without("tau").text(), evidence=evidence)
    return Finding("undecided", "exact", evidence=f"{where}: {text(value)} vanishes where tried")


def _name(setting: Setting, label: int) -> str:
    if label < 0:
        return f"detector vector {-label}"
    return setting.space.name(label) if isinstance(setting.space, Finite) else str(label)


def _residuals(setting: Setting, claim: Claim, claims: tuple[Claim, ...]) -> Iterator[Residual]:
    domains = setting.domains()
    mine = read_map(claim, domains)
    left = mine if mine.side in ("left", "right") else _partner(mine, claims, domains)
    p = mine.order if left is mine else min(mine.order, left.order + 1)
    if p < mine.order:
        raise NotCovered("the map on the left is not claimed to the order that this one needs")
    formulas = [f for m in (mine, left) for rows in m.terms for _, _, f in rows]
    near = Near(setting, p + 1, formulas)
    yield from _far(setting, near, left)
    series = claimed_series(near, left)
    if left.side == "right":
        series = mirrored(near, series)
    measured = solved(near, measured_step(near, p + 1), p + 1)
    absorbed = solved(near, absorber_step(near, mine.kind, p + 1), p + 1)
    if left is mine:
        yield from _written(near, _similar(near, series, measured, absorbed, p), "E L - L exp(-i S tau)")
        yield from _written(near, _overlaps(near, series, measured, absorbed, p), "1/N - L (1/N_abs) R")
    elif mine.side == "from detector":
        yield from _written(near, _entering(near, mine, series, measured, absorbed), "(1/N) Z - L (1/N_abs) F")
    else:
        yield from _written(near, _staying(near, mine, series, measured), "X L - T")


def _partner(mine: MapClaim, claims: tuple[Claim, ...], domains: Mapping[str, Domain]) -> MapClaim:
    """The map on the left that a claim about the detector goes with."""
    for claim in claims:
        if not is_map(claim) or claim.quantity is None or claim.quantity.key("side") != "left":
            continue
        if claim.quantity.key("absorber") == mine.kind:
            return read_map(claim, domains)
    raise NotCovered("a map from or to the detector goes with the map on the left, which is not claimed here")


def claimed_series(near: Near, claim: MapClaim) -> Series:
    """The claimed terms near the detector."""
    inside = set(near.sites)
    found: Series = []
    for rows in claim.terms:
        matrix: Sparse = {}
        for x, y, f in rows:
            value = near.field.element(f)
            if x in inside and y in inside and value:
                matrix.setdefault(x, {})[y] = value
        found.append(matrix)
    return found


def _far(setting: Setting, near: Near, claim: MapClaim) -> Iterator[Residual]:
    """Out of the detector's reach a map is the unit matrix."""
    inside = set(near.sites)
    size = setting.space.size if isinstance(setting.space, Finite) else 0
    diagonal = dict.fromkeys((x for x in range(size) if x not in inside), near.field.one)
    for k, rows in enumerate(claim.terms):
        for x, y, f in rows:
            if x in inside and y in inside:
                continue
            value = near.field.element(f)
            if k == 0 and x == y and x in diagonal:
                value = value - diagonal.pop(x)
            if value:
                yield "far from the detector", k, (x, y), near.field.formula(value)
    for x in diagonal:
        yield "far from the detector", 0, (x, x), ONE


def mirrored(near: Near, series: Series) -> Series:
    """L(-tau)†."""
    return [scaled(near.dagger(a), Fraction((-1) ** k)) for k, a in enumerate(series)]


def _difference(a: Series, b: Series, n: int) -> Series:
    return [
        added(a[k] if k < len(a) else {}, scaled(b[k] if k < len(b) else {}, Fraction(-1))) for k in range(n + 1)
    ]


def _similar(near: Near, series: Series, measured: Slow, absorbed: Slow, p: int) -> Series:
    step = [near.outside, *measured.y[1 : p + 1]]
    other = series_exponential(near, absorbed.y[: p + 1], p)
    return _difference(series_product(step, series, p), series_product(series, other, p), p)


def _overlaps(near: Near, series: Series, measured: Slow, absorbed: Slow, p: int) -> Series:
    n = p - 1
    inner = series_product(series_inverse(absorbed.overlap, n), mirrored(near, series), n)
    return _difference(series_inverse(measured.overlap, n), series_product(series, inner, n), n)


def _on_detector(near: Near, claim: MapClaim, entering: bool) -> Series:
    """The claimed matrix series with its detector side as labels: F D, or D† T."""
    series = claimed_series(near, claim)
    return [multiplied(a, near.d) if entering else multiplied(near.d_dagger, a) for a in series]


def _entering(near: Near, mine: MapClaim, series: Series, measured: Slow, absorbed: Slow) -> Series:
    n = mine.order - 1
    fed = series_product(series_inverse(measured.overlap, n), measured.z, n)
    inner = series_product(series_inverse(absorbed.overlap, n), _on_detector(near, mine, True), n)
    return _difference(fed, series_product(series, inner, n), n)


def _staying(near: Near, mine: MapClaim, series: Series, measured: Slow) -> Series:
    n = mine.order - 1
    return _difference(series_product(measured.x, series, n), _on_detector(near, mine, False), n)


def _written(near: Near, series: Series, equation: str) -> Iterator[Residual]:
    """Entries that are not exactly zero, lowest order first."""
    for k, matrix in enumerate(series):
        for x in sorted(matrix):
            for y in sorted(matrix[x]):
                value = matrix[x][y]
                if value:
                    yield equation, k, (x, y), near.field.formula(value)

