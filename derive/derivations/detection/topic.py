"""Topic `detection`: whether a start is ever detected, and what the detector cannot see.

    P_det = sum_n F_n = sum_l |<d|E_l|psi>|^2/<d|E_l|d>

for one detector state d, E_l the projectors of H's energies, at an interval tau that brings no two seen energies to
one phase exp(-i E tau) (hbar = 1); for several states, the squared length of psi's projection on what H reaches from
them.  The same for every efficiency above 0 and every law of the intervals.  The sum runs over all conjugate
energies, so it stays in the field of H, detector and start; no energy is solved for.  Where tau makes phases meet,
the energies of one phase are taken as one.

Bright: the span of all U^n d, the detector's own states included; dark: its orthogonal complement, closed under U and
never seen.  Source: phys-rev-research-2-043107; the recursion that evaluates the sum is derived here.
"""

from __future__ import annotations

from collections.abc import Sequence

from derive.algebra.bright import Krylov
from derive.algebra.factor import factored
from derive.algebra.levels import seen_share
from derive.algebra.polynomial import characteristic
from derive.derivations.detection import steps
from derive.derivations.detection.splitting import splitting
from derive.derivations.sight import Sight
from derive.derivations.special import pieces
from derive.formula.text import text
from derive.formula.tree import Formula, number
from derive.problem.quantities import Quantity
from derive.problem.setting import Setting, Wish
from derive.record.said import Cases, Claim, Derivation, Matrix, Prose

SOURCES = ("phys-rev-research-2-043107", "commun-math-phys-320-543")
SPLIT_UP_TO = 80  # sites up to which the dark space is taken apart into levels
GENERIC = "every interval at which no two seen energies differ by a multiple of 2*pi/tau"


def derive_detection(setting: Setting, wish: Wish) -> Derivation:
    """Total probability, bright and dark dimension, number of phases, and the dark states if asked for."""
    sight = Sight(setting)
    generic = total_probability(sight)
    claims = [_total(sight, generic), *_counts(sight)]
    dark = sight.dark_spaces() if wish.option("dark_basis", False) or sight.size <= SPLIT_UP_TO else []
    if wish.option("dark_basis", False):
        claims += _dark_states(sight, dark)
    shares, left_out = splitting(sight) if len(setting.detectors) > 1 else ({}, ())
    claims += [_share(sight, name, value) for name, value in shares.items()]
    lines = (*steps.written(sight, generic), *steps.split(shares))
    return Derivation("detection", tuple(claims), lines, (*_notes(sight, dark), *left_out), SOURCES)


def total_probability(sight: Sight) -> Formula:
    """sum over the start's parts of weight times squared length of the bright part."""
    if not sight.generic:
        return _by_phases(sight)
    field, total = sight.field, sight.field.zero
    for part in sight.parts:
        for c, n in zip(part.overlaps, sight.space.norms, strict=True):
            if c:
                total = total + part.weight * field.conjugate(c) * c / n
    return field.formula(total)


def _by_phases(sight: Sight) -> Formula:
    levels = sight.at_interval
    field, total = levels.field, levels.field.zero
    for k, part in enumerate(sight.parts):
        total = total + field.element(sight.field.formula(part.weight)) * seen_share(levels, k)
    return field.formula(total)


def valid_for(sight: Sight) -> str:
    """The interval and the letters for which generic answers hold."""
    if sight.is_step or sight.setting.interval.law != "fixed":
        return "; ".join(f"{text(f)} != 0" for f in sight.conditions)
    apart = [GENERIC] if sight.generic else [f"tau = {text(sight.setting.interval.length)}"]
    return "; ".join([*apart, *(f"{text(f)} != 0" for f in sight.conditions)])


def _total(sight: Sight, generic: Formula) -> Claim:
    """The generic value, and the values of letters where it is another."""
    special = pieces(sight.setting, sight.conditions, generic, lambda at: total_probability(Sight(at)))
    value = Cases((*special, ("otherwise", generic))) if special else generic
    quantity = Quantity("total detection probability")
    return Claim("detection.total", "detection", quantity, value, valid_for=valid_for(sight), source=SOURCES[0])


def _share(sight: Sight, name: str, value: Formula) -> Claim:
    quantity = Quantity("splitting probability", (("detector", name),))
    return Claim(f"detection.splitting.{name}", "detection", quantity, value, valid_for=valid_for(sight))


def _counts(sight: Sight) -> list[Claim]:
    rows = (
        ("bright_dimension", "bright dimension", sight.bright, "derived here"),
        ("dark_dimension", "dark dimension", sight.size - sight.bright, "derived here"),
        ("phases", "number of phases", sight.phases, SOURCES[1]),
    )
    valid = valid_for(sight)
    return [
        Claim(f"detection.{name}", "detection", Quantity(about), number(n), valid_for=valid, source=source)
        for name, about, n, source in rows
    ]


def _dark_states(sight: Sight, dark: Sequence[Krylov]) -> list[Claim]:
    """An orthogonal basis of what H never connects with the detector, one column a claim."""
    out = []
    for i, v in enumerate((v for piece in dark for v in piece.basis), start=1):
        column = Matrix(sight.size, (), tuple((x, ((0, sight.field.formula(v[x])),)) for x in sorted(v)))
        out.append(Claim(f"detection.dark.{i}", "detection", Quantity("dark state", (("state", i),)), column))
    return out


def _notes(sight: Sight, dark: Sequence[Krylov]) -> tuple[Prose, ...]:
    """Why something is dark: levels seen in one direction only, levels not seen, sites that look alike."""
    bright = [f for f, _ in sight.factors]
    inside = [f for piece in dark for f, _ in factored(sight.field, characteristic(piece))]
    partners, unseen = [f for f in inside if f in bright], [f for f in inside if f not in bright]
    return (
        *steps.levels_note("Degenerate levels leave dark partners of what is seen, at", partners),
        *steps.levels_note("Not seen at all are the levels at", unseen),
        *(steps.alike_note([sight.explored.space.name(x) for x in group]) for group in sight.alike()),
        *([] if sight.generic else [steps.merged_note(sight)]),
        *sight.warning(),
    )
