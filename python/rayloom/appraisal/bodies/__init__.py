"""Bodies: connected anomalies, measured in every posterior sample.

:func:`find_bodies` finds them in the mean model and gives each measure its
90 % interval.
"""

from rayloom.appraisal.bodies.finding import (
    Body,
    core_of,
    explained_ms,
    find_bodies,
    usable_blocks,
)
from rayloom.appraisal.bodies.measures import BodyMeasures, Interval, measure_body
from rayloom.appraisal.bodies.regions import (
    BodyRegion,
    find_regions,
    main_component,
    relative_to_layers,
)
from rayloom.appraisal.bodies.smearing import Smearing, point_spread, smearing_at

__all__ = [
    "Body",
    "BodyMeasures",
    "BodyRegion",
    "Interval",
    "Smearing",
    "core_of",
    "explained_ms",
    "find_bodies",
    "find_regions",
    "main_component",
    "measure_body",
    "point_spread",
    "relative_to_layers",
    "smearing_at",
    "usable_blocks",
]
