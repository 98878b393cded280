"""Is the claimed base the true base?"""

from steelyard.checking.check import check
from steelyard.checking.findings import Finding, Findings

__all__ = ["Finding", "Findings", "check"]
