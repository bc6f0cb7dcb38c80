"""Positions, codes, findings, rendering."""
