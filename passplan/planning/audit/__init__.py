"""Checks a finished plan by an independent path: it imports nothing of what finds plans."""

from passplan.planning.audit.check import audit_plan
from passplan.planning.audit.faults import Fault

__all__ = ["Fault", "audit_plan"]
