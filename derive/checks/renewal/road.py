"""Both roads for generating functions, first detection probabilities and poles on finite graphs.

exact       phi = sqrt(eta) z M/D by residues' own polynomials (`moments.py`); a claimed phi(z), F_n or denominator
            minus that must be exactly zero, and so must D at a claimed pole; several detector states and steps given:
            `renewal_several.py`
enclosure   phi(z) = sqrt(eta) <d| z U (1 - z K)^-1 |psi> solved in balls at points inside the unit circle; F_n by
            asking n times; poles by power sums: sum_i z_i^-k = tr(K^k B), B = sum_m (K†)^m X K^m the projector on the
            bright space, for as many k as it has dimensions, which determine them all; a single pole of the user's by
            its place among them, counted from the origin (poles of one modulus share their places)
"""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import replace

from flint import acb, acb_mat, acb_poly, arb, ctx

from derive.checks.detection.road import refuted
from derive.checks.gauge import Gauge
from derive.checks.moments.road import Residues, Start
from derive.checks.renewal.several import Columns, numerator_and_denominator, state_of
from derive.checks.seen import Seen
from derive.checks.summed import ATTEMPTS, LARGEST, ROAD, SPARE_DIGITS, Bench, Experiment, Tally
from derive.errors import NeedsPrecision, NotCovered, OutsideValidity
from derive.exact.field import Element, Field
from derive.formula.tree import Formula, call, letter, number, plus, times
from derive.formula.tree import replace as replaced
from derive.numerics.decimals import rounded, with_radius
from derive.numerics.evaluate import Values, enclose, rational
from derive.numerics.points import sample_points
from derive.numerics.precision import bits_for, retry
from derive.numerics.roots import enclose_roots, isolated
from derive.problem.points import Point
from derive.problem.setting import Check, Domain, Finite, Letter, Setting, Unitary
from derive.record.said import Claim, Curve, Finding, Number, PerRoot, Plot

QUANTITIES = ("generating function", "detection amplitude", "detection probability", "pole")
Z = letter("z")
COMPLEX = Domain("complex", "complex")
INSIDE = ((3, 10, 2, 5), (-1, 2, 1, 3), (7, 10, -1, 10))
"""Points z = a/b + i c/d inside the unit circle."""
CIRCLE = 96
SHOWN = 24
"""Asks in the figure."""
FIRST_ASKS = 6
"""Asks at which a formula in n is compared."""


def is_mine(setting: Setting, claim: Claim) -> bool:
    """Exact claims on a finite graph."""
    known = claim.quantity is not None and claim.quantity.name in QUANTITIES
    return known and claim.kind.name == "exactly" and isinstance(setting.space, (Finite, Unitary))


def with_z(setting: Setting) -> Setting:
    """The setting with the generating function's letter declared."""
    return replace(setting, letters=(*setting.letters, Letter("z", COMPLEX)))


# -- exact


def check_renewal_exact(setting: Setting, claims: Sequence[Claim], effort: Check) -> Seen:
    """One finding for each claim that has a place in an exact field."""
    mine = [c for c in claims if is_mine(setting, c)]
    found: dict[str, Finding] = {}
    try:
        sides = _sides_of(setting) if mine else None
    except (NotCovered, ZeroDivisionError):
        return Seen()
    for claim in mine:
        finding = _judge(setting, claim, effort, sides) if sides is not None else None
        if finding is not None:
            found[claim.id] = finding
    return Seen(found)


Sides = Callable[[Claim], tuple[Formula, Formula]]


def _sides_of(setting: Setting) -> Sides:
    """What is claimed and what it must equal, by residues for one detector state and H, else followed forward."""
    if isinstance(setting.space, Unitary) or sum(w.rank for w in setting.detectors) > 1:
        return Columns(with_z(setting)).sides
    residues = Residues(with_z(setting), [Z, call("sqrt", setting.detectors[0].efficiency)])
    return lambda claim: _sides(claim, residues)


def _judge(setting: Setting, claim: Claim, effort: Check, sides: Sides) -> Finding | None:
    try:
        claimed, truth = (numerator_and_denominator(f) for f in sides(claim))
        field = Field.of([*claimed, *truth, Z], with_z(setting).domains())
        (p, q), (a, b) = (tuple(field.element(f) for f in pair) for pair in (claimed, truth))
        if not q or not b:
            return None
        residual = p * b - a * q
    except (NotCovered, ZeroDivisionError, OutsideValidity):
        return None
    if not residual:
        return Finding("proved", "exact", evidence="from the renewal equation, the difference is exactly zero")
    name = claim.quantity.name if claim.quantity else ""
    return refuted(with_z(setting), claim, effort, name, field.formula(residual))


def _sides(claim: Claim, residues: Residues) -> tuple[Formula, Formula]:
    """What is claimed and what it must equal."""
    field, value = residues.field, claim.value
    name = claim.quantity.name if claim.quantity else ""
    if isinstance(value, PerRoot) and value.formula == letter(value.letter) == Z:
        return value.polynomial, _polynomial(residues, residues.d)
    if not isinstance(value, Formula):
        raise NotCovered("a formula is compared here")
    if name == "pole":
        return replaced(_polynomial(residues, residues.d), {"z": value}), number(0)
    if name == "generating function":
        start = _only(residues)
        root = call("sqrt", field.formula(residues.eta))
        top = times(root, Z, _polynomial(residues, start.m))
        return value, top / _polynomial(residues, residues.d)
    n = claim.quantity.key("ask") if claim.quantity else None
    if not isinstance(n, int):
        raise NotCovered("which ask is not said")
    if name == "detection amplitude":
        amplitude = residues.coefficients(_only(residues).m, n)[n - 1]
        return value, times(call("sqrt", field.formula(residues.eta)), field.formula(amplitude))
    total = field.zero
    for start in residues.starts:
        c = residues.coefficients(start.m, n)[n - 1]
        total = total + start.weight * c * field.conjugate(c)
    return value, field.formula(total * residues.eta)


def _only(residues: Residues) -> Start:
    if len(residues.starts) != 1:
        raise NotCovered("a mixture has no amplitude")
    return residues.starts[0]


def _polynomial(residues: Residues, p: Sequence[Element]) -> Formula:
    shown = residues.field.formula
    return plus(*(shown(c) * Z ** number(k) if k else shown(c) for k, c in enumerate(p)))


# -- enclosure


def check_renewal(setting: Setting, claims: Sequence[Claim], effort: Check) -> Seen:
    """One finding for each claim, measured at the sample points."""
    found: dict[str, Finding] = {}
    numbers: dict[str, tuple[Number, ...]] = {}
    bench = Bench(1, effort.digits)
    for claim in claims:
        if is_mine(setting, claim):
            tally = Tally(claim)
            try:
                _meet(setting, tally, effort, bench)
            except NotCovered as reason:
                tally.stopped = str(reason)
            found[claim.id] = replace(tally.finding(), evidence=tally.finding().evidence.replace(_SUMMED, _ASKED))
            numbers[claim.id] = tuple(tally.numbers)
    return Seen(found, numbers, _figure(setting, claims, effort))


def _figure(setting: Setting, claims: Sequence[Claim], effort: Check) -> tuple[Plot, ...]:
    """F_1 ... at the first sample point, measured, with the derived ones on top."""
    derived = {c.quantity.key("ask"): c for c in claims if c.quantity is not None and c.id.startswith("renewal.F.")}
    points = sample_points(setting, replace(effort, samples=1)) if derived else ()
    if not points:
        return ()
    shown = {int(n): c.value for n, c in derived.items() if isinstance(n, int) and isinstance(c.value, Formula)}
    try:
        stems = retry(lambda bits: _stems(setting, points[0], shown), 128, 2048)
        return (stems, *retry(lambda bits: _disc(claims, points[0]), 128, 2048))
    except (NeedsPrecision, NotCovered, OutsideValidity):
        return ()


def _disc(claims: Sequence[Claim], point: Point) -> tuple[Plot, ...]:
    """Inverse poles, which are eigenvalues of the undetected step, in the unit disc."""
    claim = next((c for c in claims if c.id == "renewal.pole.1" and isinstance(c.value, PerRoot)), None)
    if claim is None or not isinstance(claim.value, PerRoot):
        return ()
    roots = enclose_roots(claim.value.polynomial, claim.value.letter, Values.at(point.mapping()))
    inverse = [1 / z for z in roots]
    turns = [2 * arb.pi() * k / CIRCLE for k in range(CIRCLE + 1)]
    curves = (
        Curve("unit circle", "bound", tuple(rounded(t.cos()) for t in turns), tuple(rounded(t.sin()) for t in turns)),
        Curve("inverse poles", "measured", tuple(map(_shown, (x.real for x in inverse))),
              tuple(map(_shown, (x.imag for x in inverse)))),
    )
    where = ", ".join(f"{name} = {value}" for name, value in point.text())
    says = f"Inverse poles in the unit disc at {where}: the closer to the circle, the slower the decay."
    return (Plot("renewal.poles", says, "Re $1/z$", "Im $1/z$", curves),)


def _shown(x: arb) -> str:
    return "0" if x.contains(0) else rounded(x)


def _stems(setting: Setting, point: Point, shown: dict[int, Formula]) -> Plot:
    measured = _probabilities(Bench(1, 15).at(setting, point), SHOWN)
    at = Values.at(point.mapping())
    values = tuple(rounded(enclose(f, at).real) for f in shown.values())
    curves = (
        Curve("derived", "derived", tuple(map(str, shown)), values),
        Curve("measured", "measured", tuple(str(n + 1) for n in range(SHOWN)), tuple(map(rounded, measured))),
    )
    where = ", ".join(f"{name} = {value}" for name, value in point.text())
    held = rounded(sum(measured, arb(0)), 4)
    says = f"First clicks ask by ask at {where}; the first {SHOWN} asks hold a probability of {held}."
    return Plot("renewal.F", says, "ask $n$", "$F_n$", curves)


_SUMMED, _ASKED = "the experiment summed over all asks", "the experiment itself, in balls"


def _meet(setting: Setting, tally: Tally, effort: Check, bench: Bench) -> None:
    size = len(setting.space.rows) if isinstance(setting.space, Finite) else 0
    if size > LARGEST:
        raise NotCovered(f"the experiment is repeated on at most {LARGEST} sites, and there are {size}")
    for point in sample_points(setting, effort, tally.claim.assume):
        if tally.refuted is None:
            _compare(setting, point, tally, bench)


def _compare(setting: Setting, point: Point, tally: Tally, bench: Bench) -> None:
    name = tally.claim.quantity.name if tally.claim.quantity else ""
    for attempt in range(ATTEMPTS):
        with ctx.workprec(bits_for(bench.digits + SPARE_DIGITS, 128) << attempt):
            gauge = Gauge(bench.digits)
            try:
                shown = _MEASURED[name](bench.at(setting, point), point, tally.claim, gauge)
            except NeedsPrecision:
                continue
            except OutsideValidity as reason:
                tally.stopped = f"a point was left out: {reason}"
                return
            if gauge.misses:
                tally.refuted = (point, gauge.first_miss())
            elif gauge.wide:
                continue
            tally.points += 1
            if gauge.shared is not None:
                tally.digits = gauge.shared if tally.digits is None else min(tally.digits, gauge.shared)
            if shown is not None:
                value, radius = with_radius(shown, bench.digits)
                tally.numbers.append(Number(value, radius, point.text(), ROAD))
            return
    tally.wide = f"the balls stay too wide for {bench.digits} digits"


Measure = Callable[[Experiment, Point, Claim, Gauge], "arb | None"]


def _true_step(e: Experiment) -> tuple[acb_mat, acb_mat]:
    """U and K with the phase exp(-i E0 tau) that a sum over asks may leave out."""
    if e.step.frame is None:
        return e.step.u, e.step.k
    phase = (acb(0, -1) * e.step.frame.system.E0 * enclose(e.tau, e.values)).exp()
    return e.step.u * phase, e.step.k * phase


def _start_and_bra(e: Experiment, claim: Claim) -> tuple[acb_mat, acb_mat, acb]:
    """psi as a column, sqrt(eta) <d| as a row times the factor apart, d the claim's detector state."""
    start = e.setting.start
    if start is None or len(start.mixture) != 1:
        raise NotCovered("one start state is needed here")
    states = [(w, v) for w in e.setting.detectors for v in w.vectors]
    watcher, vector = states[state_of(claim, len(states))]
    n = e.step.size
    psi = acb_mat(n, 1, e.step.state(start.mixture[0][1], e.values))
    bra = acb_mat(1, n, [x.conjugate() for x in e.step.state(vector, e.values)])
    return psi, bra, acb(enclose(watcher.efficiency, e.values).real.sqrt())


def _generating_function(e: Experiment, point: Point, claim: Claim, gauge: Gauge) -> arb | None:
    u, k = _true_step(e)
    psi, bra, root = _start_and_bra(e, claim)
    if not isinstance(claim.value, Formula):
        raise NotCovered("a generating function is a formula in z")
    for a, b, c, d in INSIDE:
        z = acb(rational(a).real / b, rational(c).real / d)
        inside = acb_mat(e.step.size, e.step.size, 1) - k * z
        measured = (bra * u * inside.solve(psi))[0, 0] * z * root
        values = Values.at(point.mapping()).with_letter("z", z)
        gauge.compare(f"phi({a}/{b} + {c}/{d}*i)", enclose(claim.value, values), measured, arb(1))
    return None


def _amplitudes(e: Experiment, claim: Claim, count: int) -> list[acb]:
    u, k = _true_step(e)
    psi, bra, root = _start_and_bra(e, claim)
    found = []
    for _ in range(count):
        found.append((bra * u * psi)[0, 0] * root)
        psi = k * psi
    return found


def _asks(claim: Claim) -> list[int]:
    n = claim.quantity.key("ask") if claim.quantity else None
    return [n] if isinstance(n, int) else list(range(1, FIRST_ASKS + 1))


def _amplitude(e: Experiment, point: Point, claim: Claim, gauge: Gauge) -> arb | None:
    found = _amplitudes(e, claim, max(_asks(claim)))
    for n in _asks(claim):
        gauge.compare(f"phi_{n}", _claimed(claim, point, n), found[n - 1], arb(1))
    return None


def _claimed(claim: Claim, point: Point, n: int) -> acb:
    if not isinstance(claim.value, Formula):
        raise NotCovered("a formula is compared here")
    return enclose(claim.value, Values.at({**point.mapping(), "n": number(n)}))


def _probability(e: Experiment, point: Point, claim: Claim, gauge: Gauge) -> arb | None:
    asks = _asks(claim)
    found = _probabilities(e, max(asks))
    for n in asks:
        gauge.compare(f"F_{n}", _claimed(claim, point, n), acb(found[n - 1]), arb(1))
    return found[asks[0] - 1] if len(asks) == 1 else None


def _probabilities(e: Experiment, count: int) -> list[arb]:
    """F_1 ... F_count for the start, a mixture."""
    found = [arb(0)] * count
    for w, v in e.setting.start.mixture if e.setting.start is not None else ():
        psi = acb_mat(e.step.size, 1, e.step.state(v, e.values))
        for n in range(count):
            clicked = psi.conjugate().transpose() * e.step.all_clicks * psi
            found[n] += enclose(w, e.values).real * clicked[0, 0].real
            psi = e.step.k * psi
    return found


def _poles(e: Experiment, point: Point, claim: Claim, gauge: Gauge) -> arb | None:
    """Power sums of the inverse poles against traces on the bright space; one pole by its place."""
    values = Values.at(point.mapping())
    if isinstance(claim.value, PerRoot):
        roots = enclose_roots(claim.value.polynomial, claim.value.letter, values)
        poles = [enclose(claim.value.formula, values.with_letter(claim.value.letter, x)) for x in roots]
    elif isinstance(claim.value, Formula):
        poles = [enclose(claim.value, values)]
    else:
        raise NotCovered("poles are a formula, or one for each root")
    sums = _power_sums(e)
    if claim.origin != "derived" and isinstance(claim.value, Formula):
        _in_its_place(claim, poles[0], sums, gauge)
        return None
    for n, measured in enumerate(sums, start=1):
        total = sum((x ** (-n) for x in poles), acb(0))
        gauge.compare(f"sum of z^-{n} over the poles", total, measured, arb(1))
    return None


def _power_sums(e: Experiment) -> list[acb]:
    """sum_i z_i^-n over all poles, n = 1 ... the bright dimension."""
    _, k = _true_step(e)
    bright, power, found = e.sums.partial[0], k, []
    blur = acb(arb(0, e.sums.tails[0].upper()), arb(0, e.sums.tails[0].upper())) * e.step.size
    for _ in range(e.observed.bright):
        found.append((power * bright).trace() + blur)
        power = power * k
    return found


def _in_its_place(claim: Claim, claimed: acb, sums: Sequence[acb], gauge: Gauge) -> None:
    """The claimed pole against the one that is n-th from the origin, or any of those that share its modulus."""
    n = claim.quantity.key("pole") if claim.quantity else None
    found = sorted(_from_power_sums(sums, gauge.goal / 100), key=lambda z: float(abs(z).mid()))
    if not isinstance(n, int):
        raise NotCovered("which pole is not said")
    if n > len(found):
        raise NotCovered(f"there are {len(found)} poles here")
    alike = [z for z in found if abs(z).overlaps(abs(found[n - 1]))]
    measured = next((z for z in alike if z.overlaps(claimed)), found[n - 1])
    gauge.compare(f"pole {n}", claimed, measured, arb(1).max(arb(abs(measured).upper())))


def _from_power_sums(sums: Sequence[acb], tolerance: arb) -> list[acb]:
    """The zeros of prod_i (1 - z/z_i) = sum_k d_k z^k, k d_k = -sum_j p_j d_(k-j) (Newton's identities).

    Coefficients on top that are not told from 0 are left out: a zero they hide is farther out than all others.
    """
    d = [acb(1)]
    for k in range(1, len(sums) + 1):
        d.append(-sum((sums[j - 1] * d[k - j] for j in range(1, k + 1)), acb(0)) / k)
    while d[-1].contains(0):
        d.pop()
    if len(d) == 1:
        raise NotCovered("there is no pole here")
    return isolated(acb_poly(d), tolerance)


_MEASURED: dict[str, Measure] = {
    "generating function": _generating_function,
    "detection amplitude": _amplitude,
    "detection probability": _probability,
    "pole": _poles,
}
