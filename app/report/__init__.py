"""The report: one HTML file that needs nothing else, to keep, to print and to check.

It holds no script, asks nothing of any host, and shows words from files as words.
"""

from .page import report_page
from .provenance import versions

__all__ = ["report_page", "versions"]
