"""A self-contained page about a run, and its figures and quantities as files."""

from fvcheck.reporting.making import Report, report

__all__ = ["Report", "report"]
