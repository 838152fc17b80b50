"""Before a test: what a survey is expected to tell, and what would make it tell more."""

from gradeline.planning.compose import plan
from gradeline.planning.tables import PLAN_TABLES, Plan

__all__ = ["PLAN_TABLES", "Plan", "plan"]
