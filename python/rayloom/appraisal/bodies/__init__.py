"""Bodies: connected anomalies, measured in every posterior sample.

:func:`find_bodies` finds them in the mean model and gives each measure its
90 % interval.
"""

from rayloom.appraisal.bodies.extent import BodyExtent, cut_depths_km, extent_of
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
from rayloom.appraisal.bodies.settings import BodySettings
from rayloom.appraisal.bodies.smearing import Smearing, smearing_at

__all__ = [
    "Body",
    "BodyExtent",
    "BodyMeasures",
    "BodyRegion",
    "BodySettings",
    "Interval",
    "Smearing",
    "core_of",
    "cut_depths_km",
    "explained_ms",
    "extent_of",
    "find_bodies",
    "find_regions",
    "main_component",
    "measure_body",
    "relative_to_layers",
    "smearing_at",
    "usable_blocks",
]
