"""Names of seismic phases and the waves as which they arrive."""

from __future__ import annotations

from typing import Final

from rayloom._core import LayeredEarth
from rayloom.errors import InputError

_WAVE: Final = {name: wave for name, wave, _ in LayeredEarth.phases()}
_STANDARD: Final = {alias: name for name, _, alias in LayeredEarth.phases() if alias}

PHASES: Final = tuple(_WAVE)
"""Names of the phases that can be timed."""


def standard_phase(name: str) -> str:
    """Name under which a phase is known here.

    Parameters
    ----------
    name : str
        Any name, for example ``"PKIKP"``.

    Returns
    -------
    str
        The usual name (``"PKPdf"``), or `name` itself if it is no alias.
    """
    return _STANDARD.get(name, name)


def phase_wave(name: str) -> str:
    """Wave type as which a phase reaches the receiver.

    Parameters
    ----------
    name : str
        One of :data:`PHASES` or an alias.

    Returns
    -------
    str
        ``"P"`` or ``"S"``.

    Raises
    ------
    InputError
        If the phase is unknown.
    """
    wave = _WAVE.get(standard_phase(name))
    if wave is None:
        raise InputError(f"phase: expected one of {', '.join(PHASES)}, got {name!r}")
    return wave
