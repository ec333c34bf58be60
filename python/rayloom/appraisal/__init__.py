"""What an inverted model is worth: coverage, restoration, resolution and errors.

:func:`posterior_samples` gives models that the data allow, for standard errors
and everything that is measured on a model; :func:`event_bootstrap` and
:func:`event_jackknife` what the data's own scatter says; :func:`probe_resolution`
and :func:`point_spread` how the inversion smears.
"""

from rayloom.appraisal.chunks import Checkpoints
from rayloom.appraisal.probing import Probing, probe_resolution
from rayloom.appraisal.resampling import Resampled, event_bootstrap, event_jackknife
from rayloom.appraisal.rowspace import RowSpace
from rayloom.appraisal.samples import Samples, posterior_samples
from rayloom.appraisal.spread import FullWidth, PointSpread, full_width, point_spread

__all__ = [
    "Checkpoints",
    "FullWidth",
    "PointSpread",
    "Probing",
    "Resampled",
    "RowSpace",
    "Samples",
    "event_bootstrap",
    "event_jackknife",
    "full_width",
    "point_spread",
    "posterior_samples",
    "probe_resolution",
]
