"""A finished inversion of a run folder, taken up again: :func:`finished_inversion`."""

from __future__ import annotations

from rayloom.inversion import InversionResult
from rayloom.model import SlownessModel
from rayloom.settings import RunSettings
from rayloom.workflow.data import read_back_residuals, read_earth
from rayloom.workflow.folder import RunFolder
from rayloom.workflow.result_file import load_result


def finished_inversion(folder: RunFolder, settings: RunSettings) -> InversionResult:
    """Read the inversion result of a run folder as the inversion returned it.

    Parameters
    ----------
    folder : RunFolder
        The run folder, or its part of one wave.
    settings : RunSettings
        The settings.

    Raises
    ------
    InputError
        If a file is wrong or belongs to other residuals.
    FileAccessError
        If a file cannot be read.
    """
    earth = read_earth(folder, settings.earth.model)
    data = read_back_residuals(folder, earth, settings)
    model = SlownessModel.read_netcdf(folder.file("model.nc"))
    return load_result(folder.file("inversion.npz"), data, model)
