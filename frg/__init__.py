"""Asymptotic safety and universality classes from functional renormalisation group flows."""

__version__ = "0.1.0"
