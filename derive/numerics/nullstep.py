"""The null-outcome step of an imperfect detector and its absorbers, in balls: matrices, levels, repeated steps.

    K = (1 - (1 - q) P) U(tau),   q = sqrt(1 - eta),   U = exp(-i (H - E0) tau)

E0 only shifts energies, and is taken out of the absorbers too.  Levels are eps = i log(lambda)/tau for the
eigenvalues lambda of K; `acb_mat.eig` encloses all of them, repeated ones together.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, replace

from flint import acb, acb_mat, arb

from derive.errors import NeedsPrecision, NotCovered
from derive.formula.tree import ONE
from derive.numerics.evaluate import Values
from derive.numerics.system import System, dagger, dense, projector, system
from derive.problem.setting import Setting


@dataclass(frozen=True)
class Measured:
    """H - E0 (N x N), the detector's vectors D (N x r) and Q at one point; h >= ||H - E0||."""

    hamiltonian: acb_mat
    d: acb_mat
    q: acb_mat
    h: arb

    @property
    def size(self) -> int:
        return int(self.hamiltonian.nrows())

    @property
    def rank(self) -> int:
        return int(self.d.ncols())


def measured_at(setting: Setting, values: Values) -> Measured:
    """The watched system at the values of its letters; the efficiency plays no part in it."""
    return measured_of(system(perfected(setting), values))


def perfected(setting: Setting) -> Setting:
    """The same watched without fail."""
    return replace(setting, detectors=tuple(replace(w, efficiency=ONE) for w in setting.detectors))


def measured_of(s: System) -> Measured:
    """A system's matrices, E0 taken out."""
    hamiltonian = dense(s)
    for x in range(s.size):
        hamiltonian[x, x] = hamiltonian[x, x] - s.E0
    return Measured(hamiltonian, _columns(s), projector(s), s.h)


def reached(m: Measured, pattern: Sequence[bool]) -> tuple[Measured, acb_mat]:
    """The same on what the detector reaches, span(D, HD, H^2 D, ...), and its orthonormal basis, which begins with D.

    `pattern` says, from an exact count, which of H u_0, H u_1, ... are new; balls only confirm those.  Dark states,
    whose levels may be repeated, are left out; all levels that the detector sees are kept.
    """
    columns = [[m.d[x, a] for x in range(m.size)] for a in range(m.rank)]
    for j, new in enumerate(pattern):
        if not new:
            continue
        v = [x[0] for x in (m.hamiltonian * acb_mat([[x] for x in columns[j]])).tolist()]
        columns.append(_orthonormal(columns, v))
    basis = acb_mat([[column[x] for column in columns] for x in range(m.size)])
    inside = dagger(basis) * m.hamiltonian * basis
    size = len(columns)
    d = acb_mat([[1 if x == a else 0 for a in range(m.rank)] for x in range(size)])
    return Measured(inside, d, identity(size) - d * dagger(d), m.h), basis


def _orthonormal(columns: Sequence[Sequence[acb]], v: list[acb]) -> list[acb]:
    for _ in range(2):  # the second pass removes what rounding left
        for b in columns:
            overlap = sum((x.conjugate() * y for x, y in zip(b, v, strict=True)), acb(0))
            v = [y - overlap * x for x, y in zip(b, v, strict=True)]
    square = sum((x.real * x.real + x.imag * x.imag for x in v), arb(0))
    if not square > 0:
        raise NeedsPrecision("a direction that the detector reaches is not told from 0")
    length = square.sqrt()
    return [x / length for x in v]


def _columns(s: System) -> acb_mat:
    d = acb_mat(s.size, len(s.detector))
    for a, vector in enumerate(s.detector):
        for x, value in vector:
            d[x, a] = value
    return d


def identity(size: int) -> acb_mat:
    return acb_mat([[1 if x == y else 0 for y in range(size)] for x in range(size)])


def on_detector(m: Measured) -> acb_mat:
    """P = D D†."""
    return m.d * dagger(m.d)


def null_step(m: Measured, tau: arb, q: acb) -> acb_mat:
    """K; q = 0 for a perfect detector."""
    evolved = (m.hamiltonian * acb(0, -tau)).exp()
    return evolved - on_detector(m) * evolved * (1 - q)


# -- absorbers


def plain(m: Measured, strength: acb) -> acb_mat:
    """H - i Gamma P."""
    return m.hamiltonian + on_detector(m) * (acb(0, -1) * strength)


def dressed(m: Measured, strength: acb, coupling: acb) -> acb_mat:
    """H - i Gamma P with the detector's couplings multiplied."""
    p = on_detector(m)
    across = m.q * m.hamiltonian * p + p * m.hamiltonian * m.q
    return plain(m, strength) + across * (coupling - 1)


def ancilla(m: Measured, coupling: acb, loss: acb) -> acb_mat:
    """One lossy site, at the detector's own energies, beside each of the detector's vectors."""
    own = dagger(m.d) * m.hamiltonian * m.d - identity(m.rank) * (acb(0, 1) * loss)
    return _beside(m, m.hamiltonian, [m.d * coupling], [[own]])


def network(m: Measured, cells: Sequence[Sequence[acb]], E0: acb) -> acb_mat:
    """A network beside a rank-one detector: cells[0][0] is added on it, the rest are sites; E0 is taken out."""
    top = m.hamiltonian + on_detector(m) * cells[0][0]
    size = len(cells)
    inner = [
        [acb_mat([[cells[a][b] - (E0 if a == b else 0)]]) for b in range(1, size)] for a in range(1, size)
    ]
    out = [m.d * cells[0][a] for a in range(1, size)]
    into = [dagger(m.d) * cells[a][0] for a in range(1, size)]
    return _beside(m, top, out, inner, into)


def _beside(
    m: Measured,
    top: acb_mat,
    out: Sequence[acb_mat],
    inner: Sequence[Sequence[acb_mat]],
    into: Sequence[acb_mat] | None = None,
) -> acb_mat:
    """The graph with blocks of r sites attached to its detector; `into` defaults to the adjoint of `out`."""
    back = [dagger(block) for block in out] if into is None else into
    n, r = m.size, m.rank
    whole = acb_mat(n + r * len(out), n + r * len(out))
    _place(whole, top, 0, 0)
    for a, block in enumerate(out):
        _place(whole, block, 0, n + r * a)
        _place(whole, back[a], n + r * a, 0)
        for b, cell in enumerate(inner[a]):
            _place(whole, cell, n + r * a, n + r * b)
    return whole


def _place(whole: acb_mat, part: acb_mat, row: int, column: int) -> None:
    for x in range(part.nrows()):
        for y in range(part.ncols()):
            whole[row + x, column + y] = part[x, y]


# -- levels


def eigenvalues(matrix: acb_mat) -> list[acb]:
    """Balls for all eigenvalues; repeated ones share theirs."""
    try:
        return list(matrix.eig(multiple=True))
    except ValueError as fault:
        raise NeedsPrecision("eigenvalues that this precision does not isolate") from fault


def off_detector(m: Measured, step: acb_mat) -> acb_mat:
    """A perfect detector's step on a basis that begins with D, without the rows and columns that it empties."""
    keep = range(m.rank, m.size)
    return acb_mat([[step[x, y] for y in keep] for x in keep])


def step_levels(step: acb_mat, tau: arb, fast: int) -> list[acb]:
    """eps = i log(lambda)/tau of K's eigenvalues, without the `fast` ones of least modulus."""
    found = sorted(eigenvalues(step), key=lambda x: float(x.abs_upper().mid()))
    dropped, kept = found[:fast], found[fast:]
    if not all(a.abs_upper() < b.abs_lower() for a in dropped for b in kept):
        raise NeedsPrecision("slow and fast eigenvalues of the step are not told apart")
    return [x.log() * acb(0, 1) / tau for x in kept]


def absorber_levels(matrix: acb_mat, fast: int) -> list[acb]:
    """Eigenvalues of an absorber without the `fast` ones that decay fastest."""
    found = sorted(eigenvalues(matrix), key=lambda x: float(x.imag.mid()))
    dropped, kept = found[:fast], found[fast:]
    if not all(a.imag < b.imag for a in dropped for b in kept):
        raise NeedsPrecision("slow and fast levels of the absorber are not told apart")
    return kept


def bright_levels(levels: Sequence[acb]) -> list[acb]:
    """Those that surely decay; the others must be compatible with no decay at all."""
    bright = [x for x in levels if x.imag < 0]
    if any(not x.imag.contains(0) for x in levels if not x.imag < 0):
        raise NeedsPrecision("a level that grows")
    return bright


def level_errors(measured: Sequence[acb], absorbed: Sequence[acb]) -> tuple[arb, arb]:
    """The largest |energy| and |rate| differences, each level matched with its nearest partner.

    Both lists hold all slow levels on what the detector reaches (`reached`), where none is dark.
    """
    if len(measured) != len(absorbed):
        raise NotCovered(f"{len(absorbed)} slow levels stand beside {len(measured)} measured ones")
    energy, rate = arb(0), arb(0)
    left = list(absorbed)
    for x in measured:
        partner = min(left, key=lambda y: float((x - y).abs_upper().mid()))
        left.remove(partner)
        energy = energy.max(abs((x - partner).real))
        rate = rate.max(2 * abs((x - partner).imag))
    return energy, rate


# -- repeated steps


def power(matrix: acb_mat, n: int) -> acb_mat:
    """matrix^n by repeated squaring."""
    result, square = identity(matrix.nrows()), matrix
    while n:
        if n & 1:
            result = result * square
        n >>= 1
        square = square * square if n else square
    return result


def inside(matrix: acb_mat, size: int) -> acb_mat:
    """The first `size` rows and columns."""
    return acb_mat([[matrix[x, y] for y in range(size)] for x in range(size)])


def bound_entries(matrix: acb_mat) -> arb:
    """A ball for the Frobenius norm."""
    total = arb(0)
    for x in range(matrix.nrows()):
        for y in range(matrix.ncols()):
            value = matrix[x, y]
            total += value.real * value.real + value.imag * value.imag
    return total.nonnegative_part().sqrt()
