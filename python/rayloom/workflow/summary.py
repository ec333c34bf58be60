"""What a run folder holds, in a few lines for a person."""

from __future__ import annotations

import math
from collections import Counter
from collections.abc import Mapping, Sequence
from pathlib import Path
from typing import Any

from rayloom.workflow.folder import RunFolder
from rayloom.workflow.record import Provenance
from rayloom.workflow.waves import wave_parts

_ORDER = ("residuals", "invert", "export", "ratio")
_LABEL_WIDTH = 12
_LOOK_FIRST = ("report.html", "figures/", "ratio.nc", "model.nc", "model.vts", "rays.vtp")


def summarise(path: str | Path, *, upto: str = "ratio") -> str:
    """Tell what the steps done so far have found.

    Parameters
    ----------
    path : str or pathlib.Path
        The run folder, or its part of one wave.
    upto : {"residuals", "invert", "export", "ratio"}
        The last step to tell of.

    Returns
    -------
    str
        A few lines: data, exclusions, misfit, model, files.
    """
    folder = RunFolder.at(path)
    told = _ORDER[: _ORDER.index(upto) + 1]
    lines: list[tuple[str, str]] = []
    if "residuals" in Provenance(folder.run.provenance).steps:
        lines += _data_lines(folder)
    parts = wave_parts(folder, folder.read_settings())
    for part in parts:
        lines += _part_lines(part.folder, told)
    if len(parts) > 1:
        lines += _joint_lines(folder) if "ratio" in told else []
    return "\n".join(f"{label:<{_LABEL_WIDTH}}{text}" for label, text in lines)


def _part_lines(home: RunFolder, told: Sequence[str]) -> list[tuple[str, str]]:
    """Tell of one wave."""
    lines = [] if home.wave is None else [(f"{home.wave} waves", "")]
    steps = Provenance(home.provenance).steps
    if "invert" in steps and "invert" in told:
        lines += _model_lines(home, steps["invert"].remarks)
    return [*lines, *_file_lines(home, told)]


def _joint_lines(folder: RunFolder) -> list[tuple[str, str]]:
    """Tell how P and S compare."""
    step = Provenance(folder.provenance).steps.get("ratio")
    if step is None:
        return []
    return [("S to P", step.remarks.get("ratio", "")), *_file_lines(folder, ["ratio"])]


def _file_lines(home: RunFolder, told: Sequence[str]) -> list[tuple[str, str]]:
    """Name the files of the steps told of."""
    steps = Provenance(home.provenance).steps
    written = [name for step in told if step in steps for name in steps[step].outputs]
    return [("results", f"in {home.path}: {_listing(written)}")] if written else []


def _data_lines(folder: RunFolder) -> list[tuple[str, str]]:
    import pandas as pd

    used = pd.read_csv(folder.residuals, usecols=["event", "network", "station"], dtype=str)
    stations = used[["network", "station"]].drop_duplicates()
    lines = [
        (
            "residuals",
            f"{len(used)} at {len(stations)} stations from {used['event'].nunique()} events",
        )
    ]
    excluded = pd.read_csv(folder.exclusions, dtype=str, keep_default_na=False)
    if len(excluded):
        counts = Counter(excluded["reason"].tolist()).most_common()
        parts = [f"{count} {reason.replace('_', ' ')}" for reason, count in counts]
        lines.append(
            ("left out", f"{len(excluded)}: {', '.join(parts)} (listed in exclusions.csv)")
        )
    return lines


def _model_lines(folder: RunFolder, remarks: Mapping[str, str]) -> list[tuple[str, str]]:
    import pandas as pd

    history = pd.read_csv(folder.file("history.csv"))
    first: Any = history.iloc[0]
    last: Any = history.iloc[-1]
    suspects = int(last["suspected_outliers"])
    chi2 = f"chi2 {last['chi2']:.0f}, without suspected outliers {last['chi2_kept']:.0f}"
    if math.isfinite(last["chi2_expected"]):
        chi2 += (
            f" ({last['chi2_expected']:.0f} and {last['chi2_kept_expected']:.0f}, rms "
            f"{last['rms_kept_expected_s']:.3f} s, expected if the uncertainties are right)"
        )
    return [
        (
            "misfit",
            f"rms {first['rms_kept_s']:.3f} s -> {last['rms_kept_s']:.3f} s without suspected "
            f"outliers, variance reduction {last['variance_reduction_percent']:.0f} %; "
            f"{suspects} suspected (listed in suspected_outliers.csv)",
        ),
        ("", chi2),
        (
            "model",
            f"{int(last['iteration'])} iterations, perturbation rms "
            f"{last['model_rms_percent']:.2f} %, relative to the regional mean",
        ),
        *[("", remarks[name]) for name in ("prior", "structure") if name in remarks],
        ("stopped", remarks.get("stopped_because", "")),
    ]


def _listing(names: list[str]) -> str:
    """Name what a person looks at first, and count the rest."""
    top = {name.split("/")[0] + ("/" if "/" in name else "") for name in names}
    first = [name for name in _LOOK_FIRST if name in top] or sorted(top)
    rest = len(top) - len(first)
    return ", ".join(first) + (f" and {rest} more" if rest else "")
