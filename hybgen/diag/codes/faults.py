"""HG9xx: faults in hybgen itself."""

from hybgen.diag.codes.code import Code

FAULTS = (
    Code(
        "HG901",
        "fault",
        "error",
        "a fault in hybgen",
        "Not your law's fault. Run again with --debug and report what it prints, with the law if you can.",
        "—",
        "—",
    ),
)
