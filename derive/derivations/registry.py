"""Which topics are derived, and by what.  A new topic is one file here and one line below."""

from __future__ import annotations

from collections.abc import Callable

from derive.derivations.absorber import derive_absorber
from derive.derivations.asymptotics import derive_asymptotics
from derive.derivations.detection import derive_detection
from derive.derivations.generator_slow import derive_any_generator
from derive.derivations.levels import derive_levels
from derive.derivations.moments import derive_moments
from derive.derivations.survival import derive_survival
from derive.derivations.validity import derive_validity
from derive.problem.setting import Setting, Wish
from derive.record.said import Derivation

DERIVATIONS: dict[str, Callable[[Setting, Wish], Derivation]] = {
    "generator": derive_any_generator,
    "absorber": derive_absorber,
    "levels": derive_levels,
    "validity": derive_validity,
    "survival": derive_survival,
    "detection": derive_detection,
    "moments": derive_moments,
    "asymptotics": derive_asymptotics,
}
