"""The check of a customer list: which sector serves each customer, how well, and why not."""

from planner.customers.answer import CustomerAnswer, Verdict
from planner.customers.check import check_customers

__all__ = ["CustomerAnswer", "Verdict", "check_customers"]
