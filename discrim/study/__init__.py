"""The study file: reading it, and what later stages ask of it."""

from discrim.study.load import load
from discrim.study.lookup import (
    check_measured,
    measured_species,
    to_shown,
    unit_of_species,
    unmeasured,
    unused_constants,
)
from discrim.study.model import Study

__all__ = [
    "Study",
    "check_measured",
    "load",
    "measured_species",
    "to_shown",
    "unit_of_species",
    "unmeasured",
    "unused_constants",
]
