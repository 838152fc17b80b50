"""The domain model: a survey is a line (reaches, fittings, taps, gauges), its runs and their readings.

Everything here is in SI units (metres, seconds, kelvin, pascals, radians) and valid once made. An uncertainty
that nobody stated is None, never zero.
"""

from gradeline.gauge_kinds import GAUGE_KINDS, Calibration, GaugeKey, GaugeKind, Leg, Pressure
from gradeline.survey.fluid import BEYOND, Fluid, PropertyTable
from gradeline.survey.gauges import Gauge, Observation
from gradeline.survey.line import Fitting, Offtake, Reach, Section, SideValve, Site, Tap, WallHistory
from gradeline.survey.record import Clock, Record, Target, Window, still
from gradeline.survey.stated import Stated, StatedUncertainties
from gradeline.survey.whole import SourceFile, Survey

__all__ = [
    "BEYOND",
    "GAUGE_KINDS",
    "Calibration",
    "Clock",
    "Fitting",
    "Fluid",
    "Gauge",
    "GaugeKey",
    "GaugeKind",
    "Leg",
    "Observation",
    "Offtake",
    "Pressure",
    "PropertyTable",
    "Reach",
    "Record",
    "Section",
    "SideValve",
    "Site",
    "SourceFile",
    "Stated",
    "StatedUncertainties",
    "Survey",
    "Tap",
    "Target",
    "WallHistory",
    "Window",
    "still",
]
