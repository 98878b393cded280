"""What to ask, stated in advance, and what the draws at hand can answer of it."""

from steelyard.planning.command import answer_plan
from steelyard.planning.plan_files import PlanFile, read_plan
from steelyard.planning.scenarios import Plan, Scenario
from steelyard.planning.triage import Triage, triage

__all__ = ["Plan", "PlanFile", "Scenario", "Triage", "answer_plan", "read_plan", "triage"]
