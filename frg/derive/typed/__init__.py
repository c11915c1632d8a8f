"""Flows given directly in the truncation file."""
