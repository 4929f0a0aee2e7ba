"""Which topics are derived, and by what.  A new topic is one file here and one line below."""

from __future__ import annotations

from collections.abc import Callable

from derive.derivations.absorber.lattice import derive_absorber_lattice
from derive.derivations.absorber.topic import derive_absorber
from derive.derivations.asymptotics.topic import derive_asymptotics
from derive.derivations.asymptotics.total import derive_total
from derive.derivations.classical.topic import derive_classical
from derive.derivations.detection.topic import derive_detection
from derive.derivations.exceptional.topic import derive_exceptional
from derive.derivations.generator.slow import derive_any_generator
from derive.derivations.levels.topic import derive_levels
from derive.derivations.moments.topic import derive_moments
from derive.derivations.renewal.topic import derive_renewal
from derive.derivations.survival.topic import derive_survival
from derive.derivations.validity.topic import derive_validity
from derive.problem.setting import Lattice, Setting, Wish
from derive.record.said import Derivation


def _detection(setting: Setting, wish: Wish) -> Derivation:
    """Finite graphs and infinite lattices have nothing in common but the question."""
    return (derive_total if isinstance(setting.space, Lattice) else derive_detection)(setting, wish)


def _absorber(setting: Setting, wish: Wish) -> Derivation:
    """On finite graphs what stands in for the detector; on an infinite one the absorber's own laws."""
    return (derive_absorber_lattice if isinstance(setting.space, Lattice) else derive_absorber)(setting, wish)


DERIVATIONS: dict[str, Callable[[Setting, Wish], Derivation]] = {
    "generator": derive_any_generator,
    "absorber": _absorber,
    "levels": derive_levels,
    "validity": derive_validity,
    "survival": derive_survival,
    "classical": derive_classical,
    "detection": _detection,
    "moments": derive_moments,
    "exceptional": derive_exceptional,
    "renewal": derive_renewal,
    "asymptotics": derive_asymptotics,
}
