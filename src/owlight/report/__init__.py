"""What a run found, as one page that stands alone."""

from owlight.report.page import write_report

__all__ = ["write_report"]
