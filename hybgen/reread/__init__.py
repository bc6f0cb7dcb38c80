"""C text -> trees, and their equality with the step law."""

from hybgen.reread.prove import Mismatch, reread

__all__ = ["Mismatch", "reread"]
