"""Files to a survey: every problem is collected with its place, and all are told at once."""

from gradeline.loader.ledger import PLACEHOLDER
from gradeline.loader.planned import read_plan
from gradeline.loader.read import read_survey

__all__ = ["PLACEHOLDER", "read_plan", "read_survey"]
