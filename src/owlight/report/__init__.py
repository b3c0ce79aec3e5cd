"""What a run found, as one page that stands alone."""

from owlight.report.page import write_report
from owlight.report.picture import write_curve

__all__ = ["write_curve", "write_report"]
