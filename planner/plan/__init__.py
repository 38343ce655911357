"""The plan file: read it, validate it, run it; the whole job without a command line."""

from planner.plan.read import EirpExcess, Plan, eirp_excesses, read_plan

__all__ = ["EirpExcess", "Plan", "eirp_excesses", "read_plan"]
