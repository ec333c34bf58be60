"""The demo: an invented volcanic highland with a known truth.

:func:`write_survey` writes the files that a user would bring, computed on
blocks finer than and turned against those that an inversion would choose;
:func:`judge` compares a model with what lies below.
"""

from rayloom.demo.bodies import Body, strongest_body
from rayloom.demo.invention import DEFAULT_SEED, Scenario
from rayloom.demo.survey_files import write_survey
from rayloom.demo.truth import DemoTruth, EventError, Outlier
from rayloom.demo.verdict import BodyVerdict, DemoVerdict, judge

__all__ = [
    "DEFAULT_SEED",
    "Body",
    "BodyVerdict",
    "DemoTruth",
    "DemoVerdict",
    "EventError",
    "Outlier",
    "Scenario",
    "judge",
    "strongest_body",
    "write_survey",
]
