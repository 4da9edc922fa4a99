"""One page of HTML that a colleague can open: no outside links, no scripts, all that is shown escaped."""

from .page import write_report
from .sensors import sensors_report

__all__ = ["sensors_report", "write_report"]
