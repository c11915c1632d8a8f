"""Truncation -> FlowEquations: loops in flat space, and flows typed in directly."""
