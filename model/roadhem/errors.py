"""What can go wrong, each told in one sentence that says what to do."""

from __future__ import annotations


class RoadhemError(Exception):
    """Root of every error that Roadhem raises on purpose; its text is one sentence for the user."""


class BadInput(RoadhemError, ValueError):
    """Raised when something the user named cannot be used; the command line exits with status 2."""
