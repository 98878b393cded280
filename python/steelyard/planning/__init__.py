"""What to ask, stated in advance, and what the draws at hand can answer of it."""

from steelyard.planning.arrival import Arrival, Batch
from steelyard.planning.command import answer_plan
from steelyard.planning.forecast import Forecast
from steelyard.planning.more_draws import MoreDraws, RefitValue, more_draws, value_of_refit
from steelyard.planning.plan_files import PlanFile, read_plan
from steelyard.planning.refits import RefitPlan, plan_refits
from steelyard.planning.scenarios import Plan, Scenario
from steelyard.planning.triage import Triage, triage

__all__ = [
    "Arrival",
    "Batch",
    "Forecast",
    "MoreDraws",
    "Plan",
    "PlanFile",
    "RefitPlan",
    "RefitValue",
    "Scenario",
    "Triage",
    "answer_plan",
    "more_draws",
    "plan_refits",
    "read_plan",
    "triage",
    "value_of_refit",
]
