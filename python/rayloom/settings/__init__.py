"""The settings of a run: one class per section, TOML in, commented TOML out.

The main type is :class:`RunSettings`, which assembles the settings that each room
keeps beside its code; :func:`read_run_settings` and :func:`run_settings_text` carry
it from and to a file.
"""

from rayloom.settings.changing import change_run_settings
from rayloom.settings.run import (
    EarthSettings,
    InputSettings,
    RunInversionSettings,
    RunOutputSettings,
    RunSettings,
)
from rayloom.settings.run_file import read_run_settings, run_settings_text

__all__ = [
    "EarthSettings",
    "InputSettings",
    "RunInversionSettings",
    "RunOutputSettings",
    "RunSettings",
    "change_run_settings",
    "read_run_settings",
    "run_settings_text",
]
