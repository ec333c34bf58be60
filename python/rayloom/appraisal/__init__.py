"""What an inverted model is worth: coverage, restoration, resolution and errors.

:func:`posterior_samples` gives models that the data allow, for standard errors
and everything that is measured on a model; :func:`event_bootstrap`,
:func:`event_jackknife` and :func:`noise_repeats` what the data's own errors do;
:func:`probe_resolution` and :func:`point_spread` how the inversion smears;
:func:`restore` what comes back of a structure put in; :func:`ray_coverage` how rays
cross the blocks. :func:`find_bodies` measures connected anomalies in every sample,
:func:`squeeze` and :func:`scan_depths` tell whether the data demand structure
somewhere, :func:`leak_tests` what anomalies outside would feign inside, and
:func:`temperature_range` which temperatures an anomaly could stand for.
"""

from rayloom.appraisal.bodies import Body, BodySettings, Interval, extent_of, find_bodies
from rayloom.appraisal.chunks import Checkpoints
from rayloom.appraisal.compressed import CompressedData, compress
from rayloom.appraisal.coverage import Coverage, ray_coverage
from rayloom.appraisal.leak_sources import outside_sources
from rayloom.appraisal.leaks import Leak, LeakSource, crust_source, leak_tests
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
from rayloom.appraisal.squeezing import (
    DepthScan,
    SqueezedFirst,
    SqueezeTest,
    scan_depths,
    squeeze,
    squeezed_first,
)
from rayloom.appraisal.temperature import TemperatureRange, temperature_range

__all__ = [
    "AppraisalSettings",
    "Body",
    "BodySettings",
    "Checkpoints",
    "ColumnSettings",
    "CompressedData",
    "Coverage",
    "DepthScan",
    "FullWidth",
    "Interval",
    "Judgement",
    "Leak",
    "LeakSource",
    "PatternSettings",
    "PointSpread",
    "Probing",
    "Resampled",
    "Restoration",
    "RowSpace",
    "Samples",
    "SlabSettings",
    "SqueezeTest",
    "SqueezedFirst",
    "TemperatureRange",
    "compress",
    "crust_source",
    "event_bootstrap",
    "event_jackknife",
    "extent_of",
    "find_bodies",
    "full_width",
    "leak_tests",
    "noise_repeats",
    "outside_sources",
    "pattern_percent",
    "point_spread",
    "posterior_samples",
    "probe_resolution",
    "ray_coverage",
    "restore",
    "restore_through_finer_blocks",
    "scan_depths",
    "squeeze",
    "squeezed_first",
    "temperature_range",
]
