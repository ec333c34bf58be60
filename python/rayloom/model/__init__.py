"""The model: a frame on the Earth, blocks in the frame, a slowness in each block.

:class:`Frame` places local coordinates on the sphere (or on a flat box),
:class:`BlockGrid` cuts a volume of it into blocks, :class:`SlownessModel` gives
each block a slowness and travels to and from netCDF. :func:`suggest_grid` proposes
blocks for a survey; :class:`GridSettings` keeps them in writing.
"""

from rayloom.model.frame import Frame
from rayloom.model.grid import BlockGrid, BlockWidths
from rayloom.model.settings import EdgeSegment, GridSettings, SuggestionSettings
from rayloom.model.slowness import SlownessModel
from rayloom.model.suggest import GridSuggestion, suggest_grid
from rayloom.model.transfer import with_perturbation_of, with_perturbation_of_file
from rayloom.model.wave_ratio import WaveRatio, wave_ratio

__all__ = [
    "BlockGrid",
    "BlockWidths",
    "EdgeSegment",
    "Frame",
    "GridSettings",
    "GridSuggestion",
    "SlownessModel",
    "SuggestionSettings",
    "WaveRatio",
    "suggest_grid",
    "wave_ratio",
    "with_perturbation_of",
    "with_perturbation_of_file",
]
