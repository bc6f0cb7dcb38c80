"""Program -> C text."""

from hybgen.emit.source import emit

__all__ = ["emit"]
