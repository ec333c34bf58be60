"""What an inverted model is worth: coverage, restoration, resolution and errors.

:func:`posterior_samples` gives models that the data allow, for standard errors
and everything that is measured on a model; :func:`event_bootstrap`,
:func:`event_jackknife` and :func:`noise_repeats` what the data's own errors do;
:func:`probe_resolution` and :func:`point_spread` how the inversion smears;
:func:`restore` what comes back of a structure put in; :func:`ray_coverage` how rays
cross the blocks.
"""

from rayloom.appraisal.chunks import Checkpoints
from rayloom.appraisal.coverage import Coverage, ray_coverage
from rayloom.appraisal.patterns import (
    ColumnSettings,
    PatternSettings,
    SlabSettings,
    pattern_percent,
)
from rayloom.appraisal.probing import Probing, probe_resolution
from rayloom.appraisal.resampling import (
    Resampled,
    event_bootstrap,
    event_jackknife,
    noise_repeats,
)
from rayloom.appraisal.restoration import (
    Judgement,
    Restoration,
    restore,
    restore_through_finer_blocks,
)
from rayloom.appraisal.rowspace import RowSpace
from rayloom.appraisal.samples import Samples, posterior_samples
from rayloom.appraisal.settings import AppraisalSettings
from rayloom.appraisal.spread import FullWidth, PointSpread, full_width, point_spread

__all__ = [
    "AppraisalSettings",
    "Checkpoints",
    "ColumnSettings",
    "Coverage",
    "FullWidth",
    "Judgement",
    "PatternSettings",
    "PointSpread",
    "Probing",
    "Resampled",
    "Restoration",
    "RowSpace",
    "Samples",
    "SlabSettings",
    "event_bootstrap",
    "event_jackknife",
    "full_width",
    "noise_repeats",
    "pattern_percent",
    "point_spread",
    "posterior_samples",
    "probe_resolution",
    "ray_coverage",
    "restore",
    "restore_through_finer_blocks",
]
