"""One file a family: index check, order, to and from monomials, its product rules."""
