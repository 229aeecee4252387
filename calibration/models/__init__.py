"""Tests and what surrounds them: requirements, standards, sheets, records, figures, standings."""

from calibration.models.guidance import GuidanceLine
from calibration.models.requirement import Deferral, PointList, Requirement, ToleranceForm
from calibration.models.sheet import Entry, Sheet
from calibration.models.standard import Certificate, Standard
from calibration.models.standing import ScheduleState, SearchWord, Standing
from calibration.models.test import (
    ChainHead,
    Reading,
    Record,
    Run,
    RunFigures,
    Signature,
    StandardUse,
    Test,
    Verdict,
)

__all__ = [
    "Certificate",
    "ChainHead",
    "Deferral",
    "Entry",
    "GuidanceLine",
    "PointList",
    "Reading",
    "Record",
    "Requirement",
    "Run",
    "RunFigures",
    "ScheduleState",
    "SearchWord",
    "Sheet",
    "Signature",
    "Standard",
    "StandardUse",
    "Standing",
    "Test",
    "ToleranceForm",
    "Verdict",
]
