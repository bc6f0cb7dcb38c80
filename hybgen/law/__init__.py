"""Law files: YAML with positions -> Law."""

from hybgen.law.model import Law
from hybgen.law.reader import UnreadableFile, load, read

__all__ = ["Law", "UnreadableFile", "load", "read"]
