"""The law in Python."""

from hybgen.reference.reference import Reference

__all__ = ["Reference"]
