"""What an inverted model is worth: coverage, restoration, resolution and errors.

:func:`posterior_samples` gives models that the data allow, for standard errors
and everything that is measured on a model.
"""

from rayloom.appraisal.chunks import Checkpoints
from rayloom.appraisal.rowspace import RowSpace
from rayloom.appraisal.samples import Samples, posterior_samples

__all__ = ["Checkpoints", "RowSpace", "Samples", "posterior_samples"]
