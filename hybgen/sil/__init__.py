"""Software in the loop: the generated C against the reference."""

from hybgen.sil.chip import Chip, compile
from hybgen.sil.lockstep import SilReport

__all__ = ["Chip", "SilReport", "compile"]
