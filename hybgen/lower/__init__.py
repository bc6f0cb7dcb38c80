"""StepLaw -> Program."""

from hybgen.lower.program import lower

__all__ = ["lower"]
