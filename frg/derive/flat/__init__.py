"""Loops in flat space on a constant background."""
