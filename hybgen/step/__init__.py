"""Law -> StepLaw."""

from hybgen.step.build import build
from hybgen.step.model import StepLaw

__all__ = ["StepLaw", "build"]
