"""The waves that a run inverts, and where the results of each go.

The main function is :func:`wave_parts`.
"""

from __future__ import annotations

from collections import Counter
from dataclasses import dataclass
from pathlib import Path

from rayloom.earth import PHASES, phase_wave, standard_phase
from rayloom.errors import FileAccessError
from rayloom.settings import RunSettings
from rayloom.workflow.folder import WAVES, RunFolder


@dataclass(frozen=True)
class WavePart:
    """One wave of a run.

    Parameters
    ----------
    folder : RunFolder
        Where its results go: the run folder itself if the run has one wave only.
    settings : RunSettings
        Those of the run, with ``inversion.wave`` the wave itself.
    """

    folder: RunFolder
    settings: RunSettings


def wave_parts(folder: RunFolder, settings: RunSettings) -> list[WavePart]:
    """Tell which waves a run inverts and where the results of each go.

    Parameters
    ----------
    folder : RunFolder
        The run folder; or a part of it, which then stands for its wave alone.
    settings : RunSettings
        Their ``inversion.wave`` chooses; "auto" takes each wave of which
        ``residuals.csv`` holds an event with enough picks.

    Returns
    -------
    list of WavePart
        One whose folder is the run folder, or P and S with a sub-folder each.

    Raises
    ------
    FileAccessError
        If ``residuals.csv`` is there and cannot be read.
    """
    if folder.wave is not None:
        return [WavePart(folder, settings.for_wave(folder.wave))]
    waves = _chosen_waves(folder, settings)
    if len(waves) == 1:
        return [WavePart(folder, settings.for_wave(waves[0]))]
    return [WavePart(folder.part(wave), settings.for_wave(wave)) for wave in waves]


def earlier_results(folder: RunFolder, parts: list[WavePart]) -> str | None:
    """Remark on results of an earlier choice of waves that lie beside those of now."""
    places = {part.folder for part in parts}
    idle = [home for home in (folder.part(wave) for wave in WAVES) if home not in places]
    names = [f"{home.path.name}/" for home in idle if home.provenance.exists()]
    if folder not in places and folder.file("model.nc").exists():
        names.append("model.nc and what else lies beside rayloom.toml")
    if folder.wave is not None or not names:
        return None
    return f"from an earlier choice of waves and left as it is: {', '.join(names)}"


def _chosen_waves(folder: RunFolder, settings: RunSettings) -> tuple[str, ...]:
    chosen = settings.inversion.wave
    if chosen != "auto":
        return (chosen,)
    if not folder.residuals.exists():
        return ("P",)
    least = settings.inversion.min_picks_per_event
    sizes = _picks_of_groups(folder.residuals)
    found = {phase_wave(phase) for (_, phase), picks in sizes.items() if picks >= least}
    return tuple(wave for wave in WAVES if wave in found) or ("P",)


def _picks_of_groups(path: Path) -> Counter[tuple[str, str]]:
    """Count the residuals of each event and phase that is known."""
    import pandas as pd

    try:
        table = pd.read_csv(
            path, usecols=["event", "phase"], dtype=str, keep_default_na=False
        ).map(str.strip)
    except (OSError, ValueError) as error:
        raise FileAccessError(
            f"{path}: cannot be read as residuals ({error}); "
            f"write it again with: rayloom residuals {path.parent} --again"
        ) from error
    phases = [standard_phase(name) for name in table["phase"]]
    return Counter(
        (event, phase)
        for event, phase in zip(table["event"], phases, strict=True)
        if phase in PHASES
    )
