"""The demo: an invented survey, the whole job, and the truth beside what was found."""

from __future__ import annotations

import time
from pathlib import Path
from typing import Final

import numpy as np

from rayloom.demo import Body, BodyVerdict, DemoTruth, DemoVerdict, judge, write_survey
from rayloom.errors import InputError
from rayloom.model import SlownessModel
from rayloom.workflow import Reporter, Tables, initialise, run, summarise

_SURVEY: Final = "survey"


def demonstrate(folder: Path, reporter: Reporter) -> str:
    """Write the demo survey, run the whole job on it and judge the answer.

    A folder that holds the demo already is taken up where it was left.

    Parameters
    ----------
    folder : pathlib.Path
        A new or empty folder, or one of an earlier demo.
    reporter : Reporter
        Hears what happens.

    Returns
    -------
    str
        The truth beside what was found.

    Raises
    ------
    InputError
        If the folder holds something else.
    """
    survey = folder / _SURVEY
    truth_file = survey / "truth.json"
    if (
        folder.exists()
        and any(path.name != _SURVEY for path in folder.iterdir())
        and (not truth_file.exists())
    ):
        raise InputError(
            f"{folder} is not empty and holds no demo; name a new folder: rayloom demo DIR"
        )
    started = time.monotonic()
    if not truth_file.exists():
        reporter.begin("demo", "inventing a survey")
        write_survey(survey, progress=reporter.counter("tracing the true structure"))
        reporter.finish("demo", time.monotonic() - started)
    if not (folder / "rayloom.toml").exists():
        tables = Tables(survey / "stations.csv", survey / "events.csv", survey / "picks.csv")
        initialise(folder, tables, reporter=reporter)
    run(folder, reporter=reporter)
    verdict = judge_run(folder, DemoTruth.read_json(truth_file))
    seconds = time.monotonic() - started
    return f"{summarise(folder)}\n\n{describe(verdict)}\n\nThe whole job took {seconds:.0f} s."


def judge_run(folder: Path, truth: DemoTruth) -> DemoVerdict:
    """Compare what a run folder holds with the truth."""
    import pandas as pd

    after = pd.read_csv(
        folder / "residuals_after.csv",
        dtype={"event": str, "network": str, "station": str},
        keep_default_na=False,
        na_values={"residual_after_s": [""]},
    )
    after = after[after["residual_after_s"].notna()]
    keys = after["event"] + " " + after["network"] + "." + after["station"]
    return judge(
        truth,
        SlownessModel.read_netcdf(folder / "model.nc"),
        pick_keys=keys.to_numpy(dtype=str),
        residual_s=after["residual_after_s"].to_numpy(dtype=np.float64),
        uncertainty_s=after["uncertainty_s"].to_numpy(dtype=np.float64),
        suspected=(after["suspected_outlier"].astype(str).str.lower() == "true").to_numpy(),
    )


def describe(verdict: DemoVerdict) -> str:
    """Lay the truth beside what was found, as a table of text."""
    lines = [
        "The truth beside what was found",
        f"{'':<14}{'':<8}{'east km':>9}{'north km':>10}{'depth km':>10}{'peak %':>9}",
    ]
    for body in (verdict.slow, verdict.fast):
        lines += _body_lines(body)
    lines += [
        f"misfit over noise: {verdict.noise_ratio:.2f} over {verdict.picks_fitted} picks "
        "not suspected of error (1 is perfect)",
        f"gross errors put in: {verdict.outliers_true}, of which suspected: "
        f"{verdict.outliers_named}; good picks suspected: {verdict.outliers_false}",
    ]
    return "\n".join(lines)


def _body_lines(body: BodyVerdict) -> list[str]:
    if body.found is None:
        return [_row(body.name, "true", body.true), f"{'':<14}found   nothing of that sign"]
    return [
        _row(body.name, "true", body.true),
        _row("", "found", body.found),
        f"{'':<14}off by {body.horizontal_error_km:.0f} km horizontally, "
        f"{round(body.depth_error_km):+d} km in depth",
    ]


def _row(name: str, which: str, body: Body) -> str:
    return (
        f"{name:<14}{which:<8}{body.east_km:>9.0f}{body.north_km:>10.0f}"
        f"{body.depth_km:>10.0f}{body.peak_percent:>9.1f}"
    )
