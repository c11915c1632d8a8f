"""Convergence studies: generators of records, tracking and the verdict."""
