"""Exact algebra: scalars, polynomials, expansions, families, operators; knows nothing of text."""
