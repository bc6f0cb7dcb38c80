"""Expressions: tokens, trees, types, units, printing."""
