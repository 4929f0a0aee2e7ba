"""Settings for absorber tests: complex bonds, a detuned detector, rank two, a ring with flux; three efficiencies."""

from __future__ import annotations

from dataclasses import replace

from derive.derivations.absorber.topic import derive_absorber
from derive.formula.grammar import parse
from derive.formula.tree import number
from derive.problem.quantities import Quantity
from derive.problem.setting import Domain, Letter, Setting, Wish
from derive.record.said import EXACTLY, Claim, Kind, Matrix, Value
from tests.settings_of_graphs import watched

ETA = Letter("eta", Domain("interval", "in (0, 1]", number(0), number(1), True, False))
BENT = [(0, 1, "-g*exp(i*phi)"), (2, 3, "-g*exp(-2*i*phi)")]
PAIR = [1, {3: "3/5", 4: "4/5*i"}]


def of_efficiency(setting: Setting, eta: str, *letters: Letter) -> Setting:
    detectors = tuple(replace(w, efficiency=parse(eta)) for w in setting.detectors)
    return replace(setting, detectors=detectors, letters=(*setting.letters, *letters))


def detuned(eta: str = "1", *letters: Letter) -> Setting:
    """Seven sites in a row, complex bonds, the detector off the middle and detuned."""
    bare = watched("chain", {"sites": 7}, 3, ("g", "Delta", "phi"), bonds=BENT, energies={3: "Delta", 1: "g/3"})
    return of_efficiency(bare, eta, *letters)


def pair(eta: str = "1", *letters: Letter) -> Setting:
    """A detector of rank two, one of its vectors spread over two sites."""
    return of_efficiency(watched("chain", {"sites": 6}, PAIR, ("g", "phi"), bonds=BENT), eta, *letters)


def ring(eta: str = "1", *letters: Letter) -> Setting:
    """A ring of five sites with a flux through it."""
    bare = watched("ring", {"sites": 5}, 0, ("g", "phi"), loops=[(range(5), "phi")])
    return of_efficiency(bare, eta, *letters)


def derived(setting: Setting) -> dict[str, Claim]:
    return {c.id.removeprefix("absorber."): c for c in derive_absorber(setting, Wish("absorber")).claims}


def own(about: str, value: Value, kind: Kind = EXACTLY, **keys: object) -> Claim:
    return Claim("claim.mine", "absorber", Quantity(about, tuple(keys.items())), value, kind, origin="user")


def altered(claim: Claim, change) -> Claim:
    """The same claim with every entry of its matrix passed through `change(x, y, f)`."""
    assert isinstance(claim.value, Matrix)
    rows: dict[int, list] = {}
    for x, y, f in claim.value.entries():
        rows.setdefault(x, []).append((y, change(x, y, f)))
    return replace(claim, value=Matrix(claim.value.size, (), tuple((x, tuple(r)) for x, r in sorted(rows.items()))))
