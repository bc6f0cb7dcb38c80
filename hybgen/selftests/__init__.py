"""A test of the target: C that shows on the board that compiler, flags and core give the reference's bits."""

from hybgen.selftests.page import selftest

__all__ = ["selftest"]
