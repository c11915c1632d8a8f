"""Regulators: shapes s(y), their parameters and quadrature rules."""
