"""Results -> Plan: where the next sounding or test hole would most lower the doubt about what is asked."""

from geoves.planning.choose import plan_places
from geoves.planning.options import PlanOptions

__all__ = ["PlanOptions", "plan_places"]
