"""The Pyomo model and everything that picks: the proven design and what it is compared with."""

from trainopt.optimize.design import design

__all__ = ["design"]
